package forms

import (
	"fmt"
	"slices"
	"strings"
)

// CheckLimitSet says what in a limit set cannot be meant, none where it can judge.
func CheckLimitSet(s *LimitSet) []*Error {
	w := &wrongs{}
	w.head(s.ID, s.Revision, s.InForce, s.Kinds)
	if strings.Contains(s.ID, "/") {
		w.add("id", "The id of a limit set has no slash.")
	}
	if !knowsRule(s.Rule) {
		w.add("rule", "The rule of decision %q is not known. Use one of: %s.", s.Rule, strings.Join(Rules(), ", "))
	}
	for _, kind := range s.StandsFor {
		if !slices.Contains(Kinds(), strings.TrimSuffix(kind, delayedMark)) {
			w.add("stands_for", "%q is no device kind. The kinds are: %s.", kind, strings.Join(Kinds(), ", "))
		}
	}
	if len(s.Limits) == 0 {
		w.add("limits", "The set has no limit: everything would pass. Give at least one.")
	}
	ids := map[string]bool{}
	for i := range s.Limits {
		l := &s.Limits[i]
		place := fmt.Sprintf("limits.%d", i+1)
		if l.ID != "" {
			place = "limits." + l.ID
		}
		switch {
		case !idShape.MatchString(l.ID):
			w.add(place, "A limit needs an id of lower-case letters, digits and single hyphens.")
		case ids[l.ID]:
			w.add(place, "Two limits carry the id %q. Give each its own.", l.ID)
		}
		ids[l.ID] = true
		w.limit(place, l)
	}
	w.together(s)
	return w.list
}

// knowsRule reports whether the judge decides by a rule.
func knowsRule(rule string) bool {
	return rule == "" || slices.Contains(Rules(), rule)
}

// limit checks one limit by itself.
func (w *wrongs) limit(place string, l *Limit) {
	var code *Code
	switch {
	case (l.Reading == "") == (l.Field == ""):
		w.add(place, "A limit names one reading or one field of the device.")
	case l.Reading != "":
		if w.reading(place+".reading", l.Reading) {
			code = &codes[codeAt[l.Reading]]
		}
	case !slices.Contains(deviceFields, l.Field):
		w.add(place+".field", "%q is no field of a device. Use one of: %s.", l.Field, strings.Join(deviceFields, ", "))
	}
	if l.Level != Must && l.Level != WatchOnly {
		w.add(place+".level", "The level is %q. It must be %s (outside fails) or %s (outside is flagged).", l.Level, Must, WatchOnly)
	}
	if strings.TrimSpace(l.Source) == "" {
		w.add(place+".source", "The source is missing. Name the document and clause, or write: common practice, no source.")
	}
	if strings.TrimSpace(l.Status) == "" {
		w.add(place+".status", "How well the source is known is missing: seen, seen second-hand, from memory, doubtful, common practice, or the owner's own.")
	}
	if strings.TrimSpace(l.Text) == "" {
		w.add(place+".text", "What it means and what to do when it is outside is missing. Write one sentence.")
	}
	if l.Severity != "" && l.Severity != Nuisance {
		w.add(place+".severity", "The severity %q is not known. Leave it out, or use %q.", l.Severity, Nuisance)
	}
	w.shape(place, l, code)
	w.conditions(place+".when", l.When, nil)
	for i := range l.Void {
		w.conditions(fmt.Sprintf("%s.void.%d", place, i+1), l.Void[i].When, nil)
		if len(l.Void[i].When) == 0 {
			w.add(fmt.Sprintf("%s.void.%d", place, i+1), "Without a condition the limit is never judged. Say where its reading means nothing.")
		}
	}
}

