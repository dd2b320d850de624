package export

import (
	"slices"
	"strings"

	"tripwell/forms"
	"tripwell/static"
)

// limitLines puts every limit of every revision in words; asked are the forms, which name the checks of an organisation.
func limitLines(words *static.Words, sets []*forms.LimitSet, asked []*forms.Form) []LimitLine {
	b := &book{words: words, named: map[string]string{}}
	var lines []LimitLine
	for _, set := range sets {
		own := forms.OwnNamesUnder(set, asked)
		for i := range set.Limits {
			l := &set.Limits[i]
			lines = append(lines, LimitLine{
				Set: set.ID, Revision: set.Revision, InForce: set.InForce, ID: l.ID, Reading: l.Reading + l.Field, Name: own[l.Reading],
				Limit: b.limitText(l), When: b.whenText(l.When), Level: l.Level, Source: l.Source, Status: l.Status,
			})
		}
	}
	return lines
}

// limitText says a limit in words.
func (b *book) limitText(l *forms.Limit) string {
	code := l.Reading + l.Field
	var parts []string
	add := func(text string) {
		if text != "" {
			parts = append(parts, text)
		}
	}
	unit := b.unit(code)
	if unit == "" {
		unit = b.word("unit", l.Unit)
	}
	add(b.boundsText(code, forms.Bounds{Min: l.Min, Max: l.Max, OneOf: l.OneOf}, unit))
	for _, u := range sortedKeys(l.ByUnit) {
		add(b.boundsText(code, l.ByUnit[u], b.word("unit", u)))
	}
	if l.Curve != "" {
		add(b.word("sheet.curve", l.Curve))
	}
	if l.OfRated != nil {
		add(b.boundsText(code, *l.OfRated, b.say("sheet.of_rated")))
	}
	if l.OverRated != 0 {
		add(b.say("sheet.over_rated", "figure", figureText(l.OverRated), "unit", unit))
	}
	for _, r := range l.ByMultiple {
		text := b.say("sheet.no_trip")
		if !r.NoTrip {
			text = b.boundsText(code, forms.Bounds{Min: r.Min, Max: r.Max}, unit)
		}
		add(b.say("sheet.at_multiple", "multiple", figureText(r.Multiple), "limit", text))
	}
	for _, u := range sortedKeys(l.Gauge) {
		add(b.say("sheet.gauge", "figure", figureText(l.Gauge[u]), "unit", b.word("unit", u)))
	}
	if l.OverRange {
		add(b.say("verdict.over_range"))
	}
	if l.PerLength != nil {
		add(b.say("verdict.per_length", "n", figureText(l.PerLength.Base)+" "+unit))
	}
	if l.Flag {
		add(b.say("sheet.flagged"))
	}
	return strings.Join(parts, "; ")
}

func (b *book) boundsText(code string, l forms.Bounds, unit string) string {
	switch {
	case l.Min != nil && l.Max != nil:
		return b.say("sheet.limit_range", "min", figureText(*l.Min), "max", figureText(*l.Max), "unit", unit)
	case l.Min != nil:
		return b.say("sheet.limit_min", "min", figureText(*l.Min), "unit", unit)
	case l.Max != nil:
		return b.say("sheet.limit_max", "max", figureText(*l.Max), "unit", unit)
	case len(l.OneOf) > 0:
		return b.say("sheet.limit_one_of", "values", b.oneOf(code, l.OneOf))
	}
	return ""
}

// whenText says under which conditions a limit applies.
func (b *book) whenText(when []forms.Condition) string {
	var parts []string
	for _, c := range when {
		subject := c.Reading + c.Field
		add := func(how, what string) {
			parts = append(parts, strings.TrimSpace(b.readingName(subject)+" "+b.word("sheet.when", how)+" "+what))
		}
		if c.Is != nil {
			add("is", b.values(subject, c.Is))
		}
		if c.Not != nil {
			add("not", b.values(subject, c.Not))
		}
		for _, n := range []struct {
			how  string
			than *float64
		}{{"at_least", c.AtLeast}, {"at_most", c.AtMost}, {"above", c.Above}, {"below", c.Below}} {
			if n.than != nil {
				add(n.how, figureText(*n.than))
			}
		}
		if c.Missing {
			add("missing", "")
		}
	}
	return strings.Join(parts, "; ")
}

func (b *book) values(code string, list forms.OneOf) string {
	var texts []string
	for _, v := range list {
		switch v := v.(type) {
		case float64:
			texts = append(texts, figureText(v))
		case string:
			texts = append(texts, b.option(code, v))
		}
	}
	return strings.Join(texts, ", ")
}

func sortedKeys[V any](m map[string]V) []string {
	keys := make([]string, 0, len(m))
	for k := range m {
		keys = append(keys, k)
	}
	slices.Sort(keys)
	return keys
}
