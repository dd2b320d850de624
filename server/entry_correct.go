package server

import (
	"maps"
	"slices"
	"strings"

	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
)

// Each reading of a correction has an answer, and a number beside it says how it is meant.
const (
	answerPrefix = "reading."
	howPrefix    = "how."
)

// How a number of a correction is meant; a reason stands for a reading that was not taken.
const (
	howAbove  = "above"
	howBelow  = "below"
	howNoTrip = "no-trip"
)

func (s *Server) entryCorrectAsk(c echo.Context) error {
	e, asked, site, err := s.correctable(c)
	if err != nil {
		return err
	}
	values := map[string]string{}
	for _, code := range asked.codes {
		values[answerPrefix+code], values[howPrefix+code] = answerTyped(e.Body.Readings[code])
	}
	f, err := s.editForm(values, nil)
	if err != nil {
		return err
	}
	return s.formBack(c, f, s.correctForm(c, e, asked, site))
}

// entryCorrect keeps full new readings with the reason. The first version stays, and is shown beside the correction.
func (s *Server) entryCorrect(c echo.Context) error {
	e, asked, site, err := s.correctable(c)
	if err != nil {
		return err
	}
	f, err := s.typedForm(c)
	if err != nil {
		return err
	}
	record := f.id(recordField)
	reason := f.needed("reason", s.words.Say("office.entry.correct_reason"), 500)
	readings, changed := map[string]forms.Reading{}, false
	for _, code := range asked.codes {
		r, there := e.Body.Readings[code]
		if f.changed(answerPrefix+code) || f.changed(howPrefix+code) {
			changed = true
			r, there = s.answerOf(f, code, asked.answers(code))
		}
		if there {
			readings[code] = r
		}
	}
	if !changed && f.ok() {
		f.text = s.words.Say("office.entry.correct_same")
	}
	if f.ok() {
		body := map[string]any{"entry": e.ID, "readings": readings, "reason": reason}
		if len(e.Body.Series) > 0 {
			body["series"] = e.Body.Series
		}
		err := s.append(c, store.Draft{ID: record, Kind: "entry.corrected", Log: e.Site, Subject: e.ID, Body: body})
		if err == nil {
			return toPage(c, "/entries/"+e.ID)
		}
		if err := f.takeRefusal(err); err != nil {
			return err
		}
	}
	return s.formBack(c, f, s.correctForm(c, e, asked, site))
}

// correctAsked is what a correction asks: readings by code, and of checks an organisation added what its form says.
type correctAsked struct {
	codes   []string
	own     map[string]string
	options map[string][]string
}

// answers lists what a question may be answered with.
func (a correctAsked) answers(code string) []string {
	if options := a.options[code]; len(options) > 0 {
		return options
	}
	kind, _ := forms.CodeOf(code)
	return kind.Options
}

// ownOf takes what a form says of its own checks. An answer that an entry already has stays one, also where a later
// revision of the form no longer offers it.
func (a *correctAsked) ownOf(form *forms.Form, e store.Entry) {
	a.own, a.options = map[string]string{}, map[string][]string{}
	maps.Copy(a.own, forms.OwnNames(form))
	maps.Copy(a.own, e.OwnNames)
	for _, step := range form.Steps {
		for _, ask := range step.Asks {
			if !forms.IsOwn(ask.Reading) || len(ask.Options) == 0 {
				continue
			}
			options := slices.Clone(ask.Options)
			if has, ok := e.Body.Readings[ask.Reading].Value.(string); ok && has != "" && !slices.Contains(options, has) {
				options = append(options, has)
			}
			a.options[ask.Reading] = options
		}
	}
}

// correctable reads an entry that may be corrected, and the readings its form asks for beside those it has.
func (s *Server) correctable(c echo.Context) (e store.Entry, asked correctAsked, site store.Site, err error) {
	err = s.store.View(scope(c), func(v *store.View) error {
		if e, err = v.Entry(c.Param("entry")); err != nil {
			return err
		}
		if e.Withdrawn != nil {
			return refuse(codeConflict, "", s.words.Say("office.entry.correct_withdrawn"))
		}
		if site, err = v.Site(e.Site); err != nil {
			return err
		}
		all, err := v.Forms()
		if err != nil {
			return err
		}
		taken := map[string]forms.Reading{}
		for code := range e.Body.Readings {
			taken[code] = forms.Reading{}
		}
		for _, form := range all {
			if form.ID != e.Form {
				continue
			}
			asked.ownOf(form, e)
			for _, step := range form.Steps {
				for _, ask := range step.Asks {
					if !ask.Series {
						taken[ask.Reading] = forms.Reading{}
					}
				}
			}
		}
		asked.codes = readingOrder(taken)
		return nil
	})
	return e, asked, site, err
}

