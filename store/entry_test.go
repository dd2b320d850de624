package store

import (
	"strings"
	"testing"
	"time"

	"tripwell/forms"
)

func (r *rig) entryOf(id string) (e Entry) {
	r.Helper()
	r.look(all, func(v *View) {
		var err error
		if e, err = v.Entry(id); err != nil {
			r.Fatal(err)
		}
	})
	return e
}

func flagCodes(e Entry) string {
	var codes []string
	for _, f := range e.Flags {
		codes = append(codes, f.Code)
	}
	return strings.Join(codes, " ")
}

func TestEntry_TestDayIsTheEarlierOfAtAndReceivedInTheSitesZone(t *testing.T) {
	r := newRig(t) // 2026-12-01 08:00 UTC
	site := newID(r.clock())
	r.put("site.registered", site, site, map[string]any{"set": map[string]any{"code": "KIWI", "name": "Kiwi", "zone": "Pacific/Auckland"}})
	id := r.device(site, map[string]any{"kind": "gfci-receptacle"})
	p := r.phone(r.manager)
	evening := p.make("entry.made", site, id, button("yes", "yes"))
	p.push(evening)
	// 08:00 UTC is 21:00 of the same day in Auckland (UTC+13 in December, IANA time zone database).
	if e := r.entryOf(idIn(t, evening)); e.Day != forms.Date(2026, time.December, 1) || e.Verdict.Result != forms.Pass {
		t.Errorf("day %s, result %s", e.Day, e.Verdict.Result)
	}
	r.pass(4 * time.Hour) // 12:00 UTC is 01:00 of the next day there
	night := p.make("entry.made", site, id, button("yes", "yes"))
	p.push(night)
	if e := r.entryOf(idIn(t, night)); e.Day != forms.Date(2026, time.December, 2) {
		t.Errorf("day %s, want 2 December", e.Day)
	}
	r.pass(72 * time.Hour)
	ahead := p.make("entry.made", site, id, button("yes", "yes"))
	r.pass(-48 * time.Hour) // the phone's clock was two days ahead of ours
	p.push(ahead)
	e := r.entryOf(idIn(t, ahead))
	if e.Day != forms.Date(2026, time.December, 3) || !strings.Contains(flagCodes(e), "clock") {
		t.Errorf("day %s, flags %v: want the day it was received, flagged", e.Day, e.Flags)
	}
	late := p.make("entry.made", site, id, button("yes", "yes"))
	r.pass(8 * 24 * time.Hour)
	p.push(late)
	if e := r.entryOf(idIn(t, late)); !strings.Contains(flagCodes(e), "late") {
		t.Errorf("flags %v, want late", e.Flags)
	}
}

func idIn(t *testing.T, line []byte) string {
	t.Helper()
	_, after, ok := strings.Cut(string(line), `"id":"`)
	if !ok || len(after) < 36 {
		t.Fatalf("no id in %s", line)
	}
	return after[:36]
}

func TestEntry_CorrectionsAndFlags(t *testing.T) {
	r := newRig(t)
	site := r.site("ELM")
	id := r.device(site, map[string]any{"kind": "gfci-receptacle", "equipment_ground": "none-permitted"})
	body := map[string]any{"form": "gfci-receptacle/instrument", "source": "phone",
		"given":    map[string]any{"kind": "gfci-receptacle", "equipment_ground": "yes", "calibration_due": "2026-11-30"},
		"shown":    map[string]any{"result": "fail", "limit_rev": 1, "judge": 1},
		"readings": map[string]any{"condition": "sound", "found": "on", "trip_current_ma": 9}}
	made := r.put("entry.made", site, id, body)
	e := r.entryOf(made)
	if e.Verdict.Result != forms.Fail || e.LimitSet != "us-class-a" || e.LimitRev != 1 {
		t.Errorf("9 mA: %s under %s %d", e.Verdict.Result, e.LimitSet, e.LimitRev)
	}
	if got, want := flagCodes(e), "calibration-expired no-instrument differs-register"; got != want {
		t.Errorf("flags %q, want %q", got, want)
	}
	for _, reading := range []int{8, 5} {
		r.put("entry.corrected", site, made, map[string]any{"entry": made, "reason": "misread",
			"readings": map[string]any{"condition": "sound", "found": "on", "trip_current_ma": reading}})
	}
	e = r.entryOf(made)
	if len(e.Corrections) != 2 || e.Corrections[0].InForce || !e.Corrections[1].InForce {
		t.Errorf("corrections %+v", e.Corrections)
	}
	now, _ := e.Body.Readings["trip_current_ma"].Float()
	before, _ := e.Original.Readings["trip_current_ma"].Float()
	if now != 5 || before != 9 || e.Verdict.Result == forms.Fail {
		t.Errorf("in force %v mA, original %v mA, result %s", now, before, e.Verdict.Result)
	}
	r.look(all, func(v *View) {
		snap, err := v.Snapshot(site, forms.DayOf(r.clock()))
		if err != nil {
			t.Fatal(err)
		}
		if got := snap.Devices[0].Last["instrument"].Readings["trip_current_ma"]; got != 5 {
			t.Errorf("the phone takes along %v mA, want the corrected 5", got)
		}
	})
}

