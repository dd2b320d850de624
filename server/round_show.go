package server

import (
	"net/http"
	"slices"

	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
)

// roundRefresh is how often, in seconds, the page of a round that is being walked reads itself again.
const roundRefresh = 30

// roundPage is one round: how far it is, its list, what was said of it.
type roundPage struct {
	Frame
	Crumbs         []link
	Heading, Under string
	State          mark
	Done, Of       int
	Said           string
	Facts          []fact
	Actions        []link
	Conflicts      []conflictLine
	Attention      []roundPart // what needs somebody: to come back to, passed over, failed
	Groups         []stopGroup
	Closings       []string
	Accepted       string
	Note           string
	Accept         *formPage
	TellHead       string
	Tell           []string
	Live           string
}

func (s *Server) roundShow(c echo.Context) error {
	view := roundPage{Frame: s.frame(c, "", "rounds")}
	f, err := s.blankForm(nil)
	if err != nil {
		return err
	}
	return s.roundBack(c, f, &view)
}

// roundBack sends the page of a round: as new, or with what was wrong with its acceptance.
func (s *Server) roundBack(c echo.Context, f *typedForm, view *roundPage) error {
	err := s.store.View(scope(c), func(v *store.View) error {
		r, err := v.Round(c.Param("round"))
		if err != nil {
			return err
		}
		if err := s.buildRound(v, r, view); err != nil {
			return err
		}
		s.acceptForm(r, f, view)
		return nil
	})
	if err != nil {
		return err
	}
	status := http.StatusOK
	if !f.ok() {
		status = http.StatusUnprocessableEntity
	}
	return s.page(c, status, "round.html", view)
}

func (s *Server) buildRound(v *store.View, r store.Round, view *roundPage) error {
	k := s.ink()
	site, err := v.Site(r.Site)
	if err != nil {
		return err
	}
	today := s.today(site)
	view.Crumbs = []link{{Href: "/rounds", Text: k.say("office.round.title")}, {Href: siteHref(site), Text: site.Name}}
	view.Title = s.roundName(r, today)
	view.State = mark{roundShapes[r.State], k.say("office.round.state." + r.State)}
	view.Done, view.Of, view.Said = r.Counts[store.StopDone], total(r.Counts), k.roundCounts(r.Counts)
	view.Heading = k.say("office.round.fact", "site", site.Name, "done", count(view.Done), "of", count(view.Of))
	view.Under = joined(view.Title, s.roundWho(v, r))
	rows, err := s.stopRows(v, r, site, view)
	if err != nil {
		return err
	}
	view.attention(k, rows)
	s.roundFacts(v, r, site, view)
	for _, one := range r.Closings {
		view.Closings = append(view.Closings, s.closingLine(v, one, site))
	}
	if a := r.Accepted; a != nil {
		view.Accepted, view.Note = k.say("office.round.accepted_by", "name", s.personName(v, a.By), "time", k.at(a.At, site.Location())), a.Note
	}
	if r.State == store.RoundMade || r.State == store.RoundWalking {
		view.Live, view.Refresh = k.say("office.round.live", "time", s.store.Now().In(site.Location()).Format("15:04:05")), roundRefresh
	}
	s.roundActions(r, view)
	return nil
}

func (s *Server) roundActions(r store.Round, view *roundPage) {
	k := s.ink()
	if !r.Walk() && view.Role != "crew" {
		view.Actions = append(view.Actions, link{Href: "/round-sheet?round=" + r.ID, Text: k.say("office.round.sheet_pdf")}, link{Href: "/round-sheet?as=xlsx&round=" + r.ID, Text: k.say("office.round.sheet_xlsx")})
	}
	toTell := func(stop store.RoundStop) bool { return stop.State == store.StopBack || stop.Result == forms.Fail }
	if view.Role != "crew" && slices.ContainsFunc(r.Stops, toTell) {
		view.Actions = append(view.Actions, link{Href: "/notices?round=" + r.ID, Text: k.say("office.round.notices")})
	}
	if view.Change && !r.Walk() && r.State != store.RoundAccepted {
		view.Actions = append([]link{{Href: "/rounds/" + r.ID + "/edit", Text: k.say("office.round.edit")}}, view.Actions...)
	}
}

func (s *Server) roundFacts(v *store.View, r store.Round, site store.Site, view *roundPage) {
	k := s.ink()
	add := func(name, value string) {
		if value != "" {
			view.Facts = append(view.Facts, fact{Name: k.say("office.round.field." + name), Value: value})
		}
	}
	if !r.Walk() {
		add("made", k.say("office.round.made_by", "name", s.personName(v, r.By), "time", k.at(r.Made, site.Location())))
		add("code", r.Code)
	}
	if r.Day != forms.NoDay {
		add("day", joined(k.longDay(r.Day), r.Starts))
	}
	if r.Until != forms.NoDay {
		add("until", k.day(r.Until))
	}
	add("people", s.roundWho(v, r))
	add("minutes", k.minutes(r.Minutes))
	add("note", r.Note)
}

func (s *Server) closingLine(v *store.View, c store.RoundClosing, site store.Site) string {
	k := s.ink()
	line := k.say("office.round.closed_by", "name", s.personName(v, c.By), "time", k.at(c.At, site.Location()), "counts",
		k.roundCounts(map[string]int{store.StopDone: c.Done, store.StopLeft: c.Left, store.StopBack: c.Back, store.StopPassed: c.Skipped}))
	return line + " " + k.say("office.round.proved."+provedWord(c.ProvedFirst)+"_"+provedWord(c.ProvedLast))
}

func provedWord(p *store.RoundProof) string {
	switch {
	case p == nil:
		return "none"
	case p.Works:
		return "yes"
	}
	return "no"
}
