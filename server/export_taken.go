package server

import (
	"context"
	"io"

	"github.com/labstack/echo/v4"

	"tripwell/export"
	"tripwell/forms"
	"tripwell/store"
)

const (
	workbookKind = "application/vnd.openxmlformats-officedocument.spreadsheetml.sheet"
	pdfKind      = "application/pdf"
)

// exportTaken writes down that something leaves the house, before it leaves.
func (s *Server) exportTaken(ctx context.Context, by, what, site string, from, to forms.Day) error {
	body := map[string]any{"what": what, "site": site, "from": from.String(), "to": to.String()}
	_, err := s.store.Append(ctx, store.Draft{Kind: "export.taken", Log: "office", Subject: by, By: by, Body: body})
	return err
}

// sendWorkbook sends the workbook of a scope; the office page and the owner's face send the same one.
func (s *Server) sendWorkbook(c echo.Context, sc store.Scope, by string) error {
	from, err := dayParam(c, "from")
	if err != nil {
		return err
	}
	to, err := dayParam(c, "to")
	if err != nil {
		return err
	}
	if from != forms.NoDay && to != forms.NoDay && to < from {
		return refuse(codeInvalid, "to", "The period ends before it begins. Swap its two days.")
	}
	site, name, err := s.siteAsked(sc, c.QueryParam("site"))
	if err != nil {
		return err
	}
	if err := s.exportTaken(c.Request().Context(), by, "workbook", site, from, to); err != nil {
		return err
	}
	return s.download(c, workbookKind, "tripwell-"+name+".xlsx", func(w io.Writer) error {
		return export.WorkbookOf(w, s.store, sc, export.WorkbookAsk{Site: site, From: from, To: to})
	})
}

// siteAsked resolves an optional site, so that a wrong one is told before anything is written down: its id, and its code
// for the file's name ("all" without a site).
func (s *Server) siteAsked(sc store.Scope, idOrCode string) (id, name string, err error) {
	if idOrCode == "" {
		return "", "all", nil
	}
	err = s.store.View(sc, func(v *store.View) error {
		site, err := v.Site(idOrCode)
		id, name = site.ID, site.Code
		return err
	})
	return id, name, err
}
