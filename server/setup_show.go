package server

import (
	"net/http"
	"strings"

	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
)

// setupPage shows what tests are made with and judged by: instruments, plans and limit sets.
type setupPage struct {
	Frame
	Heading, NewInstrument string
	Instruments            []instrumentRow
	Plans                  []planRow
	LimitSets              []limitSetRow
	Forms                  []link
	UsualPlaces            string // "" for who may not change them
	Trust                  bool   // phones are to be told to trust this server
}

type planRow struct{ Href, Name, Kinds, Every, Source, Status string }

// limitSetRow is a limit set in the list of them; its limits stand on a page of their own.
type limitSetRow struct{ Href, Name, Kinds, Revision, Limits string }

func (s *Server) setupShow(c echo.Context) error {
	view := setupPage{Frame: s.frame(c, s.words.Say("office.setup.title"), "set-up"), Heading: s.words.Say("office.setup.heading")}
	_, view.Trust = s.certificates.(*Authority)
	if view.Change {
		view.NewInstrument, view.UsualPlaces = "/instruments/new", "/usual-places"
	}
	err := s.store.View(scope(c), func(v *store.View) error {
		instruments, err := v.Instruments()
		if err != nil {
			return err
		}
		for _, i := range instruments {
			view.Instruments = append(view.Instruments, s.instrumentRow(i, forms.DayOf(s.store.Now())))
		}
		plans, err := v.Plans()
		if err != nil {
			return err
		}
		for _, p := range plans {
			view.Plans = append(view.Plans, s.planRow(p, ""))
		}
		sets, err := v.LimitSets()
		if err != nil {
			return err
		}
		view.LimitSets = s.limitSetRows(sets)
		asked, err := v.Forms()
		if err != nil {
			return err
		}
		for _, f := range asked {
			view.Forms = append(view.Forms, link{Href: formHref(f), Text: s.formName(f)})
		}
		return nil
	})
	if err != nil {
		return err
	}
	return s.page(c, http.StatusOK, "setup.html", view)
}

func (s *Server) kinds(codes []string) string {
	var names []string
	for _, kind := range codes {
		names = append(names, s.ink().named("kind", kind))
	}
	return strings.Join(names, ", ")
}

func (s *Server) planRow(p *forms.Plan, site string) planRow {
	return planRow{Href: planHref(p.ID, site), Name: s.planName(p), Kinds: s.kinds(p.Kinds), Every: s.every(p), Source: p.Source, Status: status(p.Source, p.Status)}
}

// every says a plan's interval in words: once in each calendar month; at most 12 months apart.
func (s *Server) every(p *forms.Plan) string {
	k := s.ink()
	i, err := forms.ParseInterval(p.Every)
	if err != nil {
		return p.Every
	}
	text := s.interval(i)
	if p.Duty == forms.NotToExceed {
		return k.say("office.every.at_most", "n", text)
	}
	switch {
	case i == forms.Interval{Months: 1}:
		return k.say("office.every.month")
	case i == forms.Interval{Months: 12}:
		return k.say("office.every.year")
	}
	return k.say("office.every.once", "n", text)
}

func (s *Server) interval(i forms.Interval) string {
	k := s.ink()
	var parts []string
	if i.Months != 0 {
		parts = append(parts, k.say("office.every.m", "n", i.Months))
	}
	if i.Days != 0 {
		parts = append(parts, k.say("office.every.d", "n", i.Days))
	}
	return strings.Join(parts, " ")
}

// status says how well a source is known, where the source does not say so itself.
func status(source, status string) string {
	if strings.HasPrefix(source, status) {
		return ""
	}
	return status
}

// limitSetRows lists each limit set with its newest revision.
func (s *Server) limitSetRows(sets []*forms.LimitSet) []limitSetRow {
	newest := map[string]*forms.LimitSet{}
	for _, set := range sets {
		if have := newest[set.ID]; have == nil || set.Revision > have.Revision {
			newest[set.ID] = set
		}
	}
	var out []limitSetRow
	for _, id := range sortedKeys(newest) {
		set := newest[id]
		out = append(out, limitSetRow{Href: "/limits/" + id, Name: s.setName(set), Kinds: s.kinds(set.Kinds), Revision: count(set.Revision), Limits: count(len(set.Limits))})
	}
	return out
}
