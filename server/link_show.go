package server

import (
	"net/http"
	"net/url"
	"path"
	"strings"

	"github.com/labstack/echo/v4"

	"tripwell/store"
)

// linkPage is the page of a sign-in link: one button. Person is whose link it is.
type linkPage struct {
	Frame
	Person string
	Action string
	Next   string
}

// askPage is shown to whoever is signed out; it says the same for every address.
type askPage struct {
	Frame
	Next    string
	Problem string
	Field   string // where a phone that is enrolled goes on without signing in

	Typed, PasswordProblem string // the name that was typed with a password, and what is wrong
}

func (s *Server) askPage(c echo.Context, next, problem string) askPage {
	p := askPage{Frame: s.frame(c, s.words.Say("access.ask_title"), ""), Next: next, Problem: problem, Field: "/field"}
	if dir, tag := path.Split(next); strings.EqualFold(dir, "/t/") {
		p.Field = fieldTag(tag)
	}
	return p
}

// toSignIn sends a browser to the sign-in page and remembers where it wanted to go.
func (s *Server) toSignIn(c echo.Context) error {
	q := ""
	if next := ownPath(c.Request().URL.RequestURI()); c.Request().Method == http.MethodGet && next != "" && next != "/" {
		q = "?" + url.Values{"next": {next}}.Encode()
	}
	return toPage(c, "/in"+q)
}

// linkAsk shows the sign-in page; with other also to a browser somebody is signed in to, for the next person on a shared phone.
func (s *Server) linkAsk(c echo.Context) error {
	if person(c).ID != "" && c.QueryParam("other") == "" {
		return toPage(c, home(person(c).Role))
	}
	return s.page(c, http.StatusOK, "signin.html", s.askPage(c, ownPath(c.QueryParam("next")), ""))
}

// linkPasted takes a link that was pasted instead of opened: an application on a phone's home screen does not share the
// browser's cookies, so a link opened from a message signs in the wrong one.
func (s *Server) linkPasted(c echo.Context) error {
	form, err := decodeForm(c)
	if err != nil {
		return err
	}
	next := ownPath(form.Get("next"))
	if store.BareCode(form.Get("link")) != "" {
		return s.codeTyped(c, form.Get("link"), next)
	}
	token := linkToken(form.Get("link"))
	if token == "" {
		return s.page(c, http.StatusBadRequest, "signin.html", s.askPage(c, next, s.words.Say("access.ask_problem")))
	}
	return toPage(c, linkPath(token, next))
}

// linkToken finds the token in a pasted link or in the token itself.
func linkToken(pasted string) string {
	pasted = strings.TrimSpace(pasted)
	if u, err := url.Parse(pasted); err == nil && u.Path != "" {
		pasted = path.Base(u.Path)
	}
	if len(pasted) < 16 || len(pasted) > 128 || strings.ContainsFunc(pasted, func(r rune) bool {
		return !(r >= 'a' && r <= 'z' || r >= 'A' && r <= 'Z' || r >= '0' && r <= '9' || r == '-' || r == '_')
	}) {
		return ""
	}
	return pasted
}

func linkPath(token, next string) string {
	p := "/in/" + url.PathEscape(token)
	if next != "" {
		p += "?" + url.Values{"next": {next}}.Encode()
	}
	return p
}

// linkShow shows whose link it is and one button; it spends nothing, so a mail scanner that opens it does no harm.
func (s *Server) linkShow(c echo.Context) error {
	token := c.Param("token")
	p, err := s.store.LinkPerson(token)
	if err != nil {
		return s.wrongLink(c, err)
	}
	next := ownPath(c.QueryParam("next"))
	return s.page(c, http.StatusOK, "signin_link.html", linkPage{Frame: s.frame(c, s.words.Say("access.link_title"), ""), Person: p.Name, Action: "/in/" + url.PathEscape(token), Next: next})
}

// home is where a role begins.
func home(role string) string {
	if role == "crew" {
		return "/field"
	}
	return "/"
}
