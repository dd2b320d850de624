package server

import (
	"fmt"
	"slices"
	"strings"

	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
	"tripwell/store/record"
)

// idsOfRecord is how many devices one record names at most: a record has at most 64 KiB.
const idsOfRecord = 1500

// Where an occasion or a pause holds.
const (
	wholeSite    = ""
	buildingOnly = "building:"
	deviceOnly   = "device:"
)

// occasionNew asks what happened that makes tests due at once: a storm over the site, damage, a repair.
func (s *Server) occasionNew(c echo.Context) error {
	site, err := s.siteOf(c)
	if err != nil {
		return err
	}
	f, err := s.blankForm(map[string]string{"cause": forms.Storm, "on": s.today(site).String()})
	if err != nil {
		return err
	}
	return s.askedBack(c, f, site, s.occasionForm)
}

func (s *Server) occasionCreate(c echo.Context) error {
	site, err := s.siteOf(c)
	if err != nil {
		return err
	}
	f, err := s.typedForm(c)
	if err != nil {
		return err
	}
	first := f.id(recordField)
	body := map[string]any{"cause": f.choice("cause", forms.Causes()...), "on": f.date("on")}
	s.dayUntil(f, "on", s.today(site))
	if tasks := f.Values["tasks"]; len(tasks) > 0 {
		body["tasks"] = tasks
	}
	if text := f.line("text", 300); text != "" {
		body["text"] = text
	}
	return s.askedTake(c, f, site, s.occasionForm, func(i int) store.Draft {
		id := namedAfter(first, "occasion.noted", i)
		return store.Draft{ID: id, Kind: "occasion.noted", Log: site.ID, Subject: id, Body: body}
	})
}

// pauseNew asks for the days on which no tests are asked for; with ?pause it changes one.
func (s *Server) pauseNew(c echo.Context) error {
	site, err := s.siteOf(c)
	if err != nil {
		return err
	}
	f, err := s.blankForm(map[string]string{"from": s.today(site).String()})
	if err != nil {
		return err
	}
	err = s.store.View(scope(c), func(v *store.View) error {
		all, err := v.Pauses(site.ID)
		for _, p := range all {
			if p.ID == c.QueryParam("pause") {
				f.Set(subjectField, p.ID)
				f.Set("from", p.From.String())
				f.Set("until", p.Until.String())
				f.Set("reason", p.Reason)
				f.Set("kept", "yes")
			}
		}
		return err
	})
	if err != nil {
		return err
	}
	return s.askedBack(c, f, site, s.pauseForm)
}

func (s *Server) pauseCreate(c echo.Context) error {
	site, err := s.siteOf(c)
	if err != nil {
		return err
	}
	f, err := s.typedForm(c)
	if err != nil {
		return err
	}
	k, first, subject := s.ink(), f.id(recordField), f.id(subjectField)
	from, until := f.date("from"), f.date("until")
	for _, name := range []string{"from", "until"} {
		if f.date(name) == forms.NoDay && f.wrong[name] == "" {
			f.refuse(name, k.say("asked.need_day"))
		}
	}
	if f.ok() && until < from && f.Get("kept") != "yes" {
		f.refuse("until", k.say("asked.end_before"))
	}
	body := map[string]any{"from": from, "until": until, "reason": f.needed("reason", k.say("asked.pause_reason"), 300)}
	if f.Get("kept") == "yes" {
		return s.pauseChange(c, f, site, subject, first, body)
	}
	return s.askedTake(c, f, site, s.pauseForm, func(i int) store.Draft {
		return store.Draft{ID: namedAfter(first, "pause.set", i), Kind: "pause.set", Log: site.ID, Subject: namedAfter(subject, "pause", i), Body: body}
	})
}

// pauseChange says a pause again with the devices it had.
func (s *Server) pauseChange(c echo.Context, f *typedForm, site store.Site, subject, id string, body map[string]any) error {
	err := s.store.View(scope(c), func(v *store.View) error {
		all, err := v.Pauses(site.ID)
		i := slices.IndexFunc(all, func(p store.PauseRow) bool { return p.ID == subject })
		if err == nil && i < 0 {
			return refuse(codeNotFound, "", s.words.Say("asked.pause_gone"))
		}
		if err == nil && len(all[i].Devices) > 0 {
			body["devices"] = all[i].Devices
		}
		return err
	})
	if err != nil {
		return err
	}
	if f.ok() {
		err := s.append(c, store.Draft{ID: id, Kind: "pause.set", Log: site.ID, Subject: subject, Body: body})
		if err == nil {
			return toPage(c, siteHref(site)+"/asked")
		}
		if err := f.takeRefusal(err); err != nil {
			return err
		}
	}
	return s.askedBack(c, f, site, s.pauseForm)
}

// namedAfter gives the first id, then ids that follow from it, so that sending a form twice makes the same records.
func namedAfter(first, kind string, i int) string {
	if i == 0 {
		return first
	}
	return record.NamedID(first, kind, fmt.Sprint(i))
}

// dayUntil refuses a day that was not given, or lies ahead.
func (s *Server) dayUntil(f *typedForm, name string, today forms.Day) {
	switch d := f.date(name); {
	case d == forms.NoDay && f.wrong[name] == "":
		f.refuse(name, s.words.Say("office.form.day"))
	case d > today:
		f.refuse(name, s.words.Say("office.form.future"))
	}
}

