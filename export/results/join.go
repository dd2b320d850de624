package results

import (
	"fmt"
	"maps"
	"reflect"
	"strings"

	"github.com/go-json-experiment/json"

	"tripwell/store/record"
)

// join keeps a test, or adds a row's condition to the test it belongs to.
func (p *planner) join(t *test) {
	if t.long {
		key := strings.Join([]string{t.ID, t.form, t.day.String(), t.readBy, t.row.sheet.name}, "\x1f")
		if first, ok := p.long[key]; ok && first.takes(t) {
			maps.Copy(first.readings, t.readings)
			first.series = append(first.series, t.series...)
			p.place(first, t.row)
			return
		}
		p.long[key] = t
	}
	kind := p.kind()
	t.id = record.NamedID(p.org, t.site.Code, kind, t.device.ID, t.form, t.day.String(), t.clock)
	first, ok := p.ids[t.id]
	switch {
	case !ok:
		p.ids[t.id] = t
		p.order = append(p.order, t)
		p.place(t, t.row)
	case first.same(t):
		p.note(p.outcome(t, There, t.row))
		p.report.There++
	default:
		p.holdTest(t, cellFault{column: t.head, value: t.value, text: fmt.Sprintf("%s gives another result for the same test. Write the time of day beside both, or leave one out.", first.row.where())})
	}
}

// place notes a row of a test; what became of it is filled in once the test is settled.
func (p *planner) place(t *test, r *row) {
	t.outcomes = append(t.outcomes, len(p.report.Outcomes))
	p.note(p.outcome(t, "", r))
}

func (r *row) where() string {
	if r.sheet.name == "" {
		return fmt.Sprintf("Row %d", r.n)
	}
	return fmt.Sprintf("Row %d of %s", r.n, r.sheet.name)
}

// takes reports whether a row's condition is one more of the same test: a condition it does not have yet, and nothing
// else that differs.
func (t *test) takes(o *test) bool {
	if t.long != o.long || t.clockDiffersByMuch(o) {
		return false
	}
	for _, have := range t.series {
		for _, item := range o.series {
			if reflect.DeepEqual(have.At, item.At) {
				return false
			}
		}
	}
	for code, r := range o.readings {
		if have, ok := t.readings[code]; ok && !reflect.DeepEqual(have, r) {
			return false
		}
	}
	return true
}

// clockDiffersByMuch keeps a morning's and an afternoon's test apart: one test takes minutes.
func (t *test) clockDiffersByMuch(o *test) bool {
	minutes := func(clock string) int {
		var h, m int
		if _, err := fmt.Sscanf(clock, "%d:%d", &h, &m); err != nil {
			return 0
		}
		return 60*h + m
	}
	d := minutes(o.clock) - minutes(t.clock)
	return t.clock != "" && o.clock != "" && (d > 30 || d < -30)
}

func (t *test) same(o *test) bool {
	return t.result == o.result && sameJSON(t.readings, o.readings) && sameJSON(t.series, o.series)
}

func sameJSON(a, b any) bool {
	x, errX := json.Marshal(a, json.Deterministic(true))
	y, errY := json.Marshal(b, json.Deterministic(true))
	return errX == nil && errY == nil && string(x) == string(y)
}
