package server

import (
	"net/http"
	"strings"

	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
)

// limitsPage is one limit set in all its revisions, each limit with its source and how well that is known.
type limitsPage struct {
	Frame
	Crumbs         []link
	Heading, Under string
	Revisions      []limitSetShown
}

// limitSetShown is one revision of a limit set.
type limitSetShown struct {
	Name   string
	Limits []limitRow
}

type limitRow struct{ Reading, Limit, When, Level, Source, Status string }

func (s *Server) limitsShow(c echo.Context) error {
	id, k := c.Param("set"), s.ink()
	view := limitsPage{Frame: s.frame(c, k.named("limit_set", id), "set-up"), Crumbs: []link{{Href: "/set-up", Text: k.say("office.setup.title")}}, Heading: k.named("limit_set", id)}
	err := s.store.View(scope(c), func(v *store.View) error {
		sets, err := v.LimitSets()
		if err != nil {
			return err
		}
		for _, set := range sets {
			if set.ID == id { // newest first
				view.Under = k.say("office.limits.for", "kinds", s.kinds(set.Kinds))
				view.Revisions = append([]limitSetShown{s.limitSet(set)}, view.Revisions...)
			}
		}
		if len(view.Revisions) == 0 {
			return refuse(codeNotFound, "", k.say("office.limits.unknown"))
		}
		return nil
	})
	if err != nil {
		return err
	}
	return s.page(c, http.StatusOK, "limits.html", view)
}

func (s *Server) limitSet(set *forms.LimitSet) limitSetShown {
	k := s.ink()
	out := limitSetShown{Name: k.say("office.limits.revision", "rev", set.Revision, "day", k.day(set.InForce))}
	if set.InForce <= forms.Date(1900, 1, 1) {
		out.Name = k.say("office.limits.revision_open", "rev", set.Revision)
	}
	for _, l := range set.Limits {
		row := limitRow{Reading: k.reading(l.Reading), Limit: s.limitWords(l), When: s.whenAndVoid(l), Level: k.say("office.limits." + l.Level), Source: l.Source, Status: status(l.Source, l.Status)}
		if l.Reading == "" {
			row.Reading = s.fieldName(l.Field)
		}
		out.Limits = append(out.Limits, row)
	}
	return out
}

// limitWords says a limit as it stands in its set, before it is computed for a reading.
func (s *Server) limitWords(l forms.Limit) string {
	k := s.ink()
	code := l.Reading
	switch {
	case l.Curve != "":
		return k.say("office.limits.curve")
	case l.OfRated != nil:
		return k.say("office.limits.of_rated", "limit", s.shares(*l.OfRated))
	case l.OverRated != 0:
		return k.say("office.limits.over_rated", "v", number(l.OverRated/1000))
	case len(l.ByMultiple) > 0:
		var rungs []string
		for _, r := range l.ByMultiple {
			text := k.limit(code, &forms.Bounds{Min: r.Min, Max: r.Max}, "")
			if r.NoTrip {
				text = k.say("office.limits.no_trip")
			}
			rungs = append(rungs, k.say("office.limits.rung", "multiple", number(r.Multiple), "limit", text))
		}
		return strings.Join(rungs, "; ")
	case l.OverRange:
		return k.say("verdict.over_range")
	case l.PerLength != nil:
		return k.say("verdict.per_length", "n", k.amount(number(l.PerLength.Base), l.Unit))
	case l.Flag:
		return s.flagWords(l)
	case l.Min != nil || l.Max != nil || len(l.OneOf) > 0:
		level := l.Level
		if len(l.OneOf) == 0 {
			level = "" // a column says that it is a recommendation
		}
		return k.limit(code, &forms.Bounds{Min: l.Min, Max: l.Max, OneOf: l.OneOf}, level)
	}
	return k.say("office.limits.computed")
}

