package server

import (
	"context"
	"io"
	"strconv"

	"github.com/labstack/echo/v4"

	"tripwell/export/intake"
	"tripwell/export/register"
)

// ownImportRegister takes a register as CSV or XLSX in the body and answers as work does; its report is register.Report.
// Query: by (person), name (of the file), site (code of the site that rows which name none belong to), zone (of new
// sites), dates (dmy or mdy), tags=new (give every place of the file without a tag a new one), dry=1 (append nothing),
// rejects=1 (the report carries the rows that were left out), map (so many bytes of the body, before the file, are a
// register.Mapping).
func (s *Server) ownImportRegister(c echo.Context) error {
	by, err := s.ownBy(c)
	if err != nil {
		return err
	}
	body := c.Request().Body
	mapping, err := mappingBefore(c.QueryParam("map"), body)
	if err != nil {
		return err
	}
	for name, into := range map[string]*string{"site": &mapping.Site, "zone": &mapping.Zone, "dates": (*string)(&mapping.Dates)} {
		if v := c.QueryParam(name); v != "" {
			*into = v
		}
	}
	if err := mapping.Check(); err != nil {
		return err
	}
	options := register.Options{By: by, Mapping: mapping, NewTags: c.QueryParam("tags") == "new", DryRun: c.QueryParam("dry") == "1", Rejects: c.QueryParam("rejects") == "1",
		Caps: intake.Caps{Bytes: importLimit}}
	return s.work(c, func(ctx context.Context, progress func(done, total int64)) (any, error) {
		return register.Import(ctx, s.store, c.QueryParam("name"), body, options, func(done, total int) { progress(int64(done), int64(total)) })
	})
}

// mappingBefore reads the mapping that stands before a file; length "" is none.
func mappingBefore(length string, body io.Reader) (register.Mapping, error) {
	if length == "" {
		return register.Mapping{}, nil
	}
	n, err := strconv.Atoi(length)
	if err != nil || n < 0 || n > formLimit {
		return register.Mapping{}, refuse(codeInvalid, "map", "The length of the columns file is no number of bytes that is taken here.")
	}
	raw := make([]byte, n)
	if _, err := io.ReadFull(body, raw); err != nil {
		return register.Mapping{}, refuse(codeInvalid, "map", "The columns file was cut short. Send it again.")
	}
	return register.ParseMapping(raw)
}
