package server

import (
	"io"

	"github.com/labstack/echo/v4"

	"tripwell/export/bundle"
	"tripwell/store"
)

const zipKind = "application/zip"

// bundleTake sends the bundle of what the reader may see.
func (s *Server) bundleTake(c echo.Context) error {
	p, sc := person(c), scope(c)
	return s.sendBundle(c, sc, p.ID)
}

func (s *Server) ownBundle(c echo.Context) error {
	by, err := s.ownBy(c)
	if err != nil {
		return err
	}
	return s.sendBundle(c, ownerScope, by)
}

// sendBundle sends a bundle: site, from and to as of a workbook.
func (s *Server) sendBundle(c echo.Context, sc store.Scope, by string) error {
	if err := wholeLogs(sc); err != nil {
		return err
	}
	ask, name, err := s.workbookAsk(c, sc)
	if err != nil {
		return err
	}
	if err := s.exportTaken(c.Request().Context(), by, "bundle", ask.Site, ask.From, ask.To); err != nil {
		return err
	}
	return s.download(c, zipKind, "tripwell-"+name+".zip", func(w io.Writer) error {
		// Computing the workbook from the records sends nothing for a while: an empty write moves the deadlines on.
		stay := func(done, total int64) { _, _ = w.Write(nil) } // a broken line shows at the next write
		return bundle.Write(c.Request().Context(), w, s.store, sc, bundle.Ask{Site: ask.Site, From: ask.From, To: ask.To, Organisation: ask.Organisation, Progress: stay})
	})
}

// wholeLogs refuses a bundle to whoever sees a period only: it proves nothing about a part of a log.
func wholeLogs(sc store.Scope) error {
	if sc.Period != nil {
		return refuse(codeForbidden, "", "A bundle holds whole logs, and your access is for a period. Ask a manager to make the bundle for you, or take the workbook.")
	}
	return nil
}
