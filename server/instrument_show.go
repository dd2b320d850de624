package server

import (
	"mime"
	"net/http"
	"slices"
	"time"

	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
)

// instrumentPage is one test instrument with its certificates and its proofs on a known outlet.
type instrumentPage struct {
	Frame
	Crumbs         []link
	Heading, Under string
	Late           bool
	Facts          []fact
	Certificates   []certificateRow
	Proofs         []proofRow
	Actions        []link
}

type certificateRow struct {
	On, Number, Due, Errors, By string
	Verdict                     mark
	FileHref, RecallHref        string // addresses; "" = none
	FileName                    string
}

type proofRow struct {
	On, Where, By string
	Href          string // the round it was made on
	Verdict       mark
	at            time.Time
}

// proofsMost is how many proofs the page shows, the newest.
const proofsMost = 100

func (s *Server) instrumentShow(c echo.Context) error {
	i, err := s.instrumentOf(c)
	if err != nil {
		return err
	}
	k, today := s.ink(), forms.DayOf(s.store.Now())
	view := instrumentPage{Frame: s.frame(c, i.Name, "set-up"), Crumbs: []link{{Href: "/set-up", Text: k.say("office.setup.title")}}}
	row := s.instrumentRow(i, today)
	view.Under = joined(i.Serial, row.Ramp)
	view.Heading, view.Late = k.say("office.instrument.heading", "name", i.Name, "day", k.day(i.CalibrationDue)), row.Late
	switch {
	case i.Retired:
		view.Heading = k.say("office.instrument.heading_retired", "name", i.Name)
	case i.CalibrationDue == forms.NoDay:
		view.Heading = k.say("office.instrument.heading_unknown", "name", i.Name)
	case row.Late:
		view.Heading = k.say("office.instrument.heading_late", "name", i.Name, "day", k.day(i.CalibrationDue))
	}
	for _, line := range row.Accuracy {
		view.Facts = append(view.Facts, fact{Name: k.say("office.col.accuracy"), Value: line})
	}
	err = s.store.View(scope(c), func(v *store.View) error {
		past, err := v.InstrumentPast(i.ID)
		if err != nil {
			return err
		}
		for _, one := range past.Certificates {
			view.Certificates = append(view.Certificates, s.certificateRow(v, i.ID, one))
		}
		view.Proofs, err = s.proofRows(v, i.ID, past.Proofs)
		return err
	})
	if err != nil {
		return err
	}
	if view.Change {
		at := "/instruments/" + i.ID
		view.Actions = []link{{at + "/certificate", k.say("office.instrument.certificate_new"), true}, {at + "/proved", k.say("office.instrument.proved_new"), false}, {at, k.say("office.instrument.edit"), false}}
	}
	return s.page(c, http.StatusOK, "instrument.html", view)
}

// proofRows are the proofs made in the office and those crews made on their rounds, the newest first.
func (s *Server) proofRows(v *store.View, instrument string, made []store.Proof) (rows []proofRow, err error) {
	k := s.ink()
	row := func(p store.Proof) proofRow {
		out := proofRow{On: k.day(p.On), Where: joined(k.tag(p.Tag), p.Where), By: s.personName(v, p.By), Verdict: mark{"pass", k.say("office.instrument.proved_works")}, at: p.At}
		if !p.Works {
			out.Verdict = mark{"fail", k.say("office.instrument.proved_not")}
		}
		return out
	}
	for _, p := range made {
		rows = append(rows, row(p))
	}
	walks, err := v.RoundProofs(instrument)
	for _, p := range walks {
		one, end := row(p.Proof), "office.instrument.proved_first"
		if p.Last {
			end = "office.instrument.proved_last"
		}
		one.Where, one.Href = joined(p.Site, k.say(end)), "/rounds/"+p.Round
		rows = append(rows, one)
	}
	slices.SortStableFunc(rows, func(a, b proofRow) int { return b.at.Compare(a.at) })
	return rows[:min(len(rows), proofsMost)], err
}

func (s *Server) certificateRow(v *store.View, instrument string, c store.Certificate) certificateRow {
	k := s.ink()
	row := certificateRow{On: k.day(c.On), Number: c.Number, Due: k.day(c.Due), Errors: s.foundErrors(c.Errors), By: s.personName(v, c.By), Verdict: mark{"pass", k.say("office.instrument.in_tolerance")}}
	if c.Out {
		row.Verdict = mark{"fail", k.say("office.instrument.out_of_tolerance")}
		row.RecallHref = "/instruments/" + instrument + "/recall/" + c.Record
	}
	if c.File != "" {
		row.FileHref, row.FileName = "/instruments/"+instrument+"/certificates/"+c.Record, c.FileName
		if row.FileName == "" {
			row.FileName = k.say("office.instrument.file")
		}
	}
	return row
}

// foundErrors says by how much an instrument read too high or too low.
func (s *Server) foundErrors(found map[string]forms.FoundError) string {
	k := s.ink()
	var said []string
	for _, code := range sortedKeys(found) {
		f := found[code]
		var parts []string
		if f.Percent != 0 {
			parts = append(parts, withSign(f.Percent)+thin+"%")
		}
		if f.Plus != 0 {
			parts = append(parts, k.amount(withSign(f.Plus), unitOf(code)))
		}
		text := dash
		if len(parts) > 0 {
			text = parts[0]
			if len(parts) > 1 {
				text += ", " + parts[1]
			}
		}
		said = append(said, k.reading(code)+" "+text)
	}
	return joined(said...)
}

func withSign(v float64) string {
	if v > 0 {
		return "+" + number(v)
	}
	return number(v)
}

// certificateFile gives the file of a certificate through its record.
func (s *Server) certificateFile(c echo.Context) error {
	var raw []byte
	var kind, name string
	err := s.store.View(scope(c), func(v *store.View) (err error) {
		raw, kind, name, err = v.CertificateFile(c.Param("record"))
		return err
	})
	if err != nil {
		return err
	}
	if name == "" {
		name = "certificate"
	}
	h := c.Response().Header()
	h.Set("Cache-Control", "private, max-age=3600")
	h.Set("Content-Disposition", mime.FormatMediaType("attachment", map[string]string{"filename": name}))
	return c.Blob(http.StatusOK, kind, raw)
}
