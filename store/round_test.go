package store

import (
	"encoding/json"
	"fmt"
	"testing"
	"time"

	"pgregory.net/rapid"

	"tripwell/forms"
)

// pressed is a button entry's body; trips "no" fails, found locked is not tested.
func pressed(trips string) map[string]any {
	readings := map[string]any{"condition": "sound", "found": "on", "button_trips": trips, "button_resets": "yes", "restored": "yes", "load_dead_when_tripped": "yes"}
	if trips == "" {
		readings = map[string]any{"button_trips": map[string]any{"missing": "no-access"}, "found": map[string]any{"missing": "no-access"}}
	}
	return map[string]any{"form": "gfci-receptacle/button", "given": map[string]any{"kind": "gfci-receptacle"}, "readings": readings, "source": "phone"}
}

// walked is a site with four devices and a round of their buttons, walked by one of the two it was given to.
func walked(r *rig) (site, round string, devices []string, lines [][]byte) {
	site = r.site("ELM-4")
	one, two := r.person("crew", false, site), r.person("crew", false, site)
	p, office := r.phone(one), r.phone(r.manager)
	for i := range 4 {
		r.pass(time.Second)
		id := newID(r.clock())
		devices = append(devices, id)
		lines = append(lines, office.make("device.registered", site, id, map[string]any{"set": map[string]any{"kind": "gfci-receptacle", "where": fmt.Sprint("Spot ", i)}}))
	}
	lines = append(lines, p.make("entry.made", site, devices[3], pressed("yes"))) // before the round: does not count
	r.pass(time.Hour)
	round = newID(r.clock())
	var stops []string
	for _, d := range devices {
		stops = append(stops, d+"/button")
	}
	lines = append(lines, office.make("round.made", site, round, map[string]any{"set": map[string]any{"stops": stops, "day": "2026-12-01", "people": []string{one.ID, two.ID}, "minutes": 8}}))
	for i, trips := range []string{"no", ""} {
		r.pass(time.Minute)
		lines = append(lines, p.make("entry.made", site, devices[i], pressed(trips)))
	}
	r.pass(time.Minute)
	lines = append(lines, p.make("round.closed", site, round, map[string]any{"day": "2026-12-01", "done": 1, "left": 1, "skipped": 1, "back": 1, "proved": map[string]any{"first": map[string]any{"at": "2026-12-01T09:00:00Z", "works": true}},
		"passed": []any{map[string]any{"device": devices[2], "task": "button", "reason": "in-use"}}}))
	r.pass(time.Minute)
	return site, round, devices, append(lines, office.make("round.set", site, round, map[string]any{"set": map[string]any{"people": []string{one.ID}, "note": "Keys at the desk"}}))
}

