package server

import (
	"net/http"
	"net/url"
	"slices"
	"strings"
	"time"

	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
)

// linkValid is how long a sign-in link made on a page may be used.
const linkValid = 7 * 24 * time.Hour

// peoplePage lists who may sign in.
type peoplePage struct {
	Frame
	Heading  string
	People   []peopleRow
	Contacts bool // somebody has one
}

type peopleRow struct {
	Href, Name, Role, Sites, Contact, May, Until string
	Active                                       bool
}

// personLinkPage shows a sign-in link, or a code to type, the one time it can be shown.
type personLinkPage struct {
	Frame
	Crumbs                     []link
	Heading, Under, Link, Text string
	Code                       string // instead of Link
	Picture                    *codePicture
	Back                       string
}

func (s *Server) peopleShow(c echo.Context) error {
	if err := wholeOrganisation(c); err != nil {
		return err
	}
	people, err := s.store.People()
	if err != nil {
		return err
	}
	sites, err := s.sitesOf(c)
	if err != nil {
		return err
	}
	view := peoplePage{Frame: s.frame(c, s.words.Say("office.person.title"), "people")}
	active := 0
	for _, p := range people {
		if p.Active {
			active++
		}
		view.Contacts = view.Contacts || p.Contact != ""
		view.People = append(view.People, peopleRow{Href: "/people/" + url.PathEscape(p.ID), Name: p.Name, Role: s.ink().named("office.role", p.Role), Sites: s.siteNames(p, sites), Contact: p.Contact, Active: p.Active, May: s.mayWords(p), Until: s.untilWords(p)})
	}
	slices.SortStableFunc(view.People, func(a, b peopleRow) int { return strings.Compare(strings.ToLower(a.Name), strings.ToLower(b.Name)) })
	view.Heading = s.words.Say("office.person.heading", "n", active)
	return s.page(c, http.StatusOK, "people.html", view)
}

// wholeOrganisation refuses managers of some sites only: people and their grants belong to the whole organisation.
func wholeOrganisation(c echo.Context) error {
	if !person(c).All {
		return refuse(codeForbidden, "", "Only a manager of all sites may see and change who may sign in. Ask one of them.")
	}
	return nil
}

func (s *Server) sitesOf(c echo.Context) (sites []store.Site, err error) {
	err = s.store.View(scope(c), func(v *store.View) error {
		sites, err = v.Sites()
		return err
	})
	return sites, err
}

func (s *Server) siteNames(p store.Person, sites []store.Site) string {
	if p.All {
		return s.words.Say("office.downloads.all_sites_plain")
	}
	var names []string
	for _, site := range sites {
		if slices.Contains(p.Sites, site.ID) {
			names = append(names, site.Name)
		}
	}
	return strings.Join(names, ", ")
}

func (s *Server) personNew(c echo.Context) error {
	if err := wholeOrganisation(c); err != nil {
		return err
	}
	f, err := s.blankForm(map[string]string{"role": "crew", "active": "yes"})
	if err != nil {
		return err
	}
	return s.personBack(c, f, nil)
}

func (s *Server) personEdit(c echo.Context) error {
	p, err := s.personOf(c)
	if err != nil {
		return err
	}
	f, err := s.blankForm(map[string]string{"name": p.Name, "role": p.Role, "contact": p.Contact, "licence": p.Licence, "until": dayText(p.Until), "licence_until": dayText(p.LicenceUntil)})
	if err != nil {
		return err
	}
	f.Values["sites"], f.Values["may"] = p.Sites, p.May
	if p.Period != nil {
		f.Set("period_from", p.Period.From.String())
		f.Set("period_to", p.Period.To.String())
	}
	if p.All {
		f.Set("all", "yes")
	}
	if p.Active {
		f.Set("active", "yes")
	}
	return s.personBack(c, f, &p)
}

