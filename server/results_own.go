package server

import (
	"context"
	"io"
	"strconv"

	"github.com/labstack/echo/v4"

	"tripwell/export/intake"
	"tripwell/export/results"
)

// outcomesSent is the most rows of a report that go to a command; the counts are of all, and rows that are not in come
// whole in their own file.
const outcomesSent = 500

// ownImportReadings takes readings, or past results, as CSV or XLSX in the body and answers as work does; its report is
// results.Report. Query: by (person), name (of the file), ask (so many bytes of the body, before the file, are a
// results.Ask).
func (s *Server) ownImportReadings(c echo.Context) error {
	by, err := s.ownBy(c)
	if err != nil {
		return err
	}
	body := c.Request().Body
	ask, err := askBefore(c.QueryParam("ask"), body)
	if err != nil {
		return err
	}
	return s.work(c, func(ctx context.Context, progress func(done, total int64)) (any, error) {
		book, err := results.Open(c.QueryParam("name"), body, intake.Caps{Bytes: importLimit})
		if err != nil {
			return nil, err
		}
		report, err := results.Import(ctx, s.store, by, book, ask, func(done, total int) { progress(int64(done), int64(total)) })
		report.Shorten(outcomesSent)
		return report, err
	})
}

// askBefore reads the ask that stands before a file; length "" is none.
func askBefore(length string, body io.Reader) (results.Ask, error) {
	n, err := strconv.Atoi(length)
	if length == "" {
		return results.Ask{}, nil
	}
	if err != nil || n < 0 || n > formLimit {
		return results.Ask{}, refuse(codeInvalid, "map", "What the columns mean is longer than is taken here. Leave out the columns that are not needed.")
	}
	raw := make([]byte, n)
	if _, err := io.ReadFull(body, raw); err != nil {
		return results.Ask{}, refuse(codeInvalid, "map", "What the columns mean was cut short. Send it again.")
	}
	return results.ParseAsk(raw)
}
