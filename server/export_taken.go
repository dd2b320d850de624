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

// workbookAsk reads which part of the store is asked for: site (id or code), from and to (test days); name is for the
// file.
func (s *Server) workbookAsk(c echo.Context, sc store.Scope) (ask export.WorkbookAsk, name string, err error) {
	return s.workbookAsked(sc, c.QueryParam)
}

// workbookAsked reads the same from wherever it was typed.
func (s *Server) workbookAsked(sc store.Scope, get func(string) string) (ask export.WorkbookAsk, name string, err error) {
	if ask.From, err = dayTyped("from", get("from")); err != nil {
		return ask, "", err
	}
	if ask.To, err = dayTyped("to", get("to")); err != nil {
		return ask, "", err
	}
	if ask.From != forms.NoDay && ask.To != forms.NoDay && ask.To < ask.From {
		return ask, "", refuse(codeInvalid, "to", "The period ends before it begins. Swap its two days.")
	}
	if sc.Period != nil { // what lies outside is not shown; the cover says the period it was read for
		if ask.From == forms.NoDay || ask.From < sc.Period.From {
			ask.From = sc.Period.From
		}
		if ask.To == forms.NoDay || ask.To > sc.Period.To {
			ask.To = sc.Period.To
		}
		if ask.To < ask.From {
			return ask, "", refuse(codeInvalid, "from", "Your access is for tests of "+sc.Period.From.String()+" to "+sc.Period.To.String()+". Choose days within.")
		}
	}
	if p, err := s.store.Person(sc.Person); err == nil {
		ask.Access = s.accessWords(p)
	}
	ask.Site, name, err = s.siteAsked(sc, get("site"))
	return ask, name, err
}

// sendWorkbook sends the workbook of a scope; the office page and the owner's face send the same one.
func (s *Server) sendWorkbook(c echo.Context, sc store.Scope, by string) error {
	ask, name, err := s.workbookAsk(c, sc)
	if err != nil {
		return err
	}
	if err := s.exportTaken(c.Request().Context(), by, "workbook", ask.Site, ask.From, ask.To); err != nil {
		return err
	}
	return s.download(c, workbookKind, "tripwell-"+name+".xlsx", func(w io.Writer) error {
		return export.WorkbookOf(w, s.store, sc, ask)
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

// sendTable sends one sheet of the workbook. Query: as the workbook's, and sheet and as (csv or jsonl).
func (s *Server) sendTable(c echo.Context, sc store.Scope, by string) error {
	ask, name, err := s.workbookAsk(c, sc)
	if err != nil {
		return err
	}
	sheet, as := c.QueryParam("sheet"), c.QueryParam("as")
	if err := export.KnownTable(sheet, as); err != nil {
		return err
	}
	if err := s.exportTaken(c.Request().Context(), by, "table", ask.Site, ask.From, ask.To); err != nil {
		return err
	}
	kind := map[string]string{"csv": "text/csv; charset=utf-8; header=present", "jsonl": "application/jsonl"}[as]
	if s.store.Demo() {
		name = "DEMO-" + name // a table has no room for the mark
	}
	return s.download(c, kind, "tripwell-"+name+"-"+sheet+"."+as, func(w io.Writer) error {
		return export.TableOf(w, s.store, sc, ask, sheet, as)
	})
}

// tableTake and ownTable are its two doors.
func (s *Server) tableTake(c echo.Context) error { return s.sendTable(c, scope(c), person(c).ID) }

func (s *Server) ownTable(c echo.Context) error {
	by, err := s.ownBy(c)
	if err != nil {
		return err
	}
	return s.sendTable(c, ownerScope, by)
}
