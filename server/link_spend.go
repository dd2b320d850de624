package server

import (
	"net/http"
	"sync"

	"github.com/labstack/echo/v4"
	"golang.org/x/time/rate"

	"tripwell/store"
)

// linkSpend signs in: the link is used up, the browser gets its session.
func (s *Server) linkSpend(c echo.Context) error {
	form, err := decodeForm(c)
	if err != nil {
		return err
	}
	session, err := s.store.SpendLink(c.Request().Context(), c.Param("token"), arrival(c))
	if err != nil {
		return s.wrongLink(c, err)
	}
	return s.beginSession(c, session, ownPath(form.Get("next")))
}

// codeTyped signs in by a short code. Wrong ones are counted before one is looked at, for each address and for all together:
// a code is too short to stand against whoever may try for ever.
func (s *Server) codeTyped(c echo.Context, typed, next string) error {
	if !s.wrong.any(c.RealIP()) || !s.wrong.any(everybody) {
		return refuse(codeBusy, "", "Too many wrong codes were typed. Wait a minute, or use a sign-in link.")
	}
	session, err := s.store.SpendCode(c.Request().Context(), typed, arrival(c))
	if isRefusal(err) {
		s.wrong.allow(c.RealIP())
		s.wrong.allow(everybody)
		return s.page(c, http.StatusBadRequest, "signin.html", s.askPage(c, next, s.words.Say("access.code_problem")))
	}
	if err != nil {
		return err
	}
	return s.beginSession(c, session, next)
}

// beginSession gives the browser its session and sends it where it wanted to go.
func (s *Server) beginSession(c echo.Context, session, next string) error {
	p, err := s.store.Session(session)
	if err != nil {
		return err
	}
	c.SetCookie(newSessionCookie(c.Request(), session))
	if next == "" {
		next = home(p.Role)
	}
	return toPage(c, next)
}

// arrival is what is kept of how this browser came in; the session it had ends with the new one.
func arrival(c echo.Context) store.Arrival {
	return store.Arrival{Agent: c.Request().UserAgent(), Address: c.RealIP(), Former: sessionCookie(c.Request())}
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

// wrongLinks counts wrong sign-in links and codes per address: ten at once, then one every six seconds.
type wrongLinks struct {
	mu sync.Mutex
	by map[string]*rate.Limiter
}

const (
	wrongAtOnce    = 10
	wrongPerSec    = 1.0 / 6
	wrongAddresses = 4096

	wrongOfAllAtOnce = 200
	wrongOfAllPerSec = 1
)

func newWrongLinks() *wrongLinks { return &wrongLinks{by: map[string]*rate.Limiter{}} }

// everybody stands for all addresses together; theirs is a wider count, so that one of them locks nobody else out.
const everybody = "*"

func (w *wrongLinks) allow(address string) bool {
	w.mu.Lock()
	defer w.mu.Unlock()
	return w.of(address).Allow()
}

// any reports whether another wrong one would be let through; it counts nothing.
func (w *wrongLinks) any(address string) bool {
	w.mu.Lock()
	defer w.mu.Unlock()
	return w.of(address).Tokens() >= 1
}

func (w *wrongLinks) of(address string) *rate.Limiter {
	l, ok := w.by[address]
	if !ok {
		if len(w.by) >= wrongAddresses {
			all := w.by[everybody]
			clear(w.by) // forgetting is safe: a link has more than 128 random bits, and codes are counted over all addresses too
			if all != nil {
				w.by[everybody] = all
			}
		}
		l = rate.NewLimiter(wrongPerSec, wrongAtOnce)
		if address == everybody {
			l = rate.NewLimiter(wrongOfAllPerSec, wrongOfAllAtOnce)
		}
		w.by[address] = l
	}
	return l
}