// shape checks what a limit asks of its reading.
func (w *wrongs) shape(place string, l *Limit, code *Code) {
	numeric := code == nil || code.Type == TypeNumber
	computed := l.Curve != "" || l.OfRated != nil || l.OverRated != 0 || len(l.ByMultiple) > 0
	bounded := l.Min != nil || l.Max != nil
	if code != nil && !numeric && (computed || bounded) {
		w.add(place, "%s is answered with a word: it has no least, no most and no curve. Give one_of.", l.Reading)
	}
	if code != nil && numeric && len(l.OneOf) > 0 {
		w.add(place+".one_of", "%s is a figure: it is held against min and max, not against words.", l.Reading)
	}
	if code != nil && len(code.Options) > 0 {
		for _, v := range l.OneOf {
			if !slices.Contains(code.Options, v) {
				w.add(place+".one_of", "%s is never %q. It is one of: %s.", l.Reading, v, strings.Join(code.Options, ", "))
			}
		}
	}
	if code != nil && l.Unit != "" && l.Unit != code.Unit {
		w.add(place+".unit", "%s is held in %q, not in %q: give its figures in %q.", l.Reading, code.Unit, l.Unit, code.Unit)
	}
	w.bounds(place, l.Min, l.Max)
	for unit, b := range l.ByUnit {
		if code != nil {
			if _, ok := perUnit(code.Unit, unit); !ok {
				w.add(place+".by_unit."+unit, "%s is never read in %q.", l.Reading, unit)
			}
		}
		w.bounds(place+".by_unit."+unit, b.Min, b.Max)
	}
	if l.OfRated != nil {
		w.bounds(place+".of_rated", l.OfRated.Min, l.OfRated.Max)
		if l.OfRated.Min == nil && l.OfRated.Max == nil {
			w.add(place+".of_rated", "The share of the rated current is missing. Give min, max or both.")
		}
	}
	if l.OverRated < 0 {
		w.add(place+".over_rated", "The figure is below 0: no reading can ever be inside.")
	}
	for i, r := range l.ByMultiple {
		at := fmt.Sprintf("%s.by_multiple.%d", place, i+1)
		if r.Multiple <= 0 {
			w.add(at+".multiple", "The multiple of the rated current must be above 0.")
		}
		if r.Min == nil && r.Max == nil && !r.NoTrip {
			w.add(at, "The row says nothing. Give min, max or no_trip.")
		}
		w.bounds(at, r.Min, r.Max)
	}
	w.named(place, l)
	if l.Flag && len(l.When) == 0 {
		w.add(place+".when", "A flag without a condition marks every entry: it can never be met. Say where it applies.")
	}
	stated := 0
	for _, is := range []bool{bounded, len(l.OneOf) > 0, l.Curve != "", l.OfRated != nil, l.OverRated != 0, len(l.ByMultiple) > 0, l.Flag} {
		if is {
			stated++
		}
	}
	if stated > 1 {
		w.add(place, "The limit states several things at once. Make a limit of each.")
	}
	if stated == 0 && !l.statesOther() {
		w.add(place, "The limit states nothing: give min, max, one_of or another of the known shapes.")
	}
}

// named checks the functions a limit names.
func (w *wrongs) named(place string, l *Limit) {
	for _, f := range []struct{ member, name, known, reading string }{
		{"curve", l.Curve, "ul943", "trip_time_ms"}, {"ramp", l.Ramp, "ul943", "trip_current_ma"}, {"bond", l.Bond, "half-drop", "neutral_ground_v"},
	} {
		switch {
		case f.name == "":
		case f.name != f.known:
			w.add(place+"."+f.member, "The %s %q is not known. There is %q.", f.member, f.name, f.known)
		case l.Reading != "" && l.Reading != f.reading:
			w.add(place+"."+f.member, "The %s %q says something of %s, not of %s.", f.member, f.name, f.reading, l.Reading)
		}
	}
}

// bounds refuses bounds that nothing can lie between. No reading is below 0.
func (w *wrongs) bounds(place string, least, most *float64) {
	switch {
	case least != nil && most != nil && *least > *most:
		w.add(place+".min", "The least (%s) is above the most (%s): nothing could ever pass. Swap them or correct one.", figureText(*least), figureText(*most))
	case most != nil && *most < 0:
		w.add(place+".max", "The most (%s) is below 0: no reading can ever be inside.", figureText(*most))
	}
}

// together refuses limits that cannot all be met: two of the level must on one reading, under the same conditions, with
// nothing in common.
func (w *wrongs) together(s *LimitSet) {
	for i := range s.Limits {
		a := &s.Limits[i]
		for j := range i {
			b := &s.Limits[j]
			if a.Reading == "" || a.Reading != b.Reading || a.Level != Must || b.Level != Must || !sameWhen(a.When, b.When) {
				continue
			}
			apart := len(a.OneOf) > 0 && len(b.OneOf) > 0 && !slices.ContainsFunc(a.OneOf, func(v string) bool { return slices.Contains(b.OneOf, v) })
			for _, pair := range [][2]*float64{{a.Min, b.Max}, {b.Min, a.Max}} {
				apart = apart || pair[0] != nil && pair[1] != nil && *pair[0] > *pair[1]
			}
			if apart {
				w.add("limits."+a.ID, "No reading can meet both %s and %s. Change one of them, or say where each applies.", b.ID, a.ID)
			}
		}
	}
}

func sameWhen(a, b []Condition) bool {
	return slices.EqualFunc(a, b, func(x, y Condition) bool {
		return fmt.Sprintf("%+v", plainCondition(x)) == fmt.Sprintf("%+v", plainCondition(y))
	})
}

// plainCondition is a condition without pointers, for comparing.
func plainCondition(c Condition) [9]any {
	value := func(p *float64) any {
		if p == nil {
			return nil
		}
		return *p
	}
	return [9]any{c.Reading, c.Field, c.Is, c.Not, value(c.AtLeast), value(c.AtMost), value(c.Above), value(c.Below), c.Missing}
}

// statesOther reports a shape that Limit knows beside those CheckLimitSet looks into.
func (l *Limit) statesOther() bool { return l.OverRange || l.PerLength != nil }