// personCreate adds a person and shows the first sign-in link. Sending the form twice changes the person made by the
// first and makes another link; it does not make another person.
func (s *Server) personCreate(c echo.Context) error {
	if err := wholeOrganisation(c); err != nil {
		return err
	}
	f, err := s.typedForm(c)
	if err != nil {
		return err
	}
	p := s.personInput(f)
	p.Active = true
	p.ID = f.id(subjectField)
	if f.ok() {
		saved, err := s.store.PutPerson(c.Request().Context(), person(c).ID, p)
		if err == nil {
			return s.showLink(c, saved)
		}
		if err := f.takeRefusal(err); err != nil {
			return err
		}
	}
	return s.personBack(c, f, nil)
}

func (s *Server) personUpdate(c echo.Context) error {
	before, err := s.personOf(c)
	if err != nil {
		return err
	}
	f, err := s.typedForm(c)
	if err != nil {
		return err
	}
	p := s.personInput(f)
	p.ID, p.Active = before.ID, f.Get("active") == "yes"
	if before.ID == person(c).ID && (p.Role != before.Role || !p.Active || !p.All || p.Until != nil) {
		f.refuse("role", s.words.Say("office.person.self"))
	}
	if f.ok() {
		_, err := s.store.PutPerson(c.Request().Context(), person(c).ID, p)
		if err == nil {
			return toPage(c, personHref(before.ID))
		}
		if err := f.takeRefusal(err); err != nil {
			return err
		}
	}
	return s.personBack(c, f, &before)
}

func (s *Server) personInput(f *typedForm) store.Person {
	k := s.ink()
	p := store.Person{Name: f.needed("name", k.say("office.person.name"), 80), Role: f.choice("role", "crew", "manager", "auditor"), Contact: f.line("contact", 120), All: f.Get("all") == "yes"}
	if !p.All {
		if p.Sites = f.Values["sites"]; len(p.Sites) == 0 {
			f.refuse("sites", k.say("office.person.sites_none"))
		}
	}
	p.Licence, p.May = f.line("licence", 120), f.Values["may"]
	p.Until, p.LicenceUntil = someDay(f.date("until")), someDay(f.date("licence_until"))
	switch from, to := f.date("period_from"), f.date("period_to"); {
	case from == forms.NoDay && to == forms.NoDay:
	case from == forms.NoDay || to == forms.NoDay:
		f.refuse("period_to", k.say("office.person.period_both"))
	default:
		p.Period = &store.Period{From: from, To: to}
	}
	return p
}

// someDay is a day that may be missing.
func someDay(d forms.Day) *forms.Day {
	if d == forms.NoDay {
		return nil
	}
	return &d
}

func dayText(d *forms.Day) string {
	if d == nil {
		return ""
	}
	return d.String()
}

// personLink makes a new one-time link; it stands only on this answer.
func (s *Server) personLink(c echo.Context) error {
	p, err := s.personOf(c)
	if err != nil {
		return err
	}
	if !p.Active {
		return refuse(codeConflict, "", s.words.Say("office.person.ended")+".")
	}
	return s.showLink(c, p)
}

// personCode makes a short code to type, for a phone that cannot open a link; it stands only on this answer.
func (s *Server) personCode(c echo.Context) error {
	p, err := s.personOf(c)
	if err != nil {
		return err
	}
	code, err := s.store.NewCode(p.ID)
	if err != nil {
		return err
	}
	k := s.ink()
	view := personLinkPage{
		Frame: s.frame(c, k.say("office.person.title"), "people"), Crumbs: []link{{Href: "/people", Text: k.say("office.person.title")}},
		Heading: k.say("office.person.code_head", "name", p.Name), Under: k.say("office.person.code_lead", "time", k.at(s.store.Now().Add(store.CodeLife), s.store.Now().Location())),
		Code: code, Back: personHref(p.ID), Text: k.say("office.person.code_text", "name", p.Name, "address", origin(c.Request())+"/field"),
	}
	return s.page(c, http.StatusOK, "person_link.html", view)
}

