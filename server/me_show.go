package server

import (
	"fmt"
	"html/template"
	"net/http"
	"net/url"
	"strings"

	"github.com/labstack/echo/v4"

	"tripwell/export"
	"tripwell/store"
)

// mePage is what a person sees of their own signing in: where they are signed in, which phones send for them, password and
// second step.
type mePage struct {
	Frame
	Heading, Under string
	Said           string
	Sessions       []sessionShown
	Others         bool // more than the one that asks
	Phones         []phoneShown
	Password       formPage
	PasswordSet    string
	Second         secondShown
}

type sessionShown struct {
	ID, Browser, How, Since, Used, Address string
	Own                                    bool
}

type phoneShown struct {
	Name, Since, Heard string
	Sent               []string
	Action             string
}

// secondShown is the part of the page about the second step: off, being set up, just switched on, or on.
type secondShown struct {
	May       bool // a password is there
	On        string
	CodesLeft string
	Key       string
	Picture   *codePicture
	Form      formPage
	Codes     []string // shown the one time
}

// codePicture is a code on the screen: one path over a square of so many modules, its quiet zone included.
type codePicture struct {
	Side int
	Path template.HTMLAttr
	Alt  string
}

func drawCode(text, alt string) (*codePicture, error) {
	rows, err := export.CodeBitmap(text)
	if err != nil {
		return nil, err
	}
	const quiet = 4 // ISO/IEC 18004: four modules all round
	var path strings.Builder
	for y, row := range rows {
		for x := 0; x < len(row); x++ {
			n := 0
			for x+n < len(row) && row[x+n] {
				n++
			}
			if n > 0 {
				fmt.Fprintf(&path, "M%d %dh%dv1h-%dz", x+quiet, y+quiet, n, n)
				x += n
			}
		}
	}
	return &codePicture{Side: len(rows) + 2*quiet, Path: template.HTMLAttr(`d="` + path.String() + `"`), Alt: alt}, nil // figures and letters of our own
}

// codes are the spare codes where they were just made; said tells what was just done.
type meSaid struct {
	text   string
	codes  []string
	typed  *typedForm // the form that comes back
	status int
}

func (s *Server) meShow(c echo.Context) error {
	said := ""
	switch what := c.QueryParam("said"); what {
	case "password", "second_off", "sessions", "phone":
		said = s.words.Say("me.said_" + what)
	}
	return s.meBack(c, meSaid{text: said})
}

func (s *Server) meBack(c echo.Context, said meSaid) error {
	k, p := s.ink(), person(c)
	state, err := s.store.Secret(p.ID)
	if err != nil {
		return err
	}
	view := mePage{Frame: s.frame(c, k.say("me.title"), "me"), Heading: k.say("me.title"), Under: k.say("me.lead", "name", p.Name), Said: said.text}
	if view.Sessions, err = s.sessionsShown(p.ID, sessionCookie(c.Request())); err != nil {
		return err
	}
	view.Others = len(view.Sessions) > 1
	if view.Phones, err = s.phonesShown(p.ID, "/me/phones/"); err != nil {
		return err
	}
	f := said.typed
	if f == nil {
		f = &typedForm{Values: url.Values{}, ink: k, wrong: map[string]string{}}
	}
	view.Password = s.passwordForm(c, state)
	if state.Password {
		view.PasswordSet = k.say("me.password_since", "time", k.at(state.PasswordSet, state.PasswordSet.Location()))
	}
	if view.Second, err = s.secondShown(p, state, said.codes); err != nil {
		return err
	}
	for _, page := range []*formPage{&view.Password, &view.Second.Form} {
		if page.Action == f.Get("form") {
			f.fill(page)
		}
	}
	return s.page(c, max(said.status, http.StatusOK), "me.html", view)
}

func (s *Server) sessionsShown(id, own string) (out []sessionShown, err error) {
	k := s.ink()
	rows, err := s.store.Sessions(id, own)
	for _, r := range rows {
		out = append(out, sessionShown{ID: r.ID, Browser: k.browser(r.Agent), How: k.named("me.how", r.How), Since: k.at(r.Began, s.store.Now().Location()), Used: k.at(r.Used, s.store.Now().Location()), Address: r.Address, Own: r.Own})
	}
	return out, err
}