func readRound(t testing.TB, s *Store, id string) (r Round) {
	t.Helper()
	err := s.View(Scope{All: true, Role: "owner"}, func(v *View) (err error) {
		r, err = v.Round(id)
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	return r
}

func TestRound_WhatCountsForIt(t *testing.T) {
	r := newRig(t)
	site, round, devices, lines := walked(r)
	all, err := r.Push(t.Context(), Sender{Owner: true}, incoming(lines))
	if err != nil {
		t.Fatal(err)
	}
	for _, rc := range all {
		if rc.State != "stored" {
			t.Fatalf("%+v", rc)
		}
	}
	got := readRound(t, r.Store, round)
	want := []string{StopDone, StopBack, StopPassed, StopLeft}
	for i, s := range got.Stops {
		if s.State != want[i] || s.Device != devices[i] {
			t.Errorf("stop %d: got %+v, want %s", i, s, want[i])
		}
	}
	if got.Stops[0].Result != forms.Fail || got.Stops[2].Reason != "in-use" {
		t.Errorf("got %+v", got.Stops)
	}
	if got.State != RoundEnded || got.Note != "Keys at the desk" || len(got.Closings) != 1 || !got.Closings[0].ProvedFirst.Works || got.Closings[0].ProvedLast != nil {
		t.Errorf("got %+v", got)
	}

	// An entry on paper that names the round counts although its day lies before it.
	body := pressed("yes")
	body["source"], body["round"], body["day"] = "paper", round, "2026-11-30"
	r.append(Draft{Kind: "entry.imported", Log: site, Subject: devices[3], By: r.manager.ID, Body: body})
	if got := readRound(t, r.Store, round); got.Stops[3].State != StopDone || !got.Stops[3].Paper {
		t.Errorf("got %+v", got.Stops[3])
	}

	r.append(Draft{Kind: "round.accepted", Log: site, Subject: round, By: r.manager.ID, Body: map[string]any{"note": "The rest next week"}})
	r.pass(48 * time.Hour)
	r.append(Draft{Kind: "entry.made", Log: site, Subject: devices[1], By: r.manager.ID, Body: pressed("yes")})
	if got := readRound(t, r.Store, round); got.State != RoundAccepted || got.Accepted.Note != "The rest next week" || got.Stops[1].State != StopBack {
		t.Errorf("after acceptance: got %+v", got)
	}
}

func TestRound_OfAnotherSiteIsNotThere(t *testing.T) {
	r := newRig(t)
	site, round, _, lines := walked(r)
	if _, err := r.Push(t.Context(), Sender{Owner: true}, incoming(lines)); err != nil {
		t.Fatal(err)
	}
	other := r.site("OAK-1")
	for _, sc := range []struct {
		sites []string
		want  string
	}{{[]string{other}, "not_found"}, {[]string{site}, ""}} {
		err := r.View(Scope{Person: r.manager.ID, Role: "crew", Sites: sc.sites}, func(v *View) error {
			_, err := v.Round(round)
			return err
		})
		code := ""
		if e, ok := err.(*Error); ok {
			code = e.Code
		}
		if code != sc.want {
			t.Errorf("sites %v: got %v, want %q", sc.sites, err, sc.want)
		}
	}
	// Crew may not accept.
	crew := r.person("crew", false, site)
	if _, err := r.Append(t.Context(), Draft{Kind: "round.accepted", Log: site, Subject: round, By: crew.ID, Body: map[string]any{}}); err == nil {
		t.Error("crew accepted a round")
	}
}

func TestRound_ArrivalOrderHasNoSay(t *testing.T) {
	if testing.Short() {
		t.Skip("long property run")
	}
	r := newRig(t)
	site, round, _, lines := walked(r)
	// The site's registration and the people stand in the rig's own book: carried over.
	page, err := r.Pull(Scope{All: true, Role: "manager"}, site, "", 0)
	if err != nil {
		t.Fatal(err)
	}
	for _, rec := range page.Records {
		lines = append(lines, []byte(rec.Record))
	}
	want, _ := json.Marshal(readRound(t, fed(t, lines, seqTo(len(lines)), 3, r.clock()), round))
	rapid.Check(t, func(rt *rapid.T) {
		order := rapid.Permutation(seqTo(len(lines))).Draw(rt, "order")
		s := fed(t, lines, order, rapid.IntRange(1, len(lines)).Draw(rt, "group"), r.clock())
		told, _ := json.Marshal(readRound(t, s, round))
		if string(told) != string(want) {
			rt.Fatalf("order %v: %s", order, firstDifference(string(told), string(want)))
		}
	})
}

func seqTo(n int) []int {
	out := make([]int, n)
	for i := range out {
		out[i] = i
	}
	return out
}

func incoming(lines [][]byte) []Incoming {
	out := make([]Incoming, len(lines))
	for i, l := range lines {
		out[i] = Incoming{Record: l}
	}
	return out
}

func TestPace_IsTheMedianOfOnePersonsDay(t *testing.T) {
	r := newRig(t)
	site := r.site("ELM-4")
	p, q := r.phone(r.person("crew", false, site)), r.phone(r.person("crew", false, site))
	device := newID(r.clock())
	var lines [][]byte
	// Intervals of 1 to 13 min by one person, in between another's, then a pause over lunch and a double entry.
	for i := range 14 {
		lines = append(lines, p.make("entry.made", site, device, pressed("yes")))
		r.pass(time.Duration(i+1) * 30 * time.Second)
		lines = append(lines, q.make("entry.made", site, newID(r.clock()), entry(20)))
		r.pass(time.Duration(i+1) * 30 * time.Second)
	}
	r.pass(2 * time.Hour)
	lines = append(lines, p.make("entry.made", site, device, pressed("yes")), p.make("entry.made", site, device, pressed("yes")))
	if _, err := r.Push(t.Context(), Sender{Owner: true}, incoming(lines)); err != nil {
		t.Fatal(err)
	}
	err := r.View(Scope{All: true, Role: "owner"}, func(v *View) error {
		pace, err := v.Pace(site)
		if got := pace["button"]; got.Minutes != 7 || got.From != 13 { // the middle of 1 … 13
			t.Errorf("button: got %+v, want 7 min of 13 intervals", got)
		}
		if got := pace["receptacle"]; got.From != 0 || got.Minutes != forms.DefaultMinutes("receptacle") {
			t.Errorf("receptacle: got %+v, want the estimate", got)
		}
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
}

func TestVisit_TakesWhatIsDueOnceAndInWalkingOrder(t *testing.T) {
	r := newRig(t)
	site := r.site("ELM-4")
	var ids []string
	for i, name := range []string{"Room 10", "Room 2", "Room 1"} {
		place, device := newID(r.clock()), newID(r.clock())
		ids = append(ids, device)
		r.append(Draft{Kind: "place.registered", Log: site, Subject: place, By: r.manager.ID, Body: map[string]any{"set": map[string]any{"building": "Main", "room": name, "name": "Desk", "order": i}}},
			Draft{Kind: "device.registered", Log: site, Subject: device, By: r.manager.ID, Body: map[string]any{"set": map[string]any{"kind": "gfci-receptacle", "place": place}}})
	}
	round := newID(r.clock())
	r.append(Draft{Kind: "round.made", Log: site, Subject: round, By: r.manager.ID, Body: map[string]any{"set": map[string]any{"stops": []string{ids[1] + "/button"}}}})
	see := func(ask VisitAsk) (out Visit) {
		err := r.View(Scope{All: true, Role: "owner"}, func(v *View) (err error) {
			out, err = v.Visit(ask)
			return err
		})
		if err != nil {
			t.Fatal(err)
		}
		return out
	}
	on := forms.Date(2026, 12, 15)
	got := see(VisitAsk{Site: site, Day: on, Until: forms.Date(2026, 12, 31), Most: 3})
	if len(got.Stops) != 2 || got.Stops[0].Device.ID != ids[2] || got.Stops[1].Device.ID != ids[0] || got.OnRounds != 1 || len(got.Starts) != 2 {
		t.Errorf("got %+v", got)
	}
	// A year ahead both tests are due: the instrument's stands for both, and what was due is overdue.
	got = see(VisitAsk{Site: site, Day: forms.Date(2027, 12, 31), Until: forms.Date(2027, 12, 31), Most: 600})
	for _, s := range got.Stops {
		if s.Device.ID != ids[1] && (s.Task != "instrument" || len(s.Also) != 1) {
			t.Errorf("got %+v", s)
		}
	}
	if len(got.Starts) != 1 {
		t.Errorf("got %d rounds, want 1", len(got.Starts))
	}
}
