package store

import (
	"bytes"
	"encoding/json"
	"errors"
	"strings"
	"testing"
	"time"

	"tripwell/forms"
)

// revised is a shipped limit set with one thing changed, as people would write it.
func revised(t *testing.T, id, was, is string) json.RawMessage {
	t.Helper()
	set, ok := forms.Shipped().LimitSet(id)
	if !ok {
		t.Fatalf("%s is not shipped", id)
	}
	raw, err := encodeBody(set)
	if err != nil {
		t.Fatal(err)
	}
	out := strings.Replace(string(raw), was, is, 1)
	if out == string(raw) {
		t.Fatalf("%s holds no %s", id, was)
	}
	return json.RawMessage(out)
}

func (r *rig) viewed(fn func(v *View)) {
	r.Helper()
	r.look(Scope{Role: "owner", All: true}, fn)
}

const (
	wasTrip = `"reading":"trip_current_ma","min":4,"max":6`
	isTrip  = `"reading":"trip_current_ma","min":4,"max":5`
)

// tripsAt is an instrument entry with everything that is required.
func tripsAt(ma float64) map[string]any {
	answers := map[string]any{"condition": "sound", "found": "on", "wiring": "correct", "ground_continuous": "yes", "ground_at_terminal": "yes", "button_trips": "yes",
		"button_resets": "yes", "load_dead_when_tripped": "yes", "restored": "yes", "loads_disconnected": "yes", "voltage_v": 120.0, "ground_ohm": 0.3,
		"test_current_ma": 10.0, "trip_time_ms": 400.0, "trip_current_ma": ma}
	readings := map[string]any{}
	for code, v := range answers {
		readings[code] = map[string]any{"value": v}
	}
	return map[string]any{"form": "gfci-receptacle/instrument", "given": map[string]any{"kind": "gfci-receptacle"}, "readings": readings, "source": "phone"}
}

func TestRevision_APastDayIsPreviewedThenJudgedAgainAndBothStay(t *testing.T) {
	r := newRig(t)
	site := r.site("ELM")
	id := r.device(site, map[string]any{"kind": "gfci-receptacle"})
	inside, outside := r.put("entry.made", site, id, tripsAt(4.5)), r.put("entry.made", site, id, tripsAt(5.5))
	if e := r.entryOf(outside); e.Verdict.Result != forms.Pass {
		t.Fatalf("before: %s %+v", e.Verdict.Result, e.Verdict.Findings)
	}
	var next RuleDraft
	r.viewed(func(v *View) {
		var err error
		var same bool
		next, same, err = v.Next(RuleDraft{Kind: "limits.set", JSON: revised(t, "us-class-a", wasTrip, isTrip), Reason: "Makers' advice."}, forms.Date(2026, time.November, 1), forms.DayOf(r.clock()))
		if err != nil || same {
			t.Fatal(same, err)
		}
		p, err := v.Preview(t.Context(), next)
		if err != nil {
			t.Fatal(err)
		}
		want := PreviewEntry{Entry: outside, Device: id, Site: site, Task: "instrument", Day: forms.Date(2026, time.December, 1), Was: forms.Pass, Becomes: forms.Fail}
		if !p.Whole || p.Looked != 2 || p.Judged != 2 || p.Changed != 1 || len(p.First) != 1 || p.First[0] != want {
			t.Errorf("preview %+v, want one of two entries to go from pass to fail", p)
		}
	})
	draft, err := next.Draft("", r.manager.ID)
	if err != nil {
		t.Fatal(err)
	}
	r.pass(time.Minute)
	r.append(draft)
	if a, b := r.entryOf(inside), r.entryOf(outside); a.Verdict.Result != forms.Pass || b.Verdict.Result != forms.Fail || b.LimitRev != 2 {
		t.Errorf("after: %s and %s under revision %d, want pass and fail under 2", a.Verdict.Result, b.Verdict.Result, b.LimitRev)
	}
	e := r.entryOf(outside)
	r.viewed(func(v *View) {
		list, err := v.Judgements(e)
		if err != nil || len(list) != 2 {
			t.Fatalf("%+v %v, want both judgements", list, err)
		}
		if list[0].Result != forms.Pass || list[0].LimitRev != 1 || list[0].Revision != nil {
			t.Errorf("as it came: %+v", list[0])
		}
		if by := list[1].Revision; list[1].Result != forms.Fail || by == nil || by.By != r.manager.ID || by.Reason != "Makers' advice." || by.InForce != forms.Date(2026, time.November, 1) {
			t.Errorf("by the revision: %+v", list[1])
		}
	})
}

func TestRevision_ALaterDayLeavesThePastAlone(t *testing.T) {
	r := newRig(t)
	site := r.site("ELM")
	id := r.device(site, map[string]any{"kind": "gfci-receptacle"})
	r.put("entry.made", site, id, tripsAt(5.5))
	r.viewed(func(v *View) {
		next, _, err := v.Next(RuleDraft{Kind: "limits.set", JSON: revised(t, "us-class-a", wasTrip, isTrip)}, forms.Date(2027, time.January, 1), forms.DayOf(r.clock()))
		if err != nil {
			t.Fatal(err)
		}
		if p, err := v.Preview(t.Context(), next); err != nil || p.Looked != 0 || p.Changed != 0 {
			t.Errorf("%+v %v, want nothing touched", p, err)
		}
	})
}

