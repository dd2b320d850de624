package server

import (
	"net/http"
	"net/url"

	"github.com/labstack/echo/v4"
)

// personRemoveAsk says what removing a person does before it is done.
func (s *Server) personRemoveAsk(c echo.Context) error {
	p, err := s.personOf(c)
	if err != nil {
		return err
	}
	k := s.ink()
	page := formPage{Frame: s.frame(c, k.say("privacy.remove_title"), "people"), Heading: k.say("privacy.remove_head", "name", p.Name), Lead: k.say("privacy.remove_text"),
		Crumbs: []link{{Href: "/people", Text: k.say("office.person.title")}}, Action: "/people/" + url.PathEscape(p.ID) + "/remove", Submit: k.say("privacy.remove_go"), Cancel: "/people/" + url.PathEscape(p.ID), Grave: true}
	return s.page(c, http.StatusOK, "form.html", page)
}

// personRemove deletes what the directory knows of a person.
func (s *Server) personRemove(c echo.Context) error {
	p, err := s.personOf(c)
	if err != nil {
		return err
	}
	if err := s.store.RemovePerson(c.Request().Context(), person(c).ID, p.ID); err != nil {
		return err
	}
	return c.Redirect(http.StatusSeeOther, "/people")
}
