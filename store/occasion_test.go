package store

import (
	"testing"
	"time"

	"tripwell/forms"
)

// A repair makes the tests of its device due at once. What was tested that day before it still waits; a test made after it,
// the same day, meets it; and it holds whichever of the two records comes first.
func TestRepaired_AsksForTests(t *testing.T) {
	for name, repairFirst := range map[string]bool{"in order": false, "the repair comes before the test that was made before it": true} {
		t.Run(name, func(t *testing.T) {
			r := newRig(t)
			site := r.site("KILN-LANE")
			device := r.device(site, map[string]any{"kind": "gfci-receptacle"})
			today := forms.DayOf(r.clock())
			next := func() (d Due) {
				t.Helper()
				for _, d = range r.deviceOn(device, today).Due {
					if d.Task == "button" {
						return d
					}
				}
				t.Fatal("no date of the button")
				return d
			}
			p := r.phone(r.manager)
			p.push(p.make("entry.made", site, device, button("yes", "yes")))
			usual := next()
			if usual.Due <= today+1 {
				t.Fatalf("after a test the date is %s", usual.Due)
			}
			r.pass(26 * time.Hour)
			today = forms.DayOf(r.clock())
			failed := p.make("entry.made", site, device, button("no", "no"))
			r.pass(time.Hour)
			repaired := p.make("defect.repaired", site, newID(r.clock()), map[string]any{"device": device, "how": "terminal tightened"})
			lines := [][]byte{failed, repaired}
			if repairFirst {
				lines = [][]byte{repaired, failed}
			}
			for i, line := range lines {
				p.push(line)
				if repairFirst && i == 0 {
					if d := next(); d.Due != today || d.Cause != forms.Repaired || d.State != forms.DueNow {
						t.Errorf("repaired: got %s by %q, %s; want today", d.Due, d.Cause, d.State)
					}
				}
			}
			if d := next(); d.Due != today+1 || d.Cause != forms.Repaired {
				t.Errorf("repaired after the fail of that day: got %s by %q, want the next day", d.Due, d.Cause)
			}
			r.pass(time.Hour)
			p.push(p.make("entry.made", site, device, button("yes", "yes")))
			if d := next(); d.Due != usual.Due || d.Cause != "" {
				t.Errorf("tested after the repair: got %s by %q, want %s", d.Due, d.Cause, usual.Due)
			}
		})
	}
}
