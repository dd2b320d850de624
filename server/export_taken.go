package server

import (
	"context"
	"io"

	"github.com/labstack/echo/v4"

	"tripwell/export"
	"tripwell/forms"
	"tripwell/store"
	"tripwell/store/record"
)

const (
	workbookKind = "application/vnd.openxmlformats-officedocument.spreadsheetml.sheet"
	labelsKind   = "application/pdf"
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

// sendLabels sends the label sheets of a scope.
func (s *Server) sendLabels(c echo.Context, sc store.Scope, by string) error {
	sheet := c.QueryParam("sheet")
	if sheet == "" {
		sheet = export.Letter3x10.Name
	}
	size, err := export.SheetNamed(sheet)
	if err != nil {
		return err
	}
	start, err := countParam(c, "start", 1)
	if err != nil {
		return err
	}
	site, name, err := s.siteAsked(sc, c.QueryParam("site"))
	if err != nil {
		return err
	}
	labels, err := export.LabelsOf(s.store, sc, site, c.QueryParams()["device"]...)
	if err != nil {
		return err
	}
	if device := c.QueryParam("device"); device != "" {
		if labels, err = s.labelOfDevice(sc, device, labels); err != nil {
			return err
		}
	}
	if err := s.exportTaken(c.Request().Context(), by, "labels", site, forms.NoDay, forms.NoDay); err != nil {
		return err
	}
	return s.download(c, labelsKind, "labels-"+name+".pdf", func(w io.Writer) error {
		return export.Labels(w, size, labels, start)
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

// labelOfDevice picks the one label of a device.
func (s *Server) labelOfDevice(sc store.Scope, device string, labels []export.Label) ([]export.Label, error) {
	var picked []export.Label
	err := s.store.View(sc, func(v *store.View) error {
		d, err := v.Device(device, forms.DayOf(s.store.Now()))
		if err != nil {
			return err
		}
		tag, _ := record.ParseTag(d.Tag)
		for _, l := range labels {
			if l.Tag == tag {
				picked = append(picked, l)
			}
		}
		return nil
	})
	return picked, err
}
