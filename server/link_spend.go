package server

import (
	"sync"

	"github.com/labstack/echo/v4"
	"golang.org/x/time/rate"
)

// linkSpend signs in: the link is used up, the browser gets its session.
func (s *Server) linkSpend(c echo.Context) error {
	form, err := decodeForm(c)
	if err != nil {
		return err
	}
	session, err := s.store.SpendLink(c.Request().Context(), c.Param("token"))
	if err != nil {
		return s.wrongLink(c, err)
	}
	p, err := s.store.Session(session)
	if err != nil {
		return err
	}
	c.SetCookie(newSessionCookie(c.Request(), session))
	to := home(p.Role)
	if next := ownPath(form.Get("next")); next != "" {
		to = next
	}
	return toPage(c, to)
}

// sessionEnd signs out. What a phone still has to send stays on it.
func (s *Server) sessionEnd(c echo.Context) error {
	if token := sessionCookie(c.Request()); token != "" {
		if err := s.store.EndSession(token); err != nil && !isRefusal(err) {
			return err
		}
	}
	c.SetCookie(newSessionCookie(c.Request(), ""))
	return toPage(c, "/in")
}

// wrongLink answers a link that signs nobody in. Only wrong links are counted: a good one always works, so a whole crew
// behind one address cannot be locked out by whoever guesses from there.
func (s *Server) wrongLink(c echo.Context, err error) error {
	if !isRefusal(err) {
		return err
	}
	if !s.wrong.allow(c.RealIP()) {
		return refuse(codeBusy, "", "Too many wrong sign-in links came from here. Wait a minute, then open the link you were given.")
	}
	return refuse(codeNotFound, "", "This sign-in link has been used or is out of date. Ask a manager for a new one.")
}

// wrongLinks counts wrong sign-in links per address: ten at once, then one every six seconds.
type wrongLinks struct {
	mu sync.Mutex
	by map[string]*rate.Limiter
}

const (
	wrongAtOnce    = 10
	wrongPerSec    = 1.0 / 6
	wrongAddresses = 4096
)

func newWrongLinks() *wrongLinks { return &wrongLinks{by: map[string]*rate.Limiter{}} }

func (w *wrongLinks) allow(address string) bool {
	w.mu.Lock()
	defer w.mu.Unlock()
	l, ok := w.by[address]
	if !ok {
		if len(w.by) >= wrongAddresses {
			clear(w.by) // forgetting is safe: a link has more than 128 random bits
		}
		l = rate.NewLimiter(wrongPerSec, wrongAtOnce)
		w.by[address] = l
	}
	return l.Allow()
}