// askedTake writes what a form says of the devices it names, in as many records as they need.
func (s *Server) askedTake(c echo.Context, f *typedForm, site store.Site, form func(echo.Context, *typedForm, store.Site, []option) formPage, draft func(i int) store.Draft) error {
	devices, err := s.devicesAsked(c, site, f.Get("where"))
	if err != nil {
		return err
	}
	if f.Get("where") != wholeSite && len(devices) == 0 {
		f.refuse("where", s.words.Say("asked.no_device"))
	}
	if f.ok() {
		drafts := []store.Draft{draft(0)}
		for i, part := range slices.Collect(slices.Chunk(devices, idsOfRecord)) {
			d := draft(i)
			body := map[string]any{"devices": part}
			for name, v := range d.Body.(map[string]any) {
				body[name] = v
			}
			d.Body = body
			drafts = append(drafts[:i], d)
		}
		err := s.append(c, drafts...)
		if err == nil {
			return toPage(c, siteHref(site)+"/asked")
		}
		if err := f.takeRefusal(err); err != nil {
			return err
		}
	}
	return s.askedBack(c, f, site, form)
}

// devicesAsked names the devices of a building, or one; none for the whole site.
func (s *Server) devicesAsked(c echo.Context, site store.Site, where string) (ids []string, err error) {
	if where == wholeSite {
		return nil, nil
	}
	err = s.store.View(scope(c), func(v *store.View) error {
		for d, err := range v.Devices(site.ID) {
			if err != nil {
				return err
			}
			if !d.Retired && (where == buildingOnly+d.Place.Building || where == deviceOnly+d.ID) {
				ids = append(ids, d.ID)
			}
		}
		return nil
	})
	return ids, err
}

// askedBack sends one of the two forms, with the places to choose from.
func (s *Server) askedBack(c echo.Context, f *typedForm, site store.Site, form func(echo.Context, *typedForm, store.Site, []option) formPage) error {
	where := []option{{Value: wholeSite, Text: s.words.Say("asked.whole")}}
	one := strings.TrimPrefix(f.Get("where"), deviceOnly)
	if id := c.QueryParam("device"); id != "" {
		one = id
		f.Set("where", deviceOnly+id)
	}
	err := s.store.View(scope(c), func(v *store.View) error {
		for d, err := range v.Devices(site.ID) {
			if err != nil {
				return err
			}
			if o := (option{Value: buildingOnly + d.Place.Building, Text: s.words.Say("asked.building", "name", d.Place.Building)}); d.Place.Building != "" && !slices.Contains(where, o) {
				where = append(where, o)
			}
			if d.ID == one {
				where = append(where, option{Value: deviceOnly + d.ID, Text: joined(s.spot(d), d.Place.Context())})
			}
		}
		return nil
	})
	if err != nil {
		return err
	}
	return s.formBack(c, f, form(c, f, site, where))
}

func (s *Server) occasionForm(c echo.Context, f *typedForm, site store.Site, where []option) formPage {
	k := s.ink()
	causes := field{Name: "cause", Label: k.say("asked.cause")}
	for _, cause := range []string{forms.Storm, forms.Damage, forms.Repaired, forms.Installed, forms.OutOfTolerance} {
		causes.Options = append(causes.Options, option{Value: cause, Text: k.say("plans.cause." + cause)})
	}
	tasks := field{Name: "tasks", Label: k.say("asked.tasks"), Type: "checks", Hint: k.say("asked.tasks_hint")}
	for _, task := range forms.Tasks() {
		tasks.Options = append(tasks.Options, option{Value: task, Text: k.named("task", task)})
	}
	return formPage{Frame: s.frame(c, k.say("asked.occasion_new"), "sites"), Crumbs: []link{{Href: siteHref(site), Text: site.Name}, {Href: siteHref(site) + "/asked", Text: k.say("asked.title")}},
		Heading: k.say("asked.occasion_head"), Lead: k.say("asked.occasion_lead"), Action: siteHref(site) + "/occasion", Submit: k.say("asked.occasion_save"), Cancel: siteHref(site) + "/asked",
		Groups: []fieldGroup{{Fields: []field{causes, {Name: "on", Label: k.say("asked.on"), Type: "date", Hint: k.say("asked.on_hint"), Required: true},
			{Name: "where", Label: k.say("asked.where"), Options: where}, tasks, {Name: "text", Label: k.say("asked.text"), Wide: true}}}}}
}

func (s *Server) pauseForm(c echo.Context, f *typedForm, site store.Site, where []option) formPage {
	k := s.ink()
	p := formPage{Frame: s.frame(c, k.say("asked.pause_new"), "sites"), Crumbs: []link{{Href: siteHref(site), Text: site.Name}, {Href: siteHref(site) + "/asked", Text: k.say("asked.title")}},
		Heading: k.say("asked.pause_head"), Lead: k.say("asked.pause_lead"), Action: siteHref(site) + "/pause", Submit: k.say("asked.pause_save"), Cancel: siteHref(site) + "/asked",
		Groups: []fieldGroup{{Fields: []field{{Name: "from", Label: k.say("asked.from"), Type: "date", Required: true},
			{Name: "until", Label: k.say("asked.until"), Type: "date", Hint: k.say("asked.until_hint"), Required: true},
			{Name: "reason", Label: k.say("asked.pause_reason"), Required: true, Wide: true}}}}}
	if f.Get("kept") == "yes" {
		p.Heading, p.Lead, p.Hidden = k.say("asked.pause_change"), k.say("asked.pause_change_lead"), append(p.Hidden, hidden{"kept", "yes"})
		return p
	}
	p.Groups[0].Fields = append(p.Groups[0].Fields, field{Name: "where", Label: k.say("asked.where"), Options: where})
	return p
}