// flagWords is what a limit without bounds says where its conditions hold.
func (s *Server) flagWords(l forms.Limit) string {
	if s.words.Has(l.Text) {
		return s.words.Say(l.Text)
	}
	return s.words.Say("office.limits.flagged")
}

func (s *Server) shares(b forms.Bounds) string {
	k := s.ink()
	percent := func(v *float64) string { return number(*v * 100) }
	switch {
	case b.Min != nil && b.Max != nil:
		return k.say("office.entry.limit_band", "min", percent(b.Min), "max", percent(b.Max)+thin+"%")
	case b.Max != nil:
		return k.say("office.entry.limit_max", "max", percent(b.Max)+thin+"%")
	case b.Min != nil:
		return k.say("office.entry.limit_min", "min", percent(b.Min)+thin+"%")
	}
	return ""
}

// whenAndVoid says where a limit applies and where its reading says nothing.
func (s *Server) whenAndVoid(l forms.Limit) string {
	var parts, voids []string
	if text := s.when(l.When); text != "" {
		parts = append(parts, s.words.Say("office.limits.when", "what", text))
	}
	for _, void := range l.Void {
		voids = append(voids, s.when(void.When))
	}
	if len(voids) > 0 {
		parts = append(parts, s.words.Say("office.limits.void", "what", strings.Join(voids, s.words.Say("office.limits.or_where"))))
	}
	return strings.Join(parts, " ")
}

// when says the conditions of a limit in words, all of which must hold.
func (s *Server) when(conditions []forms.Condition) string {
	k := s.ink()
	var parts []string
	for _, c := range conditions {
		name := k.reading(c.Reading)
		if c.Reading == "" {
			name = s.fieldName(c.Field)
		}
		var facts []string
		if len(c.Is) > 0 {
			facts = append(facts, s.values(c, c.Is))
		}
		if len(c.Not) > 0 {
			facts = append(facts, k.say("office.limits.not", "value", s.values(c, c.Not)))
		}
		unit := unitOf(c.Reading)
		if c.Reading == "" {
			unit = fieldUnits[c.Field]
		}
		for _, bound := range []struct {
			key string
			v   *float64
		}{{"office.entry.limit_min", c.AtLeast}, {"office.entry.limit_max", c.AtMost}, {"office.entry.above", c.Above}, {"office.entry.below", c.Below}} {
			if bound.v != nil {
				text := k.amount(number(*bound.v), unit)
				facts = append(facts, k.say(bound.key, "min", text, "max", text, "value", text))
			}
		}
		if c.Missing {
			facts = append(facts, k.say("office.limits.missing"))
		}
		parts = append(parts, lowerFirst(name)+": "+strings.Join(facts, ", "))
	}
	return strings.Join(parts, "; ")
}

func (s *Server) values(c forms.Condition, values forms.OneOf) string {
	k := s.ink()
	var out []string
	for _, v := range values {
		switch v := v.(type) {
		case float64:
			unit := unitOf(c.Reading)
			if c.Reading == "" {
				unit = fieldUnits[c.Field]
			}
			out = append(out, k.amount(number(v), unit))
		case string:
			if c.Reading != "" {
				out = append(out, lowerFirst(k.answer(c.Reading, v)))
			} else {
				out = append(out, lowerFirst(s.fieldAnswer(c.Field, v)))
			}
		}
	}
	return strings.Join(out, k.say("office.limits.or"))
}

// fieldName names a register field.
func (s *Server) fieldName(field string) string {
	if key := "office.device.field." + field; s.words.Has(key) {
		return s.words.Say(key)
	}
	return field
}

// fieldAnswer writes a register field's value where it is one of a list.
func (s *Server) fieldAnswer(field, value string) string {
	if key := "office.device.answer." + field + "." + value; s.words.Has(key) {
		return s.words.Say(key)
	}
	switch field {
	case "kind":
		return s.ink().named("kind", value)
	case "rated_residual_ma":
		return s.ink().amount(value, "mA")
	}
	return s.ink().answer(field, value)
}
