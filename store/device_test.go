package store

import (
	"errors"
	"fmt"
	"strings"
	"testing"
	"time"

	"tripwell/forms"
)

// look runs fn over the store as a scope sees it.
func (r *rig) look(scope Scope, fn func(v *View)) {
	r.Helper()
	if err := r.View(scope, func(v *View) error { fn(v); return nil }); err != nil {
		r.Fatal(err)
	}
}

// device registers a device and gives its id.
func (r *rig) device(site string, fields map[string]any) string {
	r.Helper()
	r.pass(time.Millisecond)
	id := newID(r.clock())
	r.append(Draft{Kind: "device.registered", Log: site, Subject: id, By: r.manager.ID, Body: map[string]any{"set": fields}})
	return id
}

func (r *rig) put(kind, log, subject string, body any) string {
	r.Helper()
	r.pass(time.Millisecond)
	id := newID(r.clock())
	r.append(Draft{ID: id, Kind: kind, Log: log, Subject: subject, By: r.manager.ID, Body: body})
	return id
}

// button is a button entry with its two answers.
func button(trips, resets string) map[string]any {
	return map[string]any{"form": "gfci-receptacle/button", "given": map[string]any{"kind": "gfci-receptacle"}, "source": "phone",
		"readings": map[string]any{"condition": "sound", "found": "on", "button_trips": trips, "button_resets": resets, "load_dead_when_tripped": "yes", "restored": "yes"}}
}

func (r *rig) deviceOn(id string, on forms.Day) (d Device) {
	r.Helper()
	r.look(all, func(v *View) {
		var err error
		if d, err = v.Device(id, on); err != nil {
			r.Fatal(err)
		}
	})
	return d
}

func (r *rig) sums(site string, on forms.Day) (s SiteSums) {
	r.Helper()
	r.look(all, func(v *View) {
		var err error
		if s, err = v.SiteSums(site, on); err != nil {
			r.Fatal(err)
		}
	})
	return s
}

func dueOf(d Device, task string) string {
	for _, due := range d.Due {
		if due.Task == task {
			return due.Due.String() + " " + due.State
		}
	}
	return "none"
}

func TestDevice_DatesFollowItsTests(t *testing.T) {
	r := newRig(t)
	site := r.site("ELM")
	id := r.device(site, map[string]any{"kind": "gfci-receptacle", "installed": "2021-03-01"})
	today := forms.DayOf(r.clock())
	check := func(when, task, want string) {
		t.Helper()
		if got := dueOf(r.deviceOn(id, today), task); got != want {
			t.Errorf("%s: %s is %s, want %s", when, task, got, want)
		}
	}
	check("registered 1 December 2026", "button", "2026-12-31 never-tested")
	check("registered 1 December 2026", "instrument", "2027-12-01 never-tested")
	check("registered 1 December 2026", "receptacle", "none")

	r.put("entry.made", site, id, button("yes", "yes"))
	check("pressed in December", "button", "2027-01-31 upcoming")
	failed := r.put("entry.made", site, id, button("no", "no"))
	if s := r.sums(site, today); s.Failed != 1 {
		t.Errorf("after a fail of %s: %d failed", id, s.Failed)
	}
	r.put("entry.withdrawn", site, failed, map[string]any{"entry": failed, "reason": "another outlet"})
	if s := r.sums(site, today); s.Failed != 0 {
		t.Errorf("the fail is withdrawn, yet %d failed", s.Failed)
	}
	if s := r.sums(site, forms.Date(2027, time.February, 1)); s.Overdue != 1 || s.Devices != 1 || s.NextDay != forms.Date(2027, time.January, 31) {
		t.Errorf("on 1 February: %+v", s)
	}
	r.put("device.retired", site, id, map[string]any{"reason": "removed", "on": "2026-12-01"})
	if s := r.sums(site, forms.Date(2028, time.February, 1)); s.Overdue != 0 || s.Devices != 0 || s.NextDay != forms.NoDay {
		t.Errorf("retired: %+v", s)
	}
}