func TestRevision_WhatIsThereAlreadyMakesNone(t *testing.T) {
	r := newRig(t)
	r.viewed(func(v *View) {
		held, err := v.LimitRevisions("", "us-class-a")
		if err != nil || len(held) != 1 || held[0].By != "" {
			t.Fatalf("%+v %v", held, err)
		}
		if _, same, err := v.Next(RuleDraft{Kind: "limits.set", JSON: held[0].JSON}, forms.NoDay, forms.DayOf(r.clock())); err != nil || !same {
			t.Errorf("same %v %v, want the revision that is there", same, err)
		}
		next, same, err := v.Next(RuleDraft{Kind: "limits.set", JSON: revised(t, "us-class-a", wasTrip, isTrip)}, forms.NoDay, forms.DayOf(r.clock()))
		if err != nil || same || !bytes.Contains(next.JSON, []byte(`"revision":2,"in_force":"2026-12-01"`)) {
			t.Errorf("%.120s same %v %v, want revision 2 from today", next.JSON, same, err)
		}
	})
}

func TestRevision_NonsenseIsRefusedAtEveryDoor(t *testing.T) {
	r := newRig(t)
	bad := revised(t, "us-class-a", wasTrip, `"reading":"trip_current_ma","min":7,"max":6`)
	if _, err := r.Append(t.Context(), Draft{Kind: "limits.set", Log: "org", Subject: LimitSetSubject("us-class-a"), By: r.manager.ID, Body: map[string]any{"limits": bad}}); err == nil || !strings.Contains(err.Error(), "nothing could ever pass") {
		t.Errorf("appended: %v", err)
	}
	var e *Error
	if _, err := (RuleDraft{Kind: "limits.set", JSON: bad}).Draft("", r.manager.ID); !errors.As(err, &e) || e.Field != "limits.trip-current.min" {
		t.Errorf("drafted: %v", err)
	}
	p := r.phone(r.manager)
	rc := p.push(p.make("limits.set", "org", LimitSetSubject("us-class-a"), map[string]any{"limits": bad}))
	if got := states(rc)[0]; got != "refused bad_body" {
		t.Errorf("pushed: %s %s, want it in quarantine", got, rc[0].Text)
	}
	if e := rc[0]; !strings.Contains(e.Text, "nothing could ever pass") {
		t.Errorf("refused with %q", e.Text)
	}
}

func TestStanding_DeviceThenSiteThenOrganisation(t *testing.T) {
	r := newRig(t)
	site, other := r.site("ELM"), r.site("OAK")
	today := forms.DayOf(r.clock())
	chosen := r.device(site, map[string]any{"kind": "gfci-receptacle", "limit_set": "us-health-care"})
	at := r.device(site, map[string]any{"kind": "gfci-receptacle"})
	elsewhere := r.device(other, map[string]any{"kind": "gfci-receptacle"})
	standing := func(device, id, why string, own bool) {
		t.Helper()
		r.viewed(func(v *View) {
			st, err := v.StandingFor(device, today)
			if err != nil || st.ID != id || st.Why != why || st.OwnRevision != own || st.Set == nil || st.Set.ID != id {
				t.Errorf("%+v %v, want %s by %s", st, err, id, why)
			}
		})
	}
	standing(at, "us-class-a", ByShipped, false)
	set := func(log, id, inForce string) {
		t.Helper()
		json := revised(t, "us-class-a", `"limit_set":"us-class-a","revision":1,"in_force":"1900-01-01"`, `"limit_set":"`+id+`","revision":1,"in_force":"`+inForce+`","stands_for":["gfci-receptacle"]`)
		r.put("limits.set", log, LimitSetSubject(id), map[string]any{"limits": json})
	}
	set("org", "house", "2026-01-01")
	standing(at, "house", ByOrganisation, false)
	set(site, "ward", "2026-12-02")
	standing(at, "house", ByOrganisation, false) // from tomorrow only
	set(site, "lab", "2026-11-01")
	standing(at, "lab", BySite, true)
	standing(elsewhere, "house", ByOrganisation, false)
	standing(chosen, "us-health-care", ByDevice, false)
	made := r.put("entry.made", site, at, tripsAt(4.5))
	if e := r.entryOf(made); e.LimitSet != "lab" {
		t.Errorf("an entry that names no set was judged by %q, want lab", e.LimitSet)
	}
	r.viewed(func(v *View) {
		snap, err := v.Snapshot(site, today)
		if err != nil {
			t.Fatal(err)
		}
		for _, d := range snap.Devices {
			if d.LimitSet != "lab" {
				t.Errorf("the phone is told %q, want lab", d.LimitSet)
			}
		}
	})
}
