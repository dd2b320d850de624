package server

import (
	"cmp"
	"net/http"
	"slices"
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
	Stands         string // for which kinds it stands
	Actions        []link
	Revisions      []limitSetShown
}

// limitSetShown is one revision of a limit set.
type limitSetShown struct {
	Name, By, Reason string
	Older            bool
	Limits           []limitRow
}

// limitRow is one limit in words, with its drawing where it has one.
type limitRow struct {
	Reading, Limit, When, Level, Source, Status string
	Text                                        string
	Scales                                      []limitScale
	Curve                                       *curveDrawing
	Answers                                     []answerShown
}

// limitScale is a limit drawn on its reading's scale; Name says where it applies, where a limit has several.
type limitScale struct {
	Name string
	*scaleDrawing
}

// answerShown is one of the answers that may be given, with the verdict it leads to.
type answerShown struct {
	Mark mark
	Text string
}

func (s *Server) limitsShow(c echo.Context) error {
	id, k := c.Param("set"), s.ink()
	view := limitsPage{Frame: s.frame(c, k.named("limit_set", id), "set-up"), Crumbs: []link{{Href: "/set-up", Text: k.say("office.setup.title")}}, Heading: k.named("limit_set", id)}
	err := s.store.View(scope(c), func(v *store.View) error {
		all, err := limitRevisionsSeen(v, id)
		if err != nil {
			return err
		}
		asked, err := v.Forms()
		if err != nil {
			return err
		}
		spans := allSpans(asked)
		for _, r := range all { // newest first
			if r.Site == "" || view.Under == "" {
				view.Under, view.Stands = k.say("office.limits.for", "kinds", s.kinds(r.LimitSet.Kinds)), ""
				if len(r.LimitSet.StandsFor) > 0 {
					view.Stands = k.say("config.stands", "kinds", s.kinds(r.LimitSet.StandsFor))
				}
				view.Heading = s.setName(r.LimitSet)
				view.Title = view.Heading
			}
			shown := s.limitSet(r.LimitSet, forms.OwnNamesUnder(r.LimitSet, asked), spans)
			if err := s.setBy(v, r, &shown); err != nil {
				return err
			}
			view.Revisions = append([]limitSetShown{shown}, view.Revisions...)
		}
		if len(view.Revisions) == 0 {
			return refuse(codeNotFound, "", k.say("office.limits.unknown"))
		}
		for i := range view.Revisions {
			view.Revisions[i].Older = i > 0
		}
		return nil
	})
	if err != nil {
		return err
	}
	if view.Change {
		href := "/limits/" + id
		view.Actions = []link{{Href: href + "/edit", Text: k.say("config.change"), Here: true}, {Href: href + "/edit?copy=1", Text: k.say("config.copy")}}
	}
	return s.page(c, http.StatusOK, "limits.html", view)
}

// limitRevisionsSeen gives the revisions of a set, the organisation's and those of the sites the reader may see, by day in
// force.
func limitRevisionsSeen(v *store.View, id string) ([]store.Revision, error) {
	all, err := v.LimitRevisions("", id)
	if err != nil {
		return nil, err
	}
	sites, err := v.Sites()
	if err != nil {
		return nil, err
	}
	for _, site := range sites {
		own, err := v.LimitRevisions(site.ID, id)
		if err != nil {
			return nil, err
		}
		all = append(all, own...)
	}
	slices.SortStableFunc(all, func(a, b store.Revision) int {
		return cmp.Or(cmp.Compare(a.InForce, b.InForce), cmp.Compare(a.Revision, b.Revision))
	})
	return all, nil
}

// allSpans are the scales of every form.
func allSpans(all []*forms.Form) map[string][]scaleSpan {
	spans := map[string][]scaleSpan{}
	for _, f := range all {
		addSpans(spans, f)
	}
	return spans
}

// setBy says who set a revision, why and where.
func (s *Server) setBy(v *store.View, r store.Revision, out *limitSetShown) error {
	k := s.ink()
	out.Reason = r.Reason
	if r.By != "" {
		out.By = k.say("config.set_by", "by", s.personName(v, r.By), "day", k.day(forms.DayOf(r.At)))
	}
	if r.Site != "" {
		site, err := v.Site(r.Site)
		if err != nil {
			return err
		}
		out.Name = joined(site.Name, out.Name)
	}
	return nil
}

func (s *Server) limitSet(set *forms.LimitSet, own map[string]string, spans map[string][]scaleSpan) limitSetShown {
	k := s.ink()
	out := limitSetShown{Name: k.say("office.limits.revision", "rev", set.Revision, "day", k.day(set.InForce))}
	if set.InForce <= forms.Date(1900, 1, 1) {
		out.Name = k.say("office.limits.revision_open", "rev", set.Revision)
	}
	for i := range set.Limits {
		row := s.limitRow(&set.Limits[i], own)
		s.draw(&row, &set.Limits[i], spans)
		out.Limits = append(out.Limits, row)
	}
	return out
}

// limitRow says a limit in words.
func (s *Server) limitRow(l *forms.Limit, own map[string]string) limitRow {
	k := s.ink().calling(own)
	row := limitRow{Reading: k.reading(l.Reading), Limit: s.limitWords(*l), When: s.whenAndVoid(*l), Level: k.say("office.limits." + l.Level), Source: l.Source, Status: status(l.Source, l.Status)}
	if l.Reading == "" {
		row.Reading = s.fieldName(l.Field)
	}
	if !l.Flag {
		row.Text = k.say(l.Text)
	}
	return row
}

// draw adds what a limit looks like: its scale, its curve, or the answers that may be given.
func (s *Server) draw(row *limitRow, l *forms.Limit, spans map[string][]scaleSpan) {
	k := s.ink()
	one := func(name, code string, b forms.Bounds, own []scaleSpan) {
		if d := k.limitScale(code, &b, own); d != nil {
			row.Scales = append(row.Scales, limitScale{name, d})
		}
	}
	switch {
	case l.Curve != "":
		row.Curve = k.classACurve(nil, "")
	case l.OverRated != 0:
		row.Curve = k.overRated(l.OverRated / 1000)
	case l.OfRated != nil:
		percent := forms.Bounds{Min: times(l.OfRated.Min, 100), Max: times(l.OfRated.Max, 100)}
		one(k.say("config.of_rated"), "", percent, nil)
	case len(l.ByMultiple) > 0:
		for _, r := range l.ByMultiple {
			one(k.say("office.entry.multiple", "n", number(r.Multiple)), l.Reading, forms.Bounds{Min: r.Min, Max: r.Max}, spans[l.Reading])
		}
	case bounded(l):
		one("", l.Reading, forms.Bounds{Min: l.Min, Max: l.Max}, spans[l.Reading])
	case len(l.OneOf) > 0:
		outside := forms.Fail
		if l.Level == forms.WatchOnly {
			outside = forms.Watch
		}
		code, _ := forms.CodeOf(l.Reading)
		for _, o := range code.Options {
			verdict := outside
			if slices.Contains(l.OneOf, o) {
				verdict = forms.Pass
			}
			row.Answers = append(row.Answers, answerShown{mark{shapeOf(verdict), ""}, k.answer(l.Reading, o)})
		}
	}
}

func times(v *float64, by float64) *float64 {
	if v == nil {
		return nil
	}
	out := *v * by
	return &out
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
