package server

import (
	"io"
	"strings"

	"github.com/labstack/echo/v4"

	"tripwell/export"
	"tripwell/export/paper"
	"tripwell/forms"
	"tripwell/store"
)

// sendRound sends a round sheet. Query: site (id or code), task, until (last due day; none = every device that has the
// task), or round (id), as (pdf or xlsx), paper (letter or a4).
func (s *Server) sendRound(c echo.Context, sc store.Scope, by string) error {
	until, err := dayParam(c, "until")
	if err != nil {
		return err
	}
	size, err := paper.SizeNamed(c.QueryParam("paper"))
	if err != nil {
		return err
	}
	write, kind, end := func(w io.Writer, r paper.Round) error { return paper.Print(w, r, size) }, pdfKind, ".pdf"
	switch c.QueryParam("as") {
	case "", "pdf":
	case "xlsx":
		write, kind, end = paper.Worksheet, workbookKind, ".xlsx"
	default:
		return refuse(codeInvalid, "as", "A round sheet can be had as pdf or as xlsx.")
	}
	site := c.QueryParam("site")
	if id := c.QueryParam("round"); id != "" {
		err := s.store.View(sc, func(v *store.View) error {
			r, err := v.Round(id)
			site = r.Site
			return err
		})
		if err != nil {
			return err
		}
	}
	if site == "" {
		return refuse(codeInvalid, "site", "A round sheet is of one site. Choose it.")
	}
	var round paper.Round
	err = s.store.View(sc, func(v *store.View) error {
		at, err := v.Site(site)
		if err != nil {
			return err
		}
		today := forms.DayOf(s.store.Now().In(at.Location()))
		round, err = paper.RoundOf(v, today, paper.RoundAsk{Site: at.ID, Round: c.QueryParam("round"), Task: c.QueryParam("task"), Until: until, On: today, URL: s.store.URL(), Demo: s.store.Demo()})
		return err
	})
	if err != nil {
		return err
	}
	if err := s.exportTaken(c.Request().Context(), by, "round-sheet", round.Site.ID, forms.NoDay, until); err != nil {
		return err
	}
	return s.download(c, kind, "round-"+round.Site.Code+"-"+round.On.String()+end, func(w io.Writer) error { return write(w, round) })
}

// sendSheet sends a device sheet. Query: device (id) or tag, paper (letter or a4).
func (s *Server) sendSheet(c echo.Context, sc store.Scope, by string) error {
	size, err := paper.SizeNamed(c.QueryParam("paper"))
	if err != nil {
		return err
	}
	device := c.QueryParam("device")
	if tag := strings.TrimSpace(c.QueryParam("tag")); device == "" {
		if device, err = s.deviceOfTag(sc, tag); err != nil {
			return err
		}
	}
	var sheet paper.Sheet
	err = s.store.View(sc, func(v *store.View) error {
		d, err := v.Device(device, forms.DayOf(s.store.Now()))
		if err != nil {
			return err
		}
		site, err := v.Site(d.Site)
		if err != nil {
			return err
		}
		sheet, err = paper.SheetOf(v, device, forms.DayOf(s.store.Now().In(site.Location())), s.store.URL(), s.store.Demo())
		return err
	})
	if err != nil {
		return err
	}
	if sheet.Head, _, _, err = s.headForPaper(); err != nil {
		return err
	}
	if err := s.exportTaken(c.Request().Context(), by, "device-sheet", sheet.Device.Site, forms.NoDay, forms.NoDay); err != nil {
		return err
	}
	name := export.TagText(sheet.Device.Tag)
	if name == "" {
		name = sheet.Device.ID
	}
	return s.download(c, pdfKind, "device-"+name+".pdf", func(w io.Writer) error { return paper.PrintSheet(w, sheet, size) })
}

// noticesTake sends the sheets to leave at rooms of a round. Query: round (id), paper (letter or a4).
func (s *Server) noticesTake(c echo.Context) error {
	size, err := paper.SizeNamed(c.QueryParam("paper"))
	if err != nil {
		return err
	}
	var notices paper.Notices
	err = s.store.View(scope(c), func(v *store.View) (err error) {
		notices, err = paper.NoticesOf(v, c.QueryParam("round"), s.store.Demo())
		return err
	})
	if err != nil {
		return err
	}
	if err := s.exportTaken(c.Request().Context(), person(c).ID, "notices", notices.Site.ID, forms.NoDay, forms.NoDay); err != nil {
		return err
	}
	return s.download(c, pdfKind, "notices-"+notices.Site.Code+"-"+notices.Code+".pdf", func(w io.Writer) error { return paper.PrintNotices(w, notices, size) })
}

// roundTake and sheetTake send what the pages offer, within the reader's own scope.
func (s *Server) roundTake(c echo.Context) error { return s.sendRound(c, scope(c), person(c).ID) }

func (s *Server) sheetTake(c echo.Context) error { return s.sendSheet(c, scope(c), person(c).ID) }

// ownRound and ownSheet are the same for commands; by (a person) says in whose name.
func (s *Server) ownRound(c echo.Context) error {
	by, err := s.ownBy(c)
	if err != nil {
		return err
	}
	return s.sendRound(c, ownerScope, by)
}

func (s *Server) ownSheet(c echo.Context) error {
	by, err := s.ownBy(c)
	if err != nil {
		return err
	}
	return s.sendSheet(c, ownerScope, by)
}