func TestDevice_UntestedAndIncompleteMoveNoDate(t *testing.T) {
	r := newRig(t)
	site := r.site("ELM")
	id := r.device(site, map[string]any{"kind": "gfci-receptacle"})
	dead := button("yes", "yes")
	dead["readings"] = map[string]any{"condition": "sound", "found": "no-power", "button_trips": map[string]any{"missing": "circuit-dead"}, "button_resets": map[string]any{"missing": "circuit-dead"}}
	half := button("yes", "yes")
	half["readings"] = map[string]any{"condition": "sound", "found": "on"}
	for _, body := range []map[string]any{dead, half} {
		r.put("entry.made", site, id, body)
		if got := dueOf(r.deviceOn(id, forms.DayOf(r.clock())), "button"); got != "2026-12-31 never-tested" {
			t.Errorf("after %v: button is %s", body["readings"], got)
		}
	}
	if last := r.deviceOn(id, forms.DayOf(r.clock())).Last["button"]; last.Result != forms.Incomplete {
		t.Errorf("the last test shown is %+v", last)
	}
}

func TestDevice_ReplacementTakesPlaceAndTag(t *testing.T) {
	r := newRig(t)
	site := r.site("ELM")
	place := newID(r.clock())
	r.put("place.registered", site, place, map[string]any{"set": map[string]any{"room": "Kitchen", "name": "Pantry"}})
	old := r.device(site, map[string]any{"kind": "gfci-receptacle", "place": place})
	tags, err := r.MintTags(t.Context(), r.manager.ID, 1)
	if err != nil {
		t.Fatal(err)
	}
	r.put("tag.bound", site, place, map[string]any{"tag": tags[0]})
	r.pass(time.Hour)
	next := r.device(site, map[string]any{"kind": "gfci-receptacle"})
	r.put("device.replaced", site, old, map[string]any{"with": next, "reason": "end of life", "on": "2026-12-01"})

	on := forms.DayOf(r.clock())
	d := r.deviceOn(next, on)
	if d.Place.Name != "Pantry" || d.Tag != tags[0] || len(d.Earlier) != 1 || d.Earlier[0].ID != old {
		t.Errorf("the new device: place %q, tag %q, earlier %v", d.Place.Name, d.Tag, d.Earlier)
	}
	if d := r.deviceOn(old, on); !d.Retired || d.With != next || d.Reason != "end of life" || len(d.Due) != 0 {
		t.Errorf("the old device: %+v", d)
	}
	r.look(all, func(v *View) {
		holders, err := v.Tag(strings.ToLower(tags[0][:3]) + "-" + tags[0][3:])
		if err != nil || len(holders) != 1 || holders[0].Device != next || holders[0].Subject != place {
			t.Errorf("tag: %v %v", holders, err)
		}
	})
	other := newID(r.clock())
	r.put("place.registered", site, other, map[string]any{"set": map[string]any{"name": "Hall"}})
	r.put("tag.bound", site, other, map[string]any{"tag": tags[0]})
	if clash := r.deviceOn(next, on).TagClash; len(clash) != 1 || clash[0] != other {
		t.Errorf("two places hold the tag: clash %v, want %s", clash, other)
	}
	r.put("tag.freed", site, other, map[string]any{"tag": tags[0]})
	if clash := r.deviceOn(next, on).TagClash; len(clash) != 0 {
		t.Errorf("freed again: clash %v", clash)
	}
}

