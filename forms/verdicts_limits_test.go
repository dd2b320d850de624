package forms

import (
	"encoding/json"
	"fmt"
	"maps"
	"math"
	"slices"
	"strings"
	"testing"
)

// Every limit of the shipped sets is held by the vectors, in one of the sets that state it: a case notices when it is left
// out, and where one of its figures moves by one hundredth, so that a value exactly on each figure, or just beside it, stands among them.
func TestVectors_HoldEveryFigureOfEveryLimit(t *testing.T) {
	v, catalogue := readVectors(t)
	type held struct {
		line Line
		raw  string
		was  string
	}
	judge := func(c *Catalogue, line Line) string {
		v, err := c.JudgeLine(&line)
		return saidBy(v, err)
	}
	under := map[string][]held{}
	for _, c := range v.Cases {
		var line Line
		if DecodeLine(c.In, &line) != nil {
			continue
		}
		form, ok := catalogue.Form(line.Form)
		if !ok {
			continue
		}
		if set, err := catalogue.limitSetOf(&line, form, &line.Given); err == nil {
			under[set.ID] = append(under[set.ID], held{line, string(c.In), judge(catalogue, line)})
		}
	}
	// noticed tells whether any case that states the limit's reading comes out otherwise under a changed set.
	noticed := func(set *LimitSet, i int, change func(*LimitSet)) bool {
		changed := copyOfSet(t, set)
		change(changed)
		changed = copyOfSet(t, changed) // decoding sorts the limits out again
		with := &Catalogue{Forms: catalogue.Forms, LimitSets: []*LimitSet{changed}}
		return slices.ContainsFunc(under[set.ID], func(h held) bool {
			return strings.Contains(h.raw, set.Limits[i].Reading) && judge(with, h.line) != h.was
		})
	}
	missing := map[string]string{} // by what the limit says, figure by figure: where no case notices
	heldBy := map[string]bool{}
	hold := func(set *LimitSet, i int, what string, change func(*LimitSet)) {
		same := set.Limits[i] // the same limit in two sets may stand on two documents
		same.Source, same.Status, same.Text = "", "", ""
		said := asJSON(t, same) + what
		if heldBy[said] {
			return
		}
		if noticed(set, i, change) {
			heldBy[said] = true
			return
		}
		missing[said] = fmt.Sprintf("%s %s: no case would notice if %s", set.ID, set.Limits[i].ID, what)
	}
	for _, set := range Shipped().LimitSets {
		for i := range set.Limits {
			hold(set, i, "it were left out", func(s *LimitSet) { s.Limits = slices.Delete(s.Limits, i, i+1) })
			for figure, move := range figuresOf(&set.Limits[i]) {
				for _, by := range []float64{0.99, 1.01} {
					hold(set, i, fmt.Sprintf("%s were %g of what it is", figure, by), func(s *LimitSet) { move(&s.Limits[i], by) })
				}
			}
		}
	}
	for _, said := range slices.Sorted(maps.Keys(missing)) {
		if !heldBy[said] {
			t.Error(missing[said])
		}
	}
}

func asJSON(t *testing.T, v any) string {
	t.Helper()
	raw, err := json.Marshal(v)
	if err != nil {
		t.Fatal(err)
	}
	return string(raw)
}

// saidBy keeps what a judgement says of each reading and drops the figures of its limits, which always follow the set.
func saidBy(v Verdict, err error) string {
	said := fmt.Sprint(v.Result, err)
	for _, f := range v.Findings {
		said += fmt.Sprint(" ", f.Reading, f.At, f.Verdict, f.Level, f.Text)
	}
	return said
}

func copyOfSet(t *testing.T, set *LimitSet) *LimitSet {
	t.Helper()
	raw, err := json.Marshal(set)
	if err != nil {
		t.Fatal(err)
	}
	out := new(LimitSet)
	if err := json.Unmarshal(raw, out); err != nil {
		t.Fatal(err)
	}
	return out
}

// figuresOf names the figures of a limit, each with how to move it in a copy.
func figuresOf(l *Limit) map[string]func(*Limit, float64) {
	out := map[string]func(*Limit, float64){}
	times := func(at **float64, by float64) {
		moved := **at * by
		*at = &moved
	}
	add := func(name string, is *float64, at func(*Limit) **float64) {
		if is != nil && *is != 0 && !math.IsInf(*is, 0) {
			out[name] = func(l *Limit, by float64) { times(at(l), by) }
		}
	}
	add("the least", l.Min, func(l *Limit) **float64 { return &l.Min })
	add("the most", l.Max, func(l *Limit) **float64 { return &l.Max })
	if l.OfRated != nil {
		add("the least share", l.OfRated.Min, func(l *Limit) **float64 { return &l.OfRated.Min })
		add("the most share", l.OfRated.Max, func(l *Limit) **float64 { return &l.OfRated.Max })
	}
	for i, r := range l.ByMultiple {
		add(fmt.Sprintf("the least at %g", r.Multiple), r.Min, func(l *Limit) **float64 { return &l.ByMultiple[i].Min })
		add(fmt.Sprintf("the most at %g", r.Multiple), r.Max, func(l *Limit) **float64 { return &l.ByMultiple[i].Max })
	}
	for unit, b := range l.ByUnit {
		if b.Min != nil {
			out["the least in "+unit] = func(l *Limit, by float64) {
				b := l.ByUnit[unit]
				times(&b.Min, by)
				l.ByUnit[unit] = b
			}
		}
	}
	if l.OverRated != 0 {
		out["the voltage over the rating"] = func(l *Limit, by float64) { l.OverRated *= by }
	}
	return out
}