// phonesShown lists a person's phones; action is what stands before the id of one in the address that takes it off.
func (s *Server) phonesShown(id, action string) (out []phoneShown, err error) {
	k := s.ink()
	phones, err := s.store.Phones(id)
	if err != nil {
		return nil, err
	}
	names := map[string]string{}
	err = s.store.View(store.Scope{Person: id, Role: "owner", All: true}, func(v *store.View) error {
		sites, err := v.Sites()
		for _, site := range sites {
			names[site.ID] = site.Name
		}
		return err
	})
	for _, p := range phones {
		shown := phoneShown{Name: phoneName(p.Installation), Since: k.at(p.Since, s.store.Now().Location()), Action: action + url.PathEscape(p.Installation)}
		if !p.Heard.IsZero() {
			shown.Heard = k.at(p.Heard, s.store.Now().Location())
		}
		for _, sent := range p.Sent {
			if name := names[sent.Log]; name != "" {
				shown.Sent = append(shown.Sent, k.say("me.sent", "n", count(int(sent.Last)), "site", name))
			}
		}
		out = append(out, shown)
	}
	return out, err
}

// phoneName is what a phone is called in lists: the end of its id, which the phone itself shows under its settings.
func phoneName(installation string) string {
	if len(installation) < 6 {
		return installation
	}
	return strings.ToUpper(installation[len(installation)-6:])
}

func (s *Server) passwordForm(c echo.Context, state store.SecretState) formPage {
	k := s.ink()
	fields := []field{
		{Name: "password", ID: "new-password", Label: k.say("me.password_new"), Type: "password", Auto: "new-password", Required: true, Hint: k.say("me.password_hint", "n", state.Least)},
		{Name: "again", Label: k.say("me.password_again"), Type: "password", Auto: "new-password", Required: true},
	}
	page := formPage{Frame: s.frame(c, "", ""), Action: "/me/password", Submit: k.say("me.password_set")}
	if state.Password {
		page.Submit = k.say("me.password_change")
		fields = append([]field{{Name: "current", ID: "present", Label: k.say("me.password_current"), Type: "password", Auto: "current-password", Hint: k.say("me.password_forgot")}}, fields...)
	}
	page.Groups = []fieldGroup{{Fields: fields}}
	return page
}

func (s *Server) secondShown(p store.Person, state store.SecretState, codes []string) (secondShown, error) {
	k := s.ink()
	out := secondShown{May: state.Password, Codes: codes}
	if state.Second {
		out.On = k.say("me.second_since", "time", k.at(state.SecondSince, state.SecondSince.Location()))
		out.CodesLeft = k.say("me.second_left", "n", state.CodesLeft)
		out.Form = formPage{Action: "/me/second/off", Submit: k.say("me.second_off"), Groups: []fieldGroup{{Fields: []field{
			{Name: "current", ID: "off", Label: k.say("me.password_current"), Type: "password", Auto: "current-password", Required: true}}}}}
		return out, nil
	}
	key, address, offered, err := s.store.OfferedSecond(p)
	if err != nil || !offered {
		if isRefusal(err) {
			err = nil // its seal is gone; it is offered anew
		}
		return out, err
	}
	out.Key = strings.TrimSpace(spaced(key))
	if out.Picture, err = drawCode(address, k.say("me.second_picture")); err != nil {
		return out, err
	}
	out.Form = formPage{Action: "/me/second/on", Submit: k.say("me.second_on"), Groups: []fieldGroup{{Fields: []field{
		{Name: "code", ID: "second", Label: k.say("access.second_label"), Type: "text", Auto: "one-time-code", Required: true, Hint: k.say("me.second_hint")}}}}}
	return out, nil
}

// spaced parts a text into fours for reading aloud.
func spaced(s string) string {
	var b strings.Builder
	for i, r := range s {
		if i > 0 && i%4 == 0 {
			b.WriteByte(' ')
		}
		b.WriteRune(r)
	}
	return b.String()
}

// browser names a browser and what it runs on, from what it says of itself; nobody but its owner is to know it again by that.
func (k ink) browser(agent string) string {
	find := func(pairs ...string) string {
		for i := 0; i < len(pairs); i += 2 {
			if strings.Contains(agent, pairs[i]) {
				return pairs[i+1]
			}
		}
		return ""
	}
	name := find("Edg/", "Edge", "OPR/", "Opera", "Firefox/", "Firefox", "SamsungBrowser/", "Samsung Internet", "Chrome/", "Chrome", "CriOS/", "Chrome", "FxiOS/", "Firefox", "Safari/", "Safari")
	on := find("Android", "Android", "iPhone", "iPhone", "iPad", "iPad", "Windows", "Windows", "Macintosh", "Mac", "CrOS", "ChromeOS", "Linux", "Linux")
	switch {
	case name == "":
		return k.say("me.browser_other")
	case on == "":
		return name
	}
	return k.say("me.browser", "name", name, "on", on)
}
