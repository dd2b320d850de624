package server

import (
	"net/http"
	"strings"
	"testing"

	"tripwell/store"
)

func (r *rig) rounds() (out []store.Round) {
	r.t.Helper()
	must(r.t, r.store.View(store.Scope{All: true, Role: "owner"}, func(v *store.View) (err error) {
		out, err = v.Rounds("")
		return err
	}))
	return out
}

func TestRound_MadeFromAVisitWalkedAndAccepted(t *testing.T) {
	r := newRig(t, 5)
	manager, crew := r.signIn(r.manager), r.signIn(r.crew)
	visit := "/rounds/new?site=KILN-LANE&until=2099-12-31"
	form := setAll(r.openForm(manager, visit), "site", r.site, "who.0", r.crew.ID, "note", "Keys at the desk", "starts", "a quarter past")
	if res := r.submit(manager, "/rounds"+strings.TrimPrefix(visit, "/rounds/new"), form.Encode()); res.status != http.StatusUnprocessableEntity || !strings.Contains(res.body, "a quarter past") || !strings.Contains(res.body, "Keys at the desk") {
		t.Fatalf("a time that is none: got %d, want the page back with what was typed", res.status)
	}
	form.Set("starts", "06:30")
	first := r.wantTo(manager, "/rounds", form)
	if again := r.wantTo(manager, "/rounds", form); again != first || len(r.rounds()) != 1 {
		t.Fatalf("sent twice: %d rounds, at %s and %s", len(r.rounds()), first, again)
	}
	round := r.rounds()[0]
	if len(round.Stops) != 5 || round.People[0] != r.crew.ID || round.Note != "Keys at the desk" || round.Starts != "06:30" {
		t.Fatalf("got %+v", round)
	}
	if page := r.open(manager, visit).body; !strings.Contains(page, "more are on open rounds already") {
		t.Error("what an open round has is offered a second time")
	}
	at := "/rounds/" + round.ID
	if page := r.open(crew, at).body; !strings.Contains(page, `http-equiv="refresh"`) || strings.Contains(page, "Accept this round") {
		t.Error("a round that is open must read itself again, and crew accept nothing")
	}
	if res := r.submit(crew, at+"/accept", "record="+newID()); res.status != http.StatusForbidden {
		t.Errorf("crew accepts: got %d, want 403", res.status)
	}
	if res := r.submit(manager, at+"/accept", "record="+newID()+"&accept_note=All+good"); res.status != http.StatusConflict || !strings.Contains(res.body, "Nobody has ended") {
		t.Errorf("not ended: got %d, want 409", res.status)
	}
	edit := setAll(r.openForm(manager, at+"/edit"), "note", "Keys at the gate")
	r.wantTo(manager, at+"/edit", edit)
	r.append(store.Draft{Kind: "round.closed", Log: r.site, Subject: round.ID, By: r.crew.ID, Body: set{"day": "2026-12-01", "done": 0, "left": 5, "passed": []any{set{"device": round.Stops[0].Device, "task": round.Stops[0].Task, "reason": "no-time"}}}})
	if page := r.open(manager, "/rounds").body; !strings.Contains(page, "1 round waits to be accepted.") {
		t.Error("the list does not say that a round waits")
	}
	page := r.open(manager, at).body
	if !strings.Contains(page, "no time left") || !strings.Contains(page, "Keys at the gate") {
		t.Errorf("the page of an ended round says: %s", page)
	}
	r.wantTo(manager, at+"/accept", setAll(r.openForm(manager, at), "accept_note", "The rest next week"))
	if page := r.open(crew, at).body; !strings.Contains(page, "The rest next week") || strings.Contains(page, `http-equiv="refresh"`) {
		t.Errorf("accepted: %s", page)
	}
}

