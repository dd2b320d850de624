package export

import (
	"encoding/json"
	"fmt"
	"maps"
	"slices"
	"strings"

	"tripwell/forms"
	"tripwell/static"
)

// limitLines puts every limit of every revision in words.
func limitLines(words *static.Words, sets []*forms.LimitSet) ([]LimitLine, error) {
	b := &book{words: words, named: map[string]string{}}
	var lines []LimitLine
	for _, set := range sets {
		raw, err := json.Marshal(set)
		if err != nil {
			return nil, fmt.Errorf("limit set %s: %w", set.ID, err)
		}
		var data struct {
			Limits []map[string]any `json:"limits"`
		}
		if err := json.Unmarshal(raw, &data); err != nil {
			return nil, fmt.Errorf("limit set %s: %w", set.ID, err)
		}
		for _, l := range data.Limits {
			line := LimitLine{Set: set.ID, Revision: set.Revision, InForce: set.InForce}
			line.ID, line.Reading, line.Level = said(l["id"]), said(l["reading"]), said(l["level"])
			line.Source, line.Status = said(l["source"]), said(l["status"])
			line.Limit, line.When = b.limitText(l), b.whenText(l["when"])
			lines = append(lines, line)
		}
	}
	return lines, nil
}

func said(v any) string {
	if v == nil {
		return ""
	}
	return fmt.Sprint(v)
}

// limitText says a limit in words; shapes without words of their own are shown as their data.
func (b *book) limitText(l map[string]any) string {
	code := said(l["reading"])
	lo, hi, unit := l["min"], l["max"], b.unit(code)
	switch {
	case lo != nil && hi != nil:
		return strings.TrimSpace(b.say("sheet.limit_range", "min", lo, "max", hi, "unit", unit))
	case lo != nil:
		return strings.TrimSpace(b.say("sheet.limit_min", "min", lo, "unit", unit))
	case hi != nil:
		return strings.TrimSpace(b.say("sheet.limit_max", "max", hi, "unit", unit))
	}
	if list, ok := l["one_of"].([]any); ok {
		values := make([]string, len(list))
		for i, v := range list {
			values[i] = said(v)
		}
		return b.say("sheet.limit_one_of", "values", b.oneOf(code, values))
	}
	var parts []string
	for _, k := range slices.Sorted(maps.Keys(l)) {
		if slices.Contains([]string{"id", "reading", "level", "source", "status", "text", "when", "unit", "severity"}, k) {
			continue
		}
		raw, _ := json.Marshal(l[k])
		parts = append(parts, k+" "+strings.Trim(string(raw), `"`))
	}
	return strings.Join(parts, ", ")
}

// whenText says under which conditions a limit applies.
func (b *book) whenText(v any) string {
	list, _ := v.([]any)
	var parts []string
	for _, item := range list {
		cond, _ := item.(map[string]any)
		subject := said(cond["reading"])
		if subject == "" {
			subject = said(cond["field"])
		}
		for _, k := range slices.Sorted(maps.Keys(cond)) {
			if k != "reading" && k != "field" {
				parts = append(parts, b.readingName(subject)+" "+b.word("sheet.when", k)+" "+b.optionList(subject, cond[k]))
			}
		}
	}
	return strings.Join(parts, "; ")
}

func (b *book) optionList(code string, v any) string {
	list, ok := v.([]any)
	if !ok {
		return b.option(code, said(v))
	}
	values := make([]string, len(list))
	for i, v := range list {
		values[i] = b.option(code, said(v))
	}
	return strings.Join(values, ", ")
}
