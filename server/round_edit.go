package server

import (
	"slices"

	"github.com/labstack/echo/v4"

	"tripwell/store"
)

// roundOf reads the round an address names.
func (s *Server) roundOf(c echo.Context) (r store.Round, site store.Site, err error) {
	err = s.store.View(scope(c), func(v *store.View) error {
		if r, err = v.Round(c.Param("round")); err != nil {
			return err
		}
		site, err = v.Site(r.Site)
		return err
	})
	return r, site, err
}

func roundValues(r store.Round) map[string]string {
	return map[string]string{"day": r.Day.String(), "starts": r.Starts, "crew": r.Crew, "note": r.Note, "off": ""}
}

func (s *Server) roundEdit(c echo.Context) error {
	r, site, err := s.roundOf(c)
	if err != nil {
		return err
	}
	values := roundValues(r)
	if r.State == store.RoundOff {
		values["off"] = "yes"
	}
	f, err := s.editForm(values, r.Conflicts)
	if err != nil {
		return err
	}
	f.Values["people"], f.Values[wasPrefix+"people"] = r.People, r.People
	return s.roundFormBack(c, f, r, site)
}

func (s *Server) roundUpdate(c echo.Context) error {
	r, site, err := s.roundOf(c)
	if err != nil {
		return err
	}
	f, err := s.typedForm(c)
	if err != nil {
		return err
	}
	set := map[string]any{}
	f.setText(set, "day", "day", f.date("day").String())
	f.setText(set, "starts", "starts", f.clock("starts"))
	if set["starts"] != nil {
		err := s.store.View(scope(c), func(v *store.View) error {
			warning, err := s.outsideHours(v, r.Site, f.clock("starts"), r.StopTexts())
			s.warnOfHours(f, warning)
			return err
		})
		if err != nil {
			return err
		}
	}
	f.setText(set, "crew", "crew", f.line("crew", 80))
	f.setText(set, "note", "note", f.line("note", 500))
	if people := f.Values["people"]; !slices.Equal(people, r.People) {
		if set["people"] = people; len(people) == 0 {
			set["people"] = nil
		}
	}
	if off := f.Get("off") == "yes"; off != (r.State == store.RoundOff) {
		set["off"] = off
	}
	if f.ok() {
		if len(set) > 0 {
			err = s.append(c, store.Draft{ID: f.id(recordField), Kind: "round.set", Log: r.Site, Subject: r.ID, Body: f.setBody(set)})
		}
		if err == nil {
			return toPage(c, "/rounds/"+r.ID)
		}
		if err := f.takeRefusal(err); err != nil {
			return err
		}
	}
	return s.roundFormBack(c, f, r, site)
}

func (s *Server) roundFormBack(c echo.Context, f *typedForm, r store.Round, site store.Site) error {
	k := s.ink()
	people, err := s.walkers(r.Site)
	if err != nil {
		return err
	}
	name := s.roundName(r, s.today(site))
	fields := append([]field{{Name: "day", Label: k.say("office.round.field.day"), Type: "date"}}, s.carryFields(f)...)
	if len(people) > 1 {
		fields = slices.Insert(fields, 2, field{Name: "people", Label: k.say("office.round.field.people"), Type: "checks", Options: people[1:], Hint: k.say("office.round.people_hint")})
	}
	fields = append(fields, field{Name: "off", Label: k.say("office.round.off"), Type: "check", Hint: k.say("office.round.off_hint")})
	return s.formBack(c, f, formPage{
		Frame: s.frame(c, name, "rounds"), Crumbs: []link{{Href: "/rounds", Text: k.say("office.round.title")}, {Href: "/rounds/" + r.ID, Text: name}},
		Heading: k.say("office.round.edit_head", "name", name, "site", site.Name), Action: "/rounds/" + r.ID + "/edit", Submit: k.say("office.round.save"), Cancel: "/rounds/" + r.ID,
		Groups: []fieldGroup{{Fields: fields}},
	})
}

// acceptForm stands on the page of a round that is ended, for managers.
func (s *Server) acceptForm(r store.Round, f *typedForm, view *roundPage) {
	if !view.Change || r.State != store.RoundEnded {
		return
	}
	k := s.ink()
	p := formPage{Heading: k.say("office.round.accept_head"), Lead: k.say("office.round.accept_lead"), Action: "/rounds/" + r.ID + "/accept", Submit: k.say("office.round.accept"),
		Groups: []fieldGroup{{Fields: []field{{Name: "accept_note", Label: k.say("office.round.accept_note"), Type: "text-area", Wide: true, Hint: k.say("office.round.accept_hint")}}}}}
	f.fill(&p)
	view.Accept = &p
}

// roundAccept is a manager's word that a round is done with, whatever is left of it.
func (s *Server) roundAccept(c echo.Context) error {
	r, _, err := s.roundOf(c)
	if err != nil {
		return err
	}
	f, err := s.typedForm(c)
	if err != nil {
		return err
	}
	body := map[string]any{}
	if note := f.line("accept_note", 500); note != "" {
		body["note"] = note
	}
	if r.State != store.RoundEnded && r.State != store.RoundAccepted {
		return refuse(codeConflict, "round", s.words.Say("office.round.not_ended"))
	}
	if f.ok() {
		err := s.append(c, store.Draft{ID: f.id(recordField), Kind: "round.accepted", Log: r.Site, Subject: r.ID, Body: body})
		if err == nil {
			return toPage(c, "/rounds/"+r.ID)
		}
		if err := f.takeRefusal(err); err != nil {
			return err
		}
	}
	view := roundPage{Frame: s.frame(c, "", "rounds")}
	return s.roundBack(c, f, &view)
}
