package store

import (
	"fmt"
	"slices"
	"testing"
	"time"

	"tripwell/forms"
)

// Two revisions of a limit, each from a day in the past, judge more entries again than go into one transaction, while
// entries and corrections go on coming. Whatever parts that was done in, the models are those of a rebuild (the rig
// compares), and what was tested before a revision's day stays as it was.
func TestTodo_RevisionsFromAPastDayWhilePushesGoOn(t *testing.T) {
	r := newRig(t)
	site := r.site("ELM")
	const devices, rounds = 30, 45
	var ids []string
	for range devices {
		r.pass(time.Millisecond)
		ids = append(ids, r.device(site, map[string]any{"kind": "gfci-receptacle"}))
	}
	p := r.phone(r.manager)
	made := map[string]string{} // entry → device
	tests := func(ma float64) {
		var lines [][]byte
		for _, d := range ids {
			id := newID(r.clock())
			made[id] = d
			lines = append(lines, p.makeWith(id, "entry.made", site, d, tripsAt(ma)))
		}
		if got := states(p.push(lines...)); slices.ContainsFunc(got, func(s string) bool { return s != "stored" }) {
			t.Fatal(got)
		}
	}
	first := forms.DayOf(r.clock())
	for range rounds {
		tests(5.5)
		r.pass(24 * time.Hour)
	}
	correct := func(n int, ma float64) {
		for id := range made {
			if n--; n < 0 {
				return
			}
			body := tripsAt(ma)
			p.push(p.make("entry.corrected", site, id, map[string]any{"entry": id, "readings": body["readings"], "given": body["given"], "reason": "Read from the wrong line."}))
		}
	}
	correct(10, 4.2)
	revise := func(from int, most string) {
		var draft Draft
		r.viewed(func(v *View) {
			next, _, err := v.Next(RuleDraft{Kind: "limits.set", JSON: revised(t, "us-class-a", wasTrip, fmt.Sprintf(`"reading":"trip_current_ma","min":4,"max":%s`, most))},
				first+forms.Day(from), forms.NoDay)
			if err == nil {
				draft, err = next.Draft("", r.manager.ID)
			}
			if err != nil {
				t.Fatal(err)
			}
		})
		r.append(draft)
	}
	revise(15, "5")
	revise(30, "5.8")
	left := 0
	if r.viewed(func(v *View) { left = v.Unfinished() }); left == 0 {
		t.Fatal("nothing is on the work list: the test asks too little of it")
	}
	for range 5 {
		tests(5.9)
		correct(2, 4.3)
	}
	for end := time.Now().Add(time.Minute); left > 0; time.Sleep(5 * time.Millisecond) {
		if time.Now().After(end) {
			t.Fatal("the work list is never empty")
		}
		r.viewed(func(v *View) { left = v.Unfinished() })
	}
	r.viewed(func(v *View) {
		seen, failed := 0, 0
		for e, err := range v.SiteEntries(site, forms.NoDay, forms.NoDay) {
			if err != nil {
				t.Fatal(err)
			}
			seen++
			ma, _ := e.Body.Readings["trip_current_ma"].Value.(float64)
			after, want := int(e.Day-first), forms.Pass
			if after >= 15 && after < 30 && ma > 5 || after >= 30 && ma > 5.8 {
				want = forms.Fail
				failed++
			}
			if e.Verdict.Result != want {
				t.Fatalf("%g mA on day %d: %s, want %s", ma, after, e.Verdict.Result, want)
			}
		}
		if seen != devices*(rounds+5) {
			t.Errorf("%d entries, want %d", seen, devices*(rounds+5))
		}
		// Those verdicts are made while reading; rows keep results, and must have been judged again too.
		counted, err := v.Tallies(site)
		if err != nil {
			t.Fatal(err)
		}
		fails, all := 0, 0
		for _, m := range counted {
			for result, n := range m.Results {
				if all += n; result == forms.Fail {
					fails += n
				}
			}
		}
		if fails != failed || all != seen {
			t.Errorf("the months count %d fails of %d entries, want %d of %d", fails, all, failed, seen)
		}
	})
}

// The size of a part follows what the last one cost.
func TestTodo_PartsAreSizedByTheTimeTheyTake(t *testing.T) {
	o := newOffWork()
	o.adapt(100, 4*partTime)
	if o.size != 25 {
		t.Errorf("after a part that took four times too long: %d, want a quarter of its 100", o.size)
	}
	o.adapt(100, partTime/50)
	if o.size != 200 {
		t.Errorf("after a quick part: %d, want no more than twice its 100", o.size)
	}
	o.adapt(10, time.Hour)
	if o.size != partLeast {
		t.Errorf("%d, want at least %d", o.size, partLeast)
	}
}
