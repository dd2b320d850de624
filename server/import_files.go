package server

import (
	"encoding/json"
	"io"

	"github.com/labstack/echo/v4"

	"tripwell/export/register"
)

// importRejects sends the rows that were left out, or would be, with what is wrong in each.
func (s *Server) importRejects(c echo.Context) error {
	u, err := s.uploadFor(c)
	if err != nil {
		return err
	}
	if u.done == nil {
		p, err := s.prepared(c, u)
		if err != nil {
			return err
		}
		u.rejects = p.Rejects()
	}
	if c.Param("file") == "rejects.csv" {
		return s.download(c, "text/csv; charset=utf-8", s.words.Say("intake.rejects_file")+".csv", func(w io.Writer) error { return register.WriteRejectsCSV(w, u.rejects) })
	}
	return s.download(c, workbookKind, s.words.Say("intake.rejects_file")+".xlsx", func(w io.Writer) error { return register.WriteRejectsXLSX(w, u.rejects) })
}

// importMapping sends the columns as they were read, to be chosen beside the next file of the same shape.
func (s *Server) importMapping(c echo.Context) error {
	u, err := s.uploadFor(c)
	if err != nil {
		return err
	}
	mapping := u.mapping
	if u.done != nil {
		mapping = u.done.Mapping
	} else if p, err := s.prepared(c, u); err == nil {
		mapping = p.Report.Mapping
	}
	return s.download(c, "application/json", s.words.Say("intake.columns_file")+".json", func(w io.Writer) error {
		enc := json.NewEncoder(w)
		enc.SetEscapeHTML(false)
		enc.SetIndent("", " ")
		return enc.Encode(mapping)
	})
}

// importFile sends one of the files an upload gives.
func (s *Server) importFile(c echo.Context) error {
	switch c.Param("file") {
	case "rejects.csv", "rejects.xlsx":
		return s.importRejects(c)
	case "columns.json":
		return s.importMapping(c)
	}
	return echo.ErrNotFound
}
