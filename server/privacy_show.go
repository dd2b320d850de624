package server

import (
	"net/http"
	"time"

	"github.com/labstack/echo/v4"

	"tripwell/store"
)

// privacyPage tells a person what is kept about them and for how long.
type privacyPage struct {
	Frame
	Heading, Lead string
	Facts         []fact
	SignIns       []string
	Kept          []keptShown
	Others        []link // whom the reader may remove
}

// keptShown is one kind of thing that is kept about people.
type keptShown struct{ What, Where, Long string }

// keptKinds are the rows of the table, by their words; README lists the same.
var keptKinds = []string{"directory", "book", "sign_ins", "sessions", "links", "secret", "phones", "calendar", "digest", "exports", "photos", "log"}

// aboutPerson is what the directory and the office log hold of one person, as they take it along.
type aboutPerson struct {
	ID       string       `json:"id"`
	Name     string       `json:"name"`
	Role     string       `json:"role"`
	AllSites bool         `json:"all_sites"`
	Sites    []string     `json:"sites"`
	Active   bool         `json:"active"`
	Contact  string       `json:"contact"`
	Password *time.Time   `json:"password_set"`
	Second   *time.Time   `json:"second_step_since"`
	Calendar *time.Time   `json:"calendar_since"`
	Digest   *aboutDigest `json:"digest"`
	Sessions []aboutEntry `json:"sessions"`
	Phones   []aboutPhone `json:"phones"`
	SignIns  []time.Time  `json:"last_sign_ins"`
}

type aboutDigest struct {
	Every string    `json:"every"`
	To    string    `json:"to"`
	Sent  time.Time `json:"sent"`
}

type aboutEntry struct {
	Began   time.Time `json:"began"`
	Used    time.Time `json:"used"`
	How     string    `json:"how"`
	Browser string    `json:"browser"`
	Address string    `json:"address"`
}

type aboutPhone struct {
	Installation string    `json:"installation"`
	Since        time.Time `json:"since"`
	Heard        time.Time `json:"heard"`
}

func (s *Server) privacyShow(c echo.Context) error {
	about, err := s.about(c)
	if err != nil {
		return err
	}
	k := s.ink()
	view := privacyPage{Frame: s.frame(c, k.say("privacy.title"), "me"), Heading: k.say("privacy.title"), Lead: k.say("privacy.lead"), Facts: s.aboutFacts(c, about)}
	for _, t := range about.SignIns {
		view.SignIns = append(view.SignIns, k.at(t, s.store.Now().Location()))
	}
	for _, kind := range keptKinds {
		view.Kept = append(view.Kept, keptShown{k.say("privacy." + kind + ".what"), k.say("privacy." + kind + ".where"), k.say("privacy." + kind + ".long")})
	}
	if view.Others, err = s.removable(c); err != nil {
		return err
	}
	return s.page(c, http.StatusOK, "privacy.html", view)
}

// removable lists everybody but the reader, for a manager of all sites.
func (s *Server) removable(c echo.Context) (out []link, err error) {
	me := person(c)
	if me.Role != "manager" || !me.All {
		return nil, nil
	}
	people, err := s.store.People()
	for _, p := range people {
		if p.ID != me.ID {
			out = append(out, link{Href: "/people/" + p.ID + "/remove", Text: p.Name})
		}
	}
	return out, err
}

// privacyTake gives the same as a file of JSON.
func (s *Server) privacyTake(c echo.Context) error {
	about, err := s.about(c)
	if err != nil {
		return err
	}
	c.Response().Header().Set("Content-Disposition", `attachment; filename="kept-about-me.json"`)
	return s.sendJSON(c, http.StatusOK, about)
}

func (s *Server) about(c echo.Context) (a aboutPerson, err error) {
	p := person(c)
	a = aboutPerson{ID: p.ID, Name: p.Name, Role: p.Role, AllSites: p.All, Sites: []string{}, Active: p.Active, Contact: p.Contact, Sessions: []aboutEntry{}, Phones: []aboutPhone{}}
	secret, err := s.store.Secret(p.ID)
	if err != nil {
		return a, err
	}
	a.Password, a.Second = timeIf(secret.PasswordSet, secret.Password), timeIf(secret.SecondSince, secret.Second)
	since, has, err := s.store.FeedSince(p.ID)
	if err != nil {
		return a, err
	}
	a.Calendar = timeIf(since, has)
	digest, has, err := s.store.Digest(p.ID)
	if err != nil {
		return a, err
	}
	if has && digest.Every != "" {
		a.Digest = &aboutDigest{digest.Every, digest.To, digest.Sent}
	}
	if err := s.aboutDevices(&a); err != nil {
		return a, err
	}
	return a, s.store.View(scope(c), func(v *store.View) error {
		sites, err := v.Sites()
		if err != nil {
			return err
		}
		for _, site := range sites {
			a.Sites = append(a.Sites, site.Code)
		}
		a.SignIns, err = v.SignIns(p.ID)
		return err
	})
}

// aboutDevices adds where the person is signed in and what sends for them.
func (s *Server) aboutDevices(a *aboutPerson) error {
	sessions, err := s.store.Sessions(a.ID, "")
	if err != nil {
		return err
	}
	for _, one := range sessions {
		a.Sessions = append(a.Sessions, aboutEntry{one.Began, one.Used, one.How, one.Agent, one.Address})
	}
	phones, err := s.store.Phones(a.ID)
	for _, one := range phones {
		a.Phones = append(a.Phones, aboutPhone{one.Installation, one.Since, one.Heard})
	}
	return err
}

func timeIf(t time.Time, has bool) *time.Time {
	if !has {
		return nil
	}
	return &t
}

func (s *Server) aboutFacts(c echo.Context, a aboutPerson) []fact {
	k, zone := s.ink(), s.store.Now().Location()
	since := func(t *time.Time) string {
		if t == nil {
			return k.say("privacy.none")
		}
		return k.say("privacy.since", "time", k.at(*t, zone))
	}
	contact, digest := a.Contact, k.say("privacy.none")
	if contact == "" {
		contact = k.say("privacy.none")
	}
	if a.Digest != nil {
		digest = k.say("privacy.digest_to", "to", a.Digest.To)
	}
	sites, err := s.sitesOf(c)
	named := s.siteNames(person(c), sites)
	if err != nil || named == "" {
		named = k.say("privacy.none")
	}
	return []fact{
		{Name: k.say("privacy.name"), Value: a.Name}, {Name: k.say("privacy.contact"), Value: contact},
		{Name: k.say("privacy.role"), Value: k.named("office.role", a.Role)}, {Name: k.say("privacy.sites"), Value: named},
		{Name: k.say("privacy.id"), Value: a.ID, Mono: true},
		{Name: k.say("privacy.password"), Value: since(a.Password)}, {Name: k.say("privacy.second"), Value: since(a.Second)},
		{Name: k.say("privacy.calendar_own"), Value: since(a.Calendar)}, {Name: k.say("privacy.digest_own"), Value: digest},
		{Name: k.say("privacy.signed_in"), Value: k.say("privacy.places", "n", len(a.Sessions))}, {Name: k.say("privacy.phones_own"), Value: k.say("privacy.phones_n", "n", len(a.Phones))},
	}
}
