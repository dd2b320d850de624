package server

import (
	"slices"
	"strings"

	"github.com/labstack/echo/v4"

	"tripwell/store"
)

// personSessions signs a person out everywhere; their phones go on sending.
func (s *Server) personSessions(c echo.Context) error {
	p, err := s.personOf(c)
	if err != nil {
		return err
	}
	if err := s.store.EndSessions(c.Request().Context(), p.ID, "", sessionCookie(c.Request())); err != nil {
		return err
	}
	return toPage(c, personHref(p.ID)+"?said=sessions")
}

// personEndAsk says what ends when somebody leaves, and what stays.
func (s *Server) personEndAsk(c echo.Context) error {
	p, err := s.personOf(c)
	if err != nil {
		return err
	}
	phones, err := s.phonesShown(p.ID, "")
	if err != nil {
		return err
	}
	k := s.ink()
	lead := k.say("office.person.end_lead", "name", p.Name)
	for _, one := range phones {
		lead += " " + s.phoneSays(one)
	}
	return s.graveAsk(c, p, k.say("office.person.end_head", "name", p.Name), lead, personHref(p.ID)+"/end", k.say("office.person.end_do"))
}

// personEnd ends a person's access: grant, sessions, links, password and phones. Their work stays theirs.
func (s *Server) personEnd(c echo.Context) error {
	p, err := s.personOf(c)
	if err != nil {
		return err
	}
	if p.ID == person(c).ID {
		return refuse(codeConflict, "", s.words.Say("office.person.self"))
	}
	p.Active = false
	if _, err := s.store.PutPerson(c.Request().Context(), person(c).ID, p); err != nil {
		return err
	}
	return toPage(c, personHref(p.ID)+"?said=ended")
}

// personPhoneAsk says how far a lost phone had sent before it is taken off.
func (s *Server) personPhoneAsk(c echo.Context) error {
	p, phone, err := s.phoneOf(c)
	if err != nil {
		return err
	}
	k := s.ink()
	return s.graveAsk(c, p, k.say("office.person.phone_head", "phone", phone.Name, "name", p.Name), k.say("office.person.phone_lead")+" "+s.phoneSays(phone), personHref(p.ID)+"/phones/"+c.Param("phone"), k.say("office.person.phone_do"))
}

func (s *Server) personPhoneOff(c echo.Context) error {
	p, _, err := s.phoneOf(c)
	if err != nil {
		return err
	}
	if err := s.store.RevokePhone(c.Request().Context(), person(c).ID, p.ID, c.Param("phone")); err != nil {
		return err
	}
	return toPage(c, personHref(p.ID)+"?said=phone")
}

func (s *Server) phoneOf(c echo.Context) (store.Person, phoneShown, error) {
	p, err := s.personOf(c)
	if err != nil {
		return p, phoneShown{}, err
	}
	phones, err := s.phonesShown(p.ID, "")
	i := slices.IndexFunc(phones, func(one phoneShown) bool { return one.Action == c.Param("phone") })
	if err == nil && i < 0 {
		err = refuse(codeNotFound, "phone", "There is no such phone with this person, or it was taken off already.")
	}
	if err != nil {
		return p, phoneShown{}, err
	}
	return p, phones[i], nil
}

// phoneSays tells how far a phone had sent: whatever it counted after that is still on it.
func (s *Server) phoneSays(one phoneShown) string {
	k := s.ink()
	if len(one.Sent) == 0 {
		return k.say("office.person.phone_none", "phone", one.Name)
	}
	return k.say("office.person.phone_sent", "phone", one.Name, "sent", strings.Join(one.Sent, "; "))
}

// graveAsk is a page with one button that takes something away.
func (s *Server) graveAsk(c echo.Context, p store.Person, heading, lead, action, submit string) error {
	f, err := s.blankForm(nil)
	if err != nil {
		return err
	}
	return s.formBack(c, f, formPage{Frame: s.frame(c, heading, "people"), Crumbs: []link{{Href: "/people", Text: s.words.Say("office.person.title")}, {Href: personHref(p.ID), Text: p.Name}},
		Heading: heading, Lead: lead, Action: action, Submit: submit, Cancel: personHref(p.ID), Grave: true})
}