func TestView_OutsideTheScopeIsNotFound(t *testing.T) {
	r := newRig(t)
	mine, other := r.site("ELM"), r.site("OAK")
	id := r.device(other, map[string]any{"kind": "gfci-receptacle"})
	entry := r.put("entry.made", other, id, button("yes", "yes"))
	on := forms.DayOf(r.clock())
	r.look(Scope{Person: r.manager.ID, Role: "crew", Sites: []string{mine}}, func(v *View) {
		first := func(err error, ok bool) error {
			if ok && err == nil {
				return nil
			}
			return err
		}
		refusals := map[string]error{}
		_, refusals["Site"] = v.Site(other)
		_, refusals["Site by code"] = v.Site("OAK")
		_, refusals["SiteSums"] = v.SiteSums(other, on)
		_, refusals["Device"] = v.Device(id, on)
		_, refusals["Entries"] = v.Entries(id)
		_, refusals["Entry"] = v.Entry(entry)
		_, refusals["Places"] = v.Places(other)
		_, refusals["Snapshot"] = v.Snapshot(other, on)
		_, refusals["Tallies"] = v.Tallies(other)
		_, refusals["SitePlans"] = v.SitePlans(other)
		_, refusals["SiteLimitSets"] = v.SiteLimitSets(other)
		for _, err := range v.Devices(other) {
			refusals["Devices"] = first(err, true)
		}
		for _, err := range v.SiteEntries(other, forms.NoDay, forms.NoDay) {
			refusals["SiteEntries"] = first(err, true)
		}
		for _, err := range v.Due(DueAsk{On: on, Until: forms.NoDay, Site: other}) {
			refusals["Due"] = first(err, true)
		}
		for _, name := range []string{"Site", "Site by code", "SiteSums", "Device", "Entries", "Entry", "Places", "Snapshot", "Tallies", "SitePlans", "SiteLimitSets", "Devices", "SiteEntries", "Due"} {
			var e *Error
			if !errors.As(refusals[name], &e) || e.Code != "not_found" {
				t.Errorf("%s: got %v, want not_found", name, refusals[name])
			}
		}
		sites, err := v.Sites()
		if err != nil || len(sites) != 1 || sites[0].ID != mine {
			t.Errorf("sites: %v %v", sites, err)
		}
		for row, err := range v.Due(DueAsk{On: on, Until: forms.NoDay}) {
			t.Errorf("a date of a site outside the scope: %v %v", row, err)
		}
	})
}

func TestDevices_WalkingOrder(t *testing.T) {
	r := newRig(t)
	site := r.site("ELM")
	var want []string
	for i, p := range []map[string]any{
		{"building": "A", "floor": "2", "room": "Room 2", "name": "Sink", "order": 1},
		{"building": "A", "floor": "2", "room": "Room 2", "name": "Door", "order": 2},
		{"building": "A", "floor": "2", "room": "Room 10", "name": "Door"},
		{"building": "A", "floor": "10", "room": "Room 1", "name": "Door"},
		{"building": "B", "floor": "1", "room": "Room 1", "name": "Door"},
	} {
		place := newID(r.clock().Add(time.Duration(100-i) * time.Second))
		r.put("place.registered", site, place, map[string]any{"set": p})
		want = append(want, r.device(site, map[string]any{"kind": "gfci-receptacle", "place": place}))
	}
	want = append(want, r.device(site, map[string]any{"kind": "portable-gfci"}))
	var got []string
	r.look(all, func(v *View) {
		for row, err := range v.Devices(site) {
			if err != nil {
				t.Fatal(err)
			}
			got = append(got, row.ID)
		}
	})
	if fmt.Sprint(got) != fmt.Sprint(want) {
		t.Errorf("got %v, want %v", got, want)
	}
}

func TestSite_ListsConcurrentLosers(t *testing.T) {
	r := newRig(t)
	site := r.site("ELM")
	id := r.device(site, map[string]any{"kind": "gfci-receptacle"})
	a, b := r.phone(r.manager), r.phone(r.manager)
	first := a.make("device.set", site, id, map[string]any{"set": map[string]any{"make": "North"}, "seen": "0000000000000001"})
	r.pass(time.Second)
	second := b.make("device.set", site, id, map[string]any{"set": map[string]any{"make": "South"}, "seen": "0000000000000001"})
	b.push(second)
	a.push(first)
	d := r.deviceOn(id, forms.DayOf(r.clock()))
	if d.Make != "South" || len(d.Conflicts) != 1 || d.Conflicts[0].Value != "North" || d.Conflicts[0].Winner != "South" {
		t.Errorf("make %q, conflicts %+v", d.Make, d.Conflicts)
	}
}
