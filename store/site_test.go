package store

import (
	"testing"
	"time"

	"tripwell/forms"
)

// The next date of a site is the earliest overdue one, else the earliest not yet passed, and of a day the first task by
// name, whichever device came first.
func TestSiteSums_NextDate(t *testing.T) {
	r := newRig(t)
	site := r.site("ELM")
	plan := func(id, task, kind, grace string) {
		r.put("plan.set", site, PlanSubject(id), map[string]any{"plan": forms.Plan{ID: id, Revision: 1, Task: task, Kinds: []string{kind}, Every: "P1M",
			Duty: forms.OnceEachPeriod, Grace: grace, InForce: forms.Date(2026, time.January, 1)}})
	}
	plan("wards", "receptacle", "hospital-receptacle", "")
	plan("desks", "instrument", "gfci-receptacle", "")
	plan("pressed", "button", "gfci-receptacle", "P10D")
	r.device(site, map[string]any{"kind": "hospital-receptacle"})
	desk := r.device(site, map[string]any{"kind": "gfci-receptacle"})
	check := func(on forms.Day, day forms.Day, task string, overdue int) {
		t.Helper()
		if s := r.sums(site, on); s.NextDay != day || s.NextTask != task || s.Overdue != overdue {
			t.Errorf("on %s: next %s %s, %d overdue; want %s %s, %d", on, s.NextDay, s.NextTask, s.Overdue, day, task, overdue)
		}
	}
	end := forms.Date(2026, time.December, 31)
	check(forms.Date(2026, time.December, 2), end, "button", 0)
	check(forms.Date(2026, time.October, 1), end, "button", 0) // more than 31 days ahead
	check(forms.Date(2027, time.January, 5), end, "instrument", 2)
	check(forms.Date(2027, time.January, 20), end, "button", 3)
	r.pass(time.Hour)
	r.put("entry.made", site, desk, entry(22))
	check(forms.Date(2027, time.January, 5), end, "receptacle", 1)
	check(forms.Date(2027, time.February, 5), end, "button", 3)
}
