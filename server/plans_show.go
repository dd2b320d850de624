package server

import (
	"cmp"
	"net/http"
	"net/url"

	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
)

// plansPage lists what is tested how often, for the organisation and where sites have plans of their own.
type plansPage struct {
	Frame
	Crumbs        []link
	Heading, Lead string
	Unworked      string
	Actions       []link
	Groups        []planGroup
}

type planGroup struct {
	Name string
	Rows []planRow
}

// planPage shows one plan as it stands, with every revision of it.
type planPage struct {
	Frame
	Crumbs         []link
	Heading, Under string
	Actions        []link
	Facts          []planFact
	Marks          []markRow
	Revisions      []planRevision
}

type planFact struct{ Name, Value string }

// markRow is a mark with the days it is put on.
type markRow struct {
	Word, Colour, Days string
	Now                bool
}

type planRevision struct{ Number, InForce, Every, By, Reason string }

func (s *Server) plansShow(c echo.Context) error {
	k := s.ink()
	view := plansPage{Frame: s.frame(c, k.say("plans.title"), "set-up"), Crumbs: []link{{Href: "/set-up", Text: k.say("office.setup.title")}}, Lead: k.say("plans.list_lead")}
	if view.Change {
		view.Actions = []link{{Href: "/plans/new", Text: k.say("plans.new"), Here: true}}
	}
	err := s.store.View(scope(c), func(v *store.View) error {
		sites, err := v.Sites()
		if err != nil {
			return err
		}
		if v.Unfinished() > 0 {
			view.Unworked = k.say("plans.unworked")
		}
		total := 0
		for _, site := range append([]store.Site{{Name: k.say("config.everywhere")}}, sites...) {
			all, err := v.PlanRevisions(site.ID, "")
			if err != nil {
				return err
			}
			g := planGroup{Name: site.Name}
			for _, r := range newestRevisions(all) {
				g.Rows = append(g.Rows, s.planRow(r.Plan, site.ID))
			}
			if total += len(g.Rows); len(g.Rows) > 0 {
				view.Groups = append(view.Groups, g)
			}
		}
		view.Heading = k.say("plans.heading", "n", total)
		return nil
	})
	if err != nil {
		return err
	}
	return s.page(c, http.StatusOK, "plans.html", view)
}

func planHref(id, site string) string {
	href := "/plans/" + url.PathEscape(id)
	if site != "" {
		href += "?site=" + url.QueryEscape(site)
	}
	return href
}

// planName names a plan: as its users call it, else as the catalogue does.
func (s *Server) planName(p *forms.Plan) string {
	k := s.ink()
	if name := cmp.Or(p.Name, k.named("plan", p.ID)); name != p.ID {
		return name
	}
	return k.named("task", p.Task)
}

// planNow reads the newest revision of a plan and all of them, of the site asked for or of the organisation.
func (s *Server) planNow(c echo.Context) (all []store.Revision, site store.Site, err error) {
	err = s.store.View(scope(c), func(v *store.View) error {
		if id := cmp.Or(c.QueryParam("site"), c.FormValue("site")); id != "" {
			if site, err = v.Site(id); err != nil {
				return err
			}
		}
		if all, err = v.PlanRevisions(site.ID, c.Param("plan")); err == nil && len(all) == 0 && site.ID != "" {
			all, err = v.PlanRevisions("", c.Param("plan")) // its first revision at the site begins with the organisation's
		}
		if err == nil && len(all) == 0 {
			err = refuse(codeNotFound, "", s.words.Say("plans.unknown"))
		}
		return err
	})
	return all, site, err
}

