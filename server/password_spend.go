package server

import (
	"net/http"

	"github.com/labstack/echo/v4"
)

// secondPage asks for the second step after a right password.
type secondPage struct {
	Frame
	Half, Next, Problem string
}

// passwordTyped signs in by name and password. Where a second step follows, it asks for that.
func (s *Server) passwordTyped(c echo.Context) error {
	form, err := decodeForm(c)
	if err != nil {
		return err
	}
	name, next := form.Get("name"), ownPath(form.Get("next"))
	if !s.guesses.mayTry(c.RealIP(), name) {
		return s.page(c, http.StatusTooManyRequests, "signin.html", s.passwordAsk(c, next, name, s.words.Say("access.password_busy")))
	}
	session, half, err := s.store.SignIn(c.Request().Context(), name, form.Get("password"), arrival(c))
	switch {
	case isRefusal(err):
		s.guesses.wrong(c.RealIP(), name)
		w, _ := wrongOf(err)
		return s.page(c, http.StatusBadRequest, "signin.html", s.passwordAsk(c, next, name, w.Text))
	case err != nil:
		return err
	case half != "":
		return s.page(c, http.StatusOK, "signin_second.html", secondPage{Frame: s.frame(c, s.words.Say("access.second_title"), ""), Half: half, Next: next})
	}
	s.guesses.right(c.RealIP(), name)
	return s.beginSession(c, session, next)
}

// passwordAsk is the sign-in page with the name that was typed; a password never goes back to the browser.
func (s *Server) passwordAsk(c echo.Context, next, name, problem string) askPage {
	p := s.askPage(c, next, "")
	p.Typed, p.PasswordProblem = name, problem
	return p
}

// secondTyped takes the code of the second step.
func (s *Server) secondTyped(c echo.Context) error {
	form, err := decodeForm(c)
	if err != nil {
		return err
	}
	half, next := form.Get("half"), ownPath(form.Get("next"))
	p, err := s.store.HalfPerson(half)
	if err == nil {
		if !s.guesses.mayTry(c.RealIP(), secondOf+p.ID) {
			return refuse(codeBusy, "", s.words.Say("access.password_busy"))
		}
		var session string
		if session, err = s.store.SecondStep(c.Request().Context(), half, form.Get("code"), arrival(c)); err == nil {
			s.guesses.right(c.RealIP(), p.Name)
			return s.beginSession(c, session, next)
		}
		if isRefusal(err) {
			s.guesses.wrong(c.RealIP(), secondOf+p.ID)
		}
	}
	w, fault := wrongOf(err)
	switch {
	case fault:
		return err
	case w.Field == "half":
		return s.page(c, http.StatusBadRequest, "signin.html", s.passwordAsk(c, next, "", w.Text))
	}
	return s.page(c, http.StatusBadRequest, "signin_second.html", secondPage{Frame: s.frame(c, s.words.Say("access.second_title"), ""), Half: half, Next: next, Problem: w.Text})
}

// secondOf stands before the id of whoever's second step is tried, so that it counts apart from their password.
const secondOf = "second "