func (s *Server) showLink(c echo.Context, p store.Person) error {
	token, err := s.store.NewLink(p.ID, linkValid)
	if err != nil {
		return err
	}
	k := s.ink()
	address := origin(c.Request()) + "/in/" + token
	picture, err := drawCode(address, k.say("office.person.link_picture", "name", p.Name))
	if err != nil {
		return err
	}
	view := personLinkPage{
		Frame: s.frame(c, k.say("office.person.title"), "people"), Crumbs: []link{{Href: "/people", Text: k.say("office.person.title")}}, Picture: picture, Back: personHref(p.ID),
		Heading: k.say("office.person.link_head", "name", p.Name), Under: k.say("office.person.link_lead", "time", k.at(s.store.Now().Add(linkValid), s.store.Now().Location())),
		Link: address, Text: k.say("office.person.link_text", "name", p.Name),
	}
	return s.page(c, http.StatusOK, "person_link.html", view)
}

// origin is the address the reader's browser uses for this server.
func origin(r *http.Request) string {
	if plainLoopback(r) {
		return "http://" + r.Host
	}
	return "https://" + r.Host
}

func (s *Server) personOf(c echo.Context) (store.Person, error) {
	if err := wholeOrganisation(c); err != nil {
		return store.Person{}, err
	}
	return s.store.Person(c.Param("person"))
}

func (s *Server) personBack(c echo.Context, f *typedForm, p *store.Person) error {
	sites, err := s.sitesOf(c)
	if err != nil {
		return err
	}
	k := s.ink()
	var offered []option
	for _, site := range sites {
		offered = append(offered, option{Value: site.ID, Text: site.Name})
	}
	who := []field{
		{Name: "name", Label: k.say("office.person.name"), Hint: k.say("office.person.name_hint"), Required: true},
		{Name: "role", Label: k.say("office.person.role"), Hint: k.say("office.person.role_hint"), Required: true, Options: choices("", "crew", k.say("office.role.crew"), "manager", k.say("office.role.manager"), "auditor", k.say("office.role.auditor"))},
		{Name: "contact", Label: k.say("office.person.contact"), Hint: k.say("office.person.contact_hint")},
	}
	sees := []field{{Name: "all", Label: k.say("office.person.all_sites"), Type: "check"}}
	if len(offered) > 0 {
		sees = append(sees, field{Name: "sites", Label: k.say("office.person.sites"), Type: "checks", Options: offered})
	}
	sees = append(sees, field{Name: "until", Label: k.say("office.person.until"), Type: "date", Hint: k.say("office.person.until_hint")},
		field{Name: "period_from", Label: k.say("office.person.period_from"), Type: "date", Hint: k.say("office.person.period_hint")}, field{Name: "period_to", Label: k.say("office.person.period_to"), Type: "date"})
	does := []field{{Name: "licence", Label: k.say("office.person.licence"), Hint: k.say("office.person.licence_hint")}, {Name: "licence_until", Label: k.say("office.person.licence_until"), Type: "date"},
		{Name: "may", Label: k.say("office.person.may"), Type: "checks", Hint: k.say("office.person.may_hint"), Options: s.mayOptions()}}
	page := formPage{
		Frame: s.frame(c, k.say("office.person.new"), "people"), Crumbs: []link{{Href: "/people", Text: k.say("office.person.title")}},
		Heading: k.say("office.person.new_head"), Action: "/people", Submit: k.say("office.person.save_new"), Cancel: "/people",
	}
	if p != nil {
		page.Heading, page.Action, page.Submit = k.say("office.person.edit_head", "name", p.Name), personHref(p.ID), k.say("office.person.save")
		page.Cancel = personHref(p.ID)
		who = append(who, field{Name: "active", Label: k.say("office.person.active"), Type: "check"})
	}
	page.Groups = []fieldGroup{{Fields: who}, {Legend: k.say("office.person.sees"), Fields: sees}, {Legend: k.say("office.person.does"), Note: k.say("office.person.does_note"), Fields: does}}
	return s.formBack(c, f, page)
}
