package server

import (
	"io"
	"slices"
	"strings"

	"github.com/labstack/echo/v4"

	"tripwell/export"
	"tripwell/forms"
	"tripwell/store"
	"tripwell/store/record"
)

// printing reads how labels go onto paper. Query: sheet or roll (WIDTHxHEIGHT in mm; wins), start, nudge (X,Y in mm) and
// line (what stands beside the tag, repeated or with commas).
func printing(c echo.Context) (how export.Printing, err error) {
	sheet := c.QueryParam("sheet")
	if sheet == "" {
		sheet = export.Letter3x10.Name
	}
	if roll := strings.TrimSpace(c.QueryParam("roll")); roll != "" {
		how.Sheet, err = export.Roll(roll)
	} else {
		how.Sheet, err = export.SheetNamed(sheet)
	}
	if err != nil {
		return how, err
	}
	if how.Start, err = countParam(c, "start", 1); err != nil {
		return how, err
	}
	if how.NudgeX, how.NudgeY, err = export.Nudge(c.QueryParam("nudge")); err != nil {
		return how, err
	}
	for _, text := range c.QueryParams()["line"] {
		for _, line := range strings.Split(text, ",") {
			if line = strings.TrimSpace(line); line != "" {
				how.Lines = append(how.Lines, line)
			}
		}
	}
	return how, how.Check()
}

// sendLabels sends label sheets. Query: as printing, and site (id or code), device (id, repeated), align=yes (the page for
// plain paper instead), marking and count (a marking instead of tags).
func (s *Server) sendLabels(c echo.Context, sc store.Scope, by string) error {
	how, err := printing(c)
	if err != nil {
		return err
	}
	if c.QueryParam("align") == "yes" {
		return s.download(c, pdfKind, "alignment-"+how.Sheet.Name+".pdf", func(w io.Writer) error { return export.Alignment(w, how) })
	}
	if marking := c.QueryParam("marking"); marking != "" {
		return s.sendMarkings(c, how, marking)
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
	return s.download(c, pdfKind, "labels-"+name+".pdf", func(w io.Writer) error { return export.Labels(w, how, labels) })
}

// sendMarkings sends markings: they say nothing of any store. Without a count they fill the first sheet.
func (s *Server) sendMarkings(c echo.Context, how export.Printing, marking string) error {
	count, err := countParam(c, "count", max(1, how.Sheet.PerPage()-how.Start+1))
	if err != nil {
		return err
	}
	labels, err := export.MarkingLabels(marking, count)
	if err != nil {
		return err
	}
	return s.download(c, pdfKind, "markings-"+marking+".pdf", func(w io.Writer) error { return export.Labels(w, how, labels) })
}

// sendBatch draws new tags and sends their labels. Query as printing, and count.
func (s *Server) sendBatch(c echo.Context, by string) error {
	how, err := printing(c)
	if err != nil {
		return err
	}
	count, err := countParam(c, "count", how.Sheet.PerPage())
	if err != nil {
		return err
	}
	labels, err := export.BlankLabels(c.Request().Context(), s.store, by, count)
	if err != nil {
		return err
	}
	return s.download(c, pdfKind, "new-labels.pdf", func(w io.Writer) error { return export.Labels(w, how, labels) })
}

// sendLabel sends one label as a picture. Query as printing, and tag and as (png or svg).
func (s *Server) sendLabel(c echo.Context, sc store.Scope, by string) error {
	how, err := printing(c)
	if err != nil {
		return err
	}
	write, kind := export.LabelSVG, "image/svg+xml"
	switch as := c.QueryParam("as"); as {
	case "", "svg":
	case "png":
		write, kind = export.LabelPNG, "image/png"
	default:
		return refuse(codeInvalid, "as", "A label can be had as png or as svg.")
	}
	l, err := export.LabelOf(s.store, sc, c.QueryParam("tag"))
	if err != nil {
		return err
	}
	if err := s.exportTaken(c.Request().Context(), by, "labels", "", forms.NoDay, forms.NoDay); err != nil {
		return err
	}
	end := strings.TrimPrefix(strings.TrimSuffix(kind, "+xml"), "image/")
	return s.download(c, kind, "label-"+l.Tag+"."+end, func(w io.Writer) error { return write(w, how, l) })
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
		picked = slices.DeleteFunc(slices.Clone(labels), func(l export.Label) bool { return l.Tag != tag })
		return nil
	})
	return picked, err
}

// labelsTake and labelTake send what the labels page and a device's page offer, within the reader's own scope.
func (s *Server) labelsTake(c echo.Context) error { return s.sendLabels(c, scope(c), person(c).ID) }

func (s *Server) labelTake(c echo.Context) error { return s.sendLabel(c, scope(c), person(c).ID) }

// labelsBatch answers the button that draws new tags.
func (s *Server) labelsBatch(c echo.Context) error {
	form, err := decodeForm(c)
	if err != nil {
		return err
	}
	c.Request().URL.RawQuery = form.Encode()
	return s.sendBatch(c, person(c).ID)
}

// ownLabels, ownLabelsBatch and ownLabel are the same for commands; by (a person) says in whose name.
func (s *Server) ownLabels(c echo.Context) error {
	by, err := s.ownBy(c)
	if err != nil {
		return err
	}
	return s.sendLabels(c, ownerScope, by)
}

func (s *Server) ownLabelsBatch(c echo.Context) error {
	by, err := s.ownBy(c)
	if err != nil {
		return err
	}
	return s.sendBatch(c, by)
}

func (s *Server) ownLabel(c echo.Context) error {
	by, err := s.ownBy(c)
	if err != nil {
		return err
	}
	return s.sendLabel(c, ownerScope, by)
}