// answerTyped writes a reading the way a correction's fields hold it.
func answerTyped(r forms.Reading) (answer, how string) {
	switch {
	case r.Missing != "":
		return "", r.Missing
	case r.Above != nil && r.NoTrip:
		return plainFigure(*r.Above), howNoTrip
	case r.Above != nil:
		return plainFigure(*r.Above), howAbove
	case r.Below != nil:
		return plainFigure(*r.Below), howBelow
	case r.NoTrip:
		return "", howNoTrip
	}
	switch v := r.Value.(type) {
	case float64:
		return plainFigure(v), ""
	case string:
		return v, ""
	case bool:
		return map[bool]string{true: "yes", false: "no"}[v], ""
	}
	return "", ""
}

// answerOf reads one reading of a correction; there is false where the fields were cleared.
func (s *Server) answerOf(f *typedForm, code string, answers []string) (r forms.Reading, there bool) {
	kind, _ := forms.CodeOf(code)
	how := f.Get(howPrefix + code)
	if kind.Type != forms.TypeNumber {
		answer := f.choice(answerPrefix+code, slices.Concat([]string{""}, answers, forms.MissingReasons())...)
		for _, reason := range forms.MissingReasons() {
			if answer == reason {
				return forms.Reading{Missing: answer}, true
			}
		}
		return forms.Reading{Value: answer}, answer != ""
	}
	f.choice(howPrefix+code, append([]string{"", howAbove, howBelow, howNoTrip}, forms.MissingReasons()...)...)
	typed := strings.TrimSpace(f.Get(answerPrefix + code))
	figure := f.figure(answerPrefix + code)
	switch {
	case how == howNoTrip:
		return forms.Reading{NoTrip: true, Above: figure, Unit: kind.Unit}, true
	case figure != nil && how == howAbove:
		return forms.Reading{Above: figure, Unit: kind.Unit}, true
	case figure != nil && how == howBelow:
		return forms.Reading{Below: figure, Unit: kind.Unit}, true
	case figure != nil && how == "":
		return forms.Reading{Typed: typed, Unit: kind.Unit, Value: *figure}, true
	case figure == nil && (how == howAbove || how == howBelow):
		f.refuse(answerPrefix+code, s.words.Say("office.form.number"))
	case figure != nil:
		f.refuse(howPrefix+code, s.words.Say("office.entry.correct_both"))
	}
	return forms.Reading{Missing: how}, how != ""
}

func (s *Server) correctForm(c echo.Context, e store.Entry, asked correctAsked, site store.Site) formPage {
	k := s.ink().calling(asked.own)
	group := fieldGroup{Legend: k.say("office.entry.readings"), Note: k.say("office.entry.correct_hint")}
	var reasons []string
	for _, reason := range forms.MissingReasons() {
		reasons = append(reasons, reason, k.say("office.entry.missing", "reason", lowerFirst(k.named("missing", reason))))
	}
	for _, code := range asked.codes {
		kind, _ := forms.CodeOf(code)
		if kind.Type != forms.TypeNumber {
			var pairs []string
			for _, option := range asked.answers(code) {
				pairs = append(pairs, option, k.answer(code, option))
			}
			group.Fields = append(group.Fields, field{Name: answerPrefix + code, Label: k.reading(code), Wide: true, Options: optional(k.say("office.entry.not_asked"), append(pairs, reasons...)...)})
			continue
		}
		hows := append([]string{howAbove, k.say("office.entry.how_above"), howBelow, k.say("office.entry.how_below")}, reasons...)
		if code == "trip_time_ms" || code == "trip_current_ma" {
			hows = append([]string{howNoTrip, k.say("office.entry.how_no_trip")}, hows...)
		}
		group.Fields = append(group.Fields,
			field{Name: answerPrefix + code, Label: k.reading(code), Type: "number", Unit: k.named("unit", kind.Unit)},
			field{Name: howPrefix + code, Label: k.say("office.entry.how", "name", k.reading(code)), Options: optional(k.say("office.entry.how_measured"), hows...)})
	}
	heading := k.say("office.entry.correct_head", "task", lowerFirst(k.named("task", e.Task)), "day", k.day(e.Day))
	return formPage{
		Frame: s.frame(c, heading, "sites"), Crumbs: []link{{Href: siteHref(site), Text: site.Name}, {Href: "/entries/" + e.ID, Text: k.say("office.entry.heading", "task", k.named("task", e.Task), "day", k.day(e.Day))}},
		Heading: heading, Lead: k.say("office.entry.correct_lead"), Action: "/entries/" + e.ID + "/correct", Submit: k.say("office.entry.correct_save"), Cancel: "/entries/" + e.ID,
		Groups: []fieldGroup{{Fields: []field{{Name: "reason", Label: k.say("office.entry.correct_reason"), Required: true, Wide: true}}}, group},
	}
}
