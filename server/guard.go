package server

import (
	"net/http"
	"strings"

	"github.com/labstack/echo/v4"

	"tripwell/store"
)

// who is a set of callers a route is for.
type who uint8

const (
	crew who = 1 << iota
	manager
	auditor
	phone // an enrolled installation, by its bearer token
	owner // whoever may open the folder's socket
	// alone marks a POST of which only its caller gets anything: a file made from what they may read, their own feed, their
	// own mail. Nothing of the work changes by it, so it may be an auditor's, who otherwise only reads.
	alone

	anyone who = 0
	office     = manager | auditor // reads the office pages; only a manager changes anything
	signed     = crew | office
)

// roles by the word a session carries.
var roles = map[string]who{"crew": crew, "manager": manager, "auditor": auditor}

// caller is who asks, kept with the request.
type caller struct {
	person       store.Person
	session      bool
	installation string
}

const callerKey = "caller"

// guard stands before every handler: where the request came from, how much it may carry, and who may ask.
func (s *Server) guard(r route) echo.HandlerFunc {
	limit := r.body
	if limit == 0 {
		limit = formLimit
	}
	return func(c echo.Context) error {
		req := c.Request()
		// A bearer token is not sent by a browser on its own, so another site's page cannot borrow it; a cookie is.
		if r.who != phone && r.who != owner {
			if err := s.cross.Check(req); err != nil {
				return refuse(codeForbidden, "", "This request came from another web page. Open the page here and do it again.")
			}
		}
		if req.ContentLength > limit {
			return tooLarge(limit)
		}
		req.Body = http.MaxBytesReader(c.Response().Writer, req.Body, limit)
		if err := s.permit(c, r.who); err != nil {
			return err
		}
		if err := r.handle(s, c); err != nil {
			return err
		}
		if err := s.opened(c, r); err != nil {
			s.log.Warn("what was opened could not be noted", "route", r.path, "error", err)
		}
		return nil
	}
}

func (s *Server) permit(c echo.Context, w who) error {
	switch {
	case w == owner:
		return nil
	case w == phone:
		token, ok := strings.CutPrefix(c.Request().Header.Get("Authorization"), "Bearer ")
		if !ok {
			return refuse(codeNotSignedIn, "", "This phone is not enrolled here. Sign in again; what it still has to send stays on it.")
		}
		installation, p, err := s.store.Bearer(strings.TrimSpace(token))
		if err != nil {
			return refusedAs(err, codeNotSignedIn, "This phone is no longer enrolled here. Sign in again; what it still has to send stays on it.")
		}
		c.Set(callerKey, &caller{person: p, installation: installation})
		return nil
	}
	who, err := s.whoIs(c)
	if err != nil {
		return err
	}
	switch {
	case w == anyone:
		return nil
	case !who.session:
		return refuse(codeNotSignedIn, "", "You are not signed in here. Open your sign-in link, or ask a manager for a new one.")
	case w&roles[who.person.Role] == 0:
		return refuse(codeForbidden, "", "This is not open to your role ("+s.words.Say("access.role_"+who.person.Role)+"). Ask a manager if you need it.")
	}
	return nil
}

// whoIs reads the session of a browser once per request. Nobody signed in is no error: session is false.
func (s *Server) whoIs(c echo.Context) (*caller, error) {
	if who, ok := c.Get(callerKey).(*caller); ok {
		return who, nil
	}
	who := &caller{}
	if token := sessionCookie(c.Request()); token != "" {
		p, err := s.store.Session(token)
		switch {
		case err == nil:
			who.person, who.session = p, true
		case !isRefusal(err):
			return nil, err
		}
	}
	c.Set(callerKey, who)
	return who, nil
}

// person is who asks; only behind a route that is not for anyone.
func person(c echo.Context) store.Person {
	who, _ := c.Get(callerKey).(*caller)
	if who == nil {
		return store.Person{}
	}
	return who.person
}

// scope is what the caller may see. A route for anyone gives the empty scope.
func scope(c echo.Context) store.Scope {
	p := person(c)
	if p.ID == "" {
		return store.Scope{}
	}
	return p.Scope()
}

// may reports whether the caller has one of the roles, for handlers that show more to some.
func may(c echo.Context, w who) bool { return w&roles[person(c).Role] != 0 }