func (s *Server) planShow(c echo.Context) error {
	all, site, err := s.planNow(c)
	if err != nil {
		return err
	}
	k, p, today := s.ink(), newestRevisions(all)[0].Plan, forms.DayOf(s.store.Now())
	view := planPage{Frame: s.frame(c, s.planName(p), "set-up"), Heading: s.planName(p),
		Crumbs: []link{{Href: "/set-up", Text: k.say("office.setup.title")}, {Href: "/plans", Text: k.say("plans.title")}},
		Under:  k.say("plans.under", "where", lowerFirst(cmp.Or(site.Name, k.say("config.everywhere"))), "every", s.every(p)), Facts: s.planFacts(p)}
	if p.Marks != nil {
		view.Marks = s.markRows(p.Marks, today)
	}
	if view.Change {
		view.Actions = []link{{Href: "/plans/" + url.PathEscape(p.ID) + "/edit?site=" + url.QueryEscape(site.ID), Text: k.say("plans.change"), Here: true}}
	}
	if p.Marks != nil {
		view.Actions = append(view.Actions, link{Href: "/plans/" + url.PathEscape(p.ID) + "/marks?site=" + url.QueryEscape(site.ID), Text: k.say("plans.marks_open")})
	}
	err = s.store.View(scope(c), func(v *store.View) error {
		for i := len(all) - 1; i >= 0; i-- {
			r := all[i]
			view.Revisions = append(view.Revisions, planRevision{count(r.Revision), s.sinceWhen(r.InForce), s.every(r.Plan), cmp.Or(v.PersonName(r.By), k.say("plans.shipped")), r.Reason})
		}
		return nil
	})
	if err != nil {
		return err
	}
	return s.page(c, http.StatusOK, "plan.html", view)
}

// sinceWhen writes the day a rule came into force; what the program ships has no beginning people could name.
func (s *Server) sinceWhen(d forms.Day) string {
	if d <= forms.Date(1900, 1, 1) {
		return s.words.Say("plans.always")
	}
	return s.ink().day(d)
}

// planFacts says what a plan asks for, member by member.
func (s *Server) planFacts(p *forms.Plan) []planFact {
	k := s.ink()
	fact := func(key, value string) planFact { return planFact{k.say("plans.fact." + key), value} }
	facts := []planFact{fact("task", k.named("task", p.Task)), fact("kinds", s.kinds(p.Kinds)), fact("duty", k.say("plans.duty."+p.Duty))}
	if p.Grace != "" {
		facts = append(facts, fact("grace", s.durationWords(p.Grace)))
	}
	lead := k.say("plans.lead_period")
	switch {
	case p.Lead != "":
		lead = k.say("plans.lead_before", "n", s.durationWords(p.Lead))
	case p.Duty == forms.NotToExceed:
		lead = k.say("plans.lead_before", "n", k.say("office.every.d", "n", 31))
	}
	facts = append(facts, fact("lead", lead))
	start := forms.Start{}
	if p.Start != nil {
		start = *p.Start
	}
	for _, one := range []struct{ way, text string }{{forms.New, start.New}, {forms.Replaced, start.Replaced}, {forms.Imported, start.Imported}} {
		facts = append(facts, fact(one.way, s.firstDate(one.text)))
	}
	if f := p.FirstRound; f != nil {
		facts = append(facts, fact("first_round", k.say("plans.first_round", "from", k.day(f.From), "n", s.durationWords(f.Within))))
	}
	return append(facts, fact("occasions", s.occasionWords(p)), fact("source", p.Source))
}

func (s *Server) firstDate(duration string) string {
	i, err := forms.ParseInterval(duration)
	switch {
	case duration == "" || err != nil:
		return s.words.Say("plans.first.interval")
	case i.Zero():
		return s.words.Say("plans.first.before")
	}
	return s.words.Say("plans.first.within", "n", s.interval(i))
}

func (s *Server) durationWords(duration string) string {
	i, err := forms.ParseInterval(duration)
	if err != nil {
		return duration
	}
	return s.interval(i)
}

// occasionWords names the causes a plan answers to, with the time they leave.
func (s *Server) occasionWords(p *forms.Plan) string {
	k := s.ink()
	var said []string
	for _, cause := range forms.Causes() {
		if within, ok := p.Answers(cause); ok {
			text := k.say("plans.cause." + cause)
			if !within.Zero() {
				text = k.say("plans.cause_within", "cause", text, "n", s.interval(within))
			}
			said = append(said, text)
		}
	}
	if len(said) == 0 {
		return k.say("plans.cause_none")
	}
	return joined(said...)
}

// markRows lists the marks of a plan from the one put on now.
func (s *Server) markRows(m *forms.Marks, today forms.Day) (rows []markRow) {
	k := s.ink()
	p, ok := m.On(today)
	for i := 0; ok && i < len(m.List); i++ {
		rows = append(rows, markRow{p.Word, p.Colour, k.say("plans.mark_days", "from", k.day(p.From), "until", k.day(p.Until)), i == 0})
		p = m.After(p)
	}
	return rows
}
