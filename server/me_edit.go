package server

import (
	"net/http"

	"github.com/labstack/echo/v4"
)

// mePassword sets a password or changes it; the other sessions end.
func (s *Server) mePassword(c echo.Context) error {
	f, err := s.typedForm(c)
	if err != nil {
		return err
	}
	if f.Get("password") != f.Get("again") {
		f.refuse("again", s.words.Say("me.password_differ"))
	}
	if !s.guesses.mayTry(c.RealIP(), ownOf+person(c).ID) {
		f.refuse("current", s.words.Say("access.password_busy"))
	}
	if f.ok() {
		err := s.store.SetPassword(c.Request().Context(), person(c).ID, f.Get("current"), f.Get("password"), sessionCookie(c.Request()))
		if err == nil {
			return toPage(c, "/me?said=password")
		}
		if err := f.takeRefusal(err); err != nil {
			return err
		}
		s.countOwn(c, f)
	}
	return s.meForm(c, f, "/me/password")
}

// ownOf stands before the id of a person who is signed in and tries present passwords.
const ownOf = "own "

// countOwn counts a wrong present password, so that an open browser left alone does not let it be guessed.
func (s *Server) countOwn(c echo.Context, f *typedForm) {
	if f.wrong["current"] != "" {
		s.guesses.wrong(c.RealIP(), ownOf+person(c).ID)
	}
}

// meForm shows the page again with a form that was refused. Passwords never go back to the browser.
func (s *Server) meForm(c echo.Context, f *typedForm, form string) error {
	for _, name := range []string{"current", "password", "again"} {
		if f.Has(name) {
			f.Set(name, "")
		}
	}
	f.Set("form", form)
	return s.meBack(c, meSaid{typed: f, status: http.StatusUnprocessableEntity})
}

// meSecondOffer draws a key for a second step and shows it.
func (s *Server) meSecondOffer(c echo.Context) error {
	if _, _, err := s.store.OfferSecond(c.Request().Context(), person(c)); err != nil {
		return err
	}
	return toPage(c, "/me#second-step")
}

// meSecondOn switches the second step on; the spare codes stand on this answer only.
func (s *Server) meSecondOn(c echo.Context) error {
	f, err := s.typedForm(c)
	if err != nil {
		return err
	}
	codes, err := s.store.ConfirmSecond(c.Request().Context(), person(c).ID, f.Get("code"), sessionCookie(c.Request()))
	if err == nil {
		return s.meBack(c, meSaid{text: s.words.Say("me.said_second"), codes: codes})
	}
	if err := f.takeRefusal(err); err != nil {
		return err
	}
	return s.meForm(c, f, "/me/second/on")
}

func (s *Server) meSecondOff(c echo.Context) error {
	f, err := s.typedForm(c)
	if err != nil {
		return err
	}
	if !s.guesses.mayTry(c.RealIP(), ownOf+person(c).ID) {
		f.refuse("current", s.words.Say("access.password_busy"))
		return s.meForm(c, f, "/me/second/off")
	}
	if err := s.store.EndSecond(c.Request().Context(), person(c).ID, f.Get("current")); err != nil {
		if err := f.takeRefusal(err); err != nil {
			return err
		}
		s.countOwn(c, f)
		return s.meForm(c, f, "/me/second/off")
	}
	return toPage(c, "/me?said=second_off")
}

// meSessions ends one of the caller's sessions, or all but this one.
func (s *Server) meSessions(c echo.Context) error {
	form, err := decodeForm(c)
	if err != nil {
		return err
	}
	keep := sessionCookie(c.Request())
	if form.Get("session") != "" {
		keep = ""
	}
	if err := s.store.EndSessions(c.Request().Context(), person(c).ID, form.Get("session"), keep); err != nil {
		return err
	}
	return toPage(c, "/me?said=sessions")
}

// mePhoneOff takes one of the caller's phones off.
func (s *Server) mePhoneOff(c echo.Context) error {
	if err := s.store.RevokePhone(c.Request().Context(), person(c).ID, person(c).ID, c.Param("phone")); err != nil {
		return err
	}
	return toPage(c, "/me?said=phone")
}
