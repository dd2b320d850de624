package server

import (
	"net/http"
	"net/url"
	"strings"

	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
)

// personPage is what managers of all sites see of one person: what they have, where they are signed in, which phones send for
// them, and what they opened and took.
type personPage struct {
	Frame
	Crumbs            []link
	Heading, Under    string
	Said              string
	Facts             []fact
	Edit, Link, Code  string // addresses; Link and Code are "" where the person may not sign in
	End, Remove       string // addresses; Remove once the access has ended
	Sessions          []sessionShown
	EndSessions       string
	Phones            []phoneLink
	Uses              []useShown
	UsesNone, Rescued string
}

// phoneLink is a phone with the way to take it off.
type phoneLink struct {
	phoneShown
	Href string
}

type useShown struct{ At, Text string }

// usesShown is how many lines of what was opened and taken a page shows.
const usesShown = 100

func personHref(id string) string { return "/people/" + url.PathEscape(id) }

func (s *Server) personShow(c echo.Context) error {
	p, err := s.personOf(c)
	if err != nil {
		return err
	}
	sites, err := s.sitesOf(c)
	if err != nil {
		return err
	}
	k := s.ink()
	view := personPage{Frame: s.frame(c, p.Name, "people"), Crumbs: []link{{Href: "/people", Text: k.say("office.person.title")}}, Heading: p.Name,
		Under: k.named("office.role", p.Role), Edit: personHref(p.ID) + "/edit", Facts: s.personFacts(p, sites), UsesNone: k.say("office.person.uses_none")}
	if p.Active {
		view.Link, view.Code, view.End = personHref(p.ID)+"/link", personHref(p.ID)+"/code", personHref(p.ID)+"/end"
	} else {
		view.Remove = personHref(p.ID) + "/remove"
	}
	switch said := c.QueryParam("said"); said {
	case "phone", "sessions", "ended":
		view.Said = k.named("office.person.said", said)
	}
	if view.Sessions, err = s.sessionsShown(p.ID, ""); err != nil {
		return err
	}
	if len(view.Sessions) > 0 {
		view.EndSessions = personHref(p.ID) + "/sessions"
	}
	phones, err := s.phonesShown(p.ID, personHref(p.ID)+"/phones/")
	if err != nil {
		return err
	}
	for _, one := range phones {
		view.Phones = append(view.Phones, phoneLink{one, one.Action})
	}
	if view.Uses, err = s.usesOf(c, p, sites); err != nil {
		return err
	}
	return s.page(c, http.StatusOK, "person.html", view)
}

// personFacts are the lines about a person, those that say nothing left out.
func (s *Server) personFacts(p store.Person, sites []store.Site) (out []fact) {
	k := s.ink()
	add := func(key, text string) {
		if text != "" {
			out = append(out, fact{Name: k.say("office.person." + key), Value: text})
		}
	}
	add("status", k.say("office.person.active"))
	if !p.Active {
		out[0].Value = k.say("office.person.ended")
	}
	add("sites", s.siteNames(p, sites))
	if p.Period != nil {
		add("period", k.say("office.person.period_text", "from", k.day(p.Period.From), "to", k.day(p.Period.To)))
	}
	if p.Until != nil {
		add("until", k.day(*p.Until))
	}
	add("contact", p.Contact)
	add("licence", s.licenceWords(p))
	add("may", s.mayWords(p))
	return out
}

// licenceWords gives a licence with its end, and says where it has run out.
func (s *Server) licenceWords(p store.Person) string {
	k := s.ink()
	switch {
	case p.Licence == "" || p.LicenceUntil == nil:
		return p.Licence
	case *p.LicenceUntil < forms.DayOf(s.store.Now()):
		return k.say("office.person.licence_out", "licence", p.Licence, "day", k.day(*p.LicenceUntil))
	}
	return k.say("office.person.licence_to", "licence", p.Licence, "day", k.day(*p.LicenceUntil))
}

// mayWords says what a person is qualified for, "" where nobody said.
func (s *Server) mayWords(p store.Person) string {
	k := s.ink()
	var list []string
	for _, may := range p.May {
		list = append(list, k.named("office.may", may))
	}
	return strings.Join(list, ", ")
}

func (s *Server) mayOptions() (out []option) {
	for _, may := range store.Qualifications() {
		out = append(out, option{Value: may, Text: s.ink().named("office.may", may)})
	}
	return out
}

// untilWords says when an access ends, and what of the tests it covers.
func (s *Server) untilWords(p store.Person) string {
	k := s.ink()
	var parts []string
	if p.Period != nil {
		parts = append(parts, k.say("office.person.period_text", "from", k.day(p.Period.From), "to", k.day(p.Period.To)))
	}
	if p.Until != nil {
		parts = append(parts, k.say("access.only_until", "day", k.day(*p.Until)))
	}
	return strings.Join(parts, "; ")
}

func (s *Server) usesOf(c echo.Context, p store.Person, sites []store.Site) (out []useShown, err error) {
	k := s.ink()
	names := map[string]string{}
	for _, site := range sites {
		names[site.ID] = site.Name
	}
	var uses []store.Used
	err = s.store.View(scope(c), func(v *store.View) error {
		uses, err = v.Uses(p.ID, usesShown)
		return err
	})
	for _, u := range uses {
		what := k.say("office.used." + u.Kind)
		if u.Kind != "signed.in" {
			what = k.say("office.used."+u.Kind, "what", k.named("office.used.thing", u.What))
		}
		if name := names[u.Site]; name != "" {
			what += ", " + name
		}
		if u.From != "" || u.To != "" {
			what += ", " + k.say("office.used.period", "from", u.From, "to", u.To)
		}
		out = append(out, useShown{k.at(u.At, s.store.Now().Location()), what})
	}
	return out, err
}