// A place that may be tested only at some hours: a round that reaches it at others is made only when somebody says so.
func TestRound_WarnsOfTheHoursOfItsPlaces(t *testing.T) {
	r := newRig(t, 3)
	manager, place := r.signIn(r.manager), r.devicesOf(r.site)[1].Place
	r.append(store.Draft{Kind: "place.set", Log: r.site, Subject: place.ID, By: r.manager.ID, Body: set{"set": set{"test_from": "05:30", "test_until": "07:00"}}})
	visit := "/rounds/new?site=KILN-LANE&task=button&until=2099-12-31"
	form := setAll(r.openForm(manager, visit), "site", r.site, "who.0", r.crew.ID, "note", "Keys at the desk", "starts", "09:00")
	made := "/rounds" + strings.TrimPrefix(visit, "/rounds/new")
	res := r.submit(manager, made, form.Encode())
	for _, want := range []string{place.Name + " is reached at about 09:02 and may be tested only between 05:30 and 07:00.", "A start at 06:55 suits every place.", "Keys at the desk", `name="outside"`, `value="` + r.crew.ID + `" selected`} {
		if !strings.Contains(res.body, want) {
			t.Errorf("the page lacks %q", want)
		}
	}
	if res.status != http.StatusUnprocessableEntity || len(r.rounds()) != 0 {
		t.Fatalf("got %d and %d rounds, want the page back and none", res.status, len(r.rounds()))
	}
	form.Set("outside", "yes")
	at := r.wantTo(manager, made, form)
	if page := r.open(manager, at).body; !strings.Contains(page, "is reached at about 09:02") {
		t.Error("the page of the round does not warn")
	}
	edit := setAll(r.openForm(manager, at+"/edit"), "starts", "08:30")
	if res := r.submit(manager, at+"/edit", edit.Encode()); res.status != http.StatusUnprocessableEntity {
		t.Errorf("moved to another hour outside: got %d, want the page back", res.status)
	}
	edit.Set("starts", "06:30")
	r.wantTo(manager, at+"/edit", edit)
	if page := r.open(manager, at).body; strings.Contains(page, "is reached at about") {
		t.Error("the page warns of an hour that suits")
	}
}

func TestRound_OnlyDevicesOfItsSite(t *testing.T) {
	r := newRig(t, 1)
	manager := r.signIn(r.manager)
	form := setAll(r.openForm(manager, "/rounds/new?site=KILN-LANE&until=2099-12-31"), "site", r.site)
	for _, stops := range []string{newID() + "/button", r.devices[0] + "/dancing", "something"} {
		form.Set("stops.0", stops)
		if res := r.submit(manager, "/rounds", form.Encode()); res.status == http.StatusSeeOther {
			t.Errorf("%s was taken", stops)
		}
	}
}

// The tester tried on a known outlet at both ends of a walk stands with the tester, for whoever looks at it and has the site.
func TestInstrument_ProofsOfRoundsStandOnItsPage(t *testing.T) {
	r := newRig(t, 1)
	tester, walk := newID(), newID()
	r.append(store.Draft{Kind: "instrument.set", Log: "org", Subject: tester, Body: set{"set": set{"name": "Tester 4"}}},
		store.Draft{Kind: "instrument.proved", Log: "org", Subject: tester, Body: set{"on": "2026-11-30", "works": true, "where": "Workshop bench"}},
		store.Draft{Kind: "round.closed", Log: r.site, Subject: walk, By: r.crew.ID, Body: set{"day": "2026-12-01", "done": 1, "instrument": tester,
			"proved": set{"first": set{"at": "2026-12-01T13:00:00Z", "works": true}, "last": set{"at": "2026-12-01T16:00:00Z", "works": false}}}})
	page := r.open(r.signIn(r.manager), "/instruments/"+tester+"/past").body
	for _, want := range []string{"Workshop bench", "/rounds/" + walk, "before the first test of a round", "after the last test of a round", "Crew 1"} {
		if !strings.Contains(page, want) {
			t.Errorf("the instrument's page does not say %q", want)
		}
	}
	auditor := r.person("Auditor 2", "auditor", newID())
	if page := r.open(r.signIn(auditor), "/instruments/"+tester+"/past").body; strings.Contains(page, walk) {
		t.Error("a proof made at a site is shown to somebody who has not the site")
	}
}