func TestEntry_LongHistoryKeepsEverything(t *testing.T) {
	r := newRig(t)
	site := r.site("ELM")
	id := r.device(site, map[string]any{"kind": "gfci-receptacle"})
	var first string
	const n = 3*spillPast + keepPast
	drafts := make([]Draft, n)
	for i := range drafts {
		r.pass(time.Hour)
		drafts[i] = Draft{ID: newID(r.clock()), Kind: "entry.made", Log: site, Subject: id, By: r.manager.ID, At: r.clock(), Body: button("yes", "yes")}
	}
	first = drafts[0].ID
	for len(drafts) > 0 {
		m := min(40, len(drafts))
		r.append(drafts[:m]...)
		drafts = drafts[m:]
	}
	r.put("entry.corrected", site, first, map[string]any{"entry": first, "reason": "it did not trip", "readings": button("no", "no")["readings"]})
	r.look(all, func(v *View) {
		list, err := v.Entries(id)
		if err != nil {
			t.Fatal(err)
		}
		if len(list) != n || list[n-1].ID != first || list[n-1].Verdict.Result != forms.Fail {
			t.Fatalf("%d entries, the oldest %s %s", len(list), list[len(list)-1].ID, list[len(list)-1].Verdict.Result)
		}
		count, last := 0, forms.NoDay
		for e, err := range v.SiteEntries(site, forms.NoDay, forms.NoDay) {
			if err != nil {
				t.Fatal(err)
			}
			if e.Day < last {
				t.Fatalf("%s after %s", e.Day, last)
			}
			last, count = e.Day, count+1
		}
		if count != n {
			t.Errorf("the site has %d entries, want %d", count, n)
		}
	})
}

func TestTodo_ALargeRevisionIsWorkedOffBetweenGroups(t *testing.T) {
	r := newRig(t)
	site := r.site("ELM")
	var drafts []Draft
	for range atOnce + 50 {
		r.pass(time.Millisecond)
		drafts = append(drafts, Draft{Kind: "device.registered", Log: site, Subject: newID(r.clock()), By: r.manager.ID,
			Body: map[string]any{"set": map[string]any{"kind": "gfci-receptacle"}}})
	}
	for len(drafts) > 0 {
		m := min(400, len(drafts))
		r.append(drafts[:m]...)
		drafts = drafts[m:]
	}
	r.put("plan.set", site, PlanSubject("own"), map[string]any{"plan": forms.Plan{ID: "own", Revision: 1, Task: "button", Kinds: []string{"gfci-receptacle"},
		Every: "P7D", Duty: forms.NotToExceed, InForce: forms.Date(2026, time.January, 1)}})
	deadline := time.Now().Add(time.Minute)
	for left := 1; left > 0; {
		if time.Now().After(deadline) {
			t.Fatal("the work list is never empty")
		}
		r.look(all, func(v *View) { left = v.Unfinished() })
		time.Sleep(5 * time.Millisecond)
	}
	r.look(all, func(v *View) {
		n := 0
		for row, err := range v.Due(DueAsk{On: forms.DayOf(r.clock()), Until: forms.NoDay, Site: "elm", Task: "button"}) {
			if err != nil {
				t.Fatal(err)
			}
			if n++; row.Plan != "own" || row.Due.Due != forms.Date(2026, time.December, 8) {
				t.Fatalf("%+v, want 8 December by the site's own plan", row.Due)
			}
		}
		if n != atOnce+50 {
			t.Errorf("%d dates, want %d", n, atOnce+50)
		}
	})
}

func TestEntry_ANewLimitRevisionJudgesAgainFromItsDay(t *testing.T) {
	r := newRig(t)
	site := r.site("ELM")
	id := r.device(site, map[string]any{"kind": "gfci-receptacle"})
	made := r.put("entry.made", site, id, button("yes", "no"))
	if e := r.entryOf(made); e.Verdict.Result != forms.Fail {
		t.Fatalf("a button that does not reset: %s", e.Verdict.Result)
	}
	set, ok := forms.Shipped().LimitSet("us-class-a")
	if !ok {
		t.Fatal("us-class-a is not shipped")
	}
	lenient := *set
	lenient.Revision, lenient.InForce, lenient.Limits = 1, forms.Date(2026, time.December, 2), set.Limits[1:2] // only how it was found, a recommendation
	r.put("limits.set", site, LimitSetSubject("us-class-a"), map[string]any{"limits": lenient})
	if e := r.entryOf(made); e.Verdict.Result != forms.Fail {
		t.Errorf("the day before the site's own set is in force the organisation's judges: got %s", e.Verdict.Result)
	}
	lenient.Revision, lenient.InForce = 2, forms.Date(2026, time.November, 1)
	r.put("limits.set", site, LimitSetSubject("us-class-a"), map[string]any{"limits": lenient})
	if e := r.entryOf(made); e.Verdict.Result == forms.Fail || e.LimitRev != 2 {
		t.Errorf("under the site's own set: %s, revision %d", e.Verdict.Result, e.LimitRev)
	}
	if s := r.sums(site, forms.DayOf(r.clock())); s.Failed != 0 {
		t.Errorf("%d failed, want none under the new revision", s.Failed)
	}
}
