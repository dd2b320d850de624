package server

import (
	"strings"
	"testing"

	"tripwell/forms"
	"tripwell/store"
)

// dueOf gives the date of a device's task, its state and its cause, on the site's own day.
func (r *rig) dueOf(device, task string) (due store.Due) {
	r.t.Helper()
	must(r.t, r.store.View(store.Scope{All: true, Role: "manager"}, func(v *store.View) error {
		site, err := v.Site(r.site)
		if err != nil {
			return err
		}
		d, err := v.Device(device, forms.DayOf(r.store.Now().In(site.Location())))
		for _, one := range d.Due {
			if one.Task == task {
				due = one
			}
		}
		return err
	}))
	return due
}

func TestPlanForm_ShowsTheDatesItMovesBeforeTheyMove(t *testing.T) {
	r := newRig(t, 3)
	client := r.signIn(r.manager)
	device := r.devicesOf(r.site)[0]
	was := r.dueOf(device.ID, "instrument")
	path := "/plans/instrument-yearly/edit"
	f := setAll(r.openForm(client, path), "count", forms.Calendar, "reason", "The wards ask for it")
	if said := r.wantBack(client, path, f, "count"); !strings.Contains(said, "2 January") || !strings.Contains(said, "179 days") {
		t.Errorf("calendar for not-to-exceed: got %q, want the reason", said)
	}
	setAll(f, "count", forms.Rolling, "every_n", "7", "every_unit", "D")
	shown := r.submit(client, path, f.Encode())
	checkPage(t, []byte(shown.body), "normal")
	if shown.status != 200 || !strings.Contains(shown.body, "3 dates come earlier.") {
		t.Fatalf("preview: got %d %s, want 3 dates that come earlier", shown.status, shown.body)
	}
	if now := r.dueOf(device.ID, "instrument"); now.Due != was.Due {
		t.Fatalf("before accepting: the date moved from %s to %s", was.Due, now.Due)
	}
	r.wantTo(client, "/revisions", fieldsOf(t, shown.body))
	if now := r.dueOf(device.ID, "instrument"); now.Due >= was.Due {
		t.Errorf("after accepting: got %s, want earlier than %s", now.Due, was.Due)
	}
	page := r.open(client, "/plans/instrument-yearly").body
	if !strings.Contains(page, "The wards ask for it") || !strings.Contains(page, "at most 7 days apart") {
		t.Errorf("the plan's page shows neither the reason nor the interval: %s", page)
	}
	if res := r.submit(r.signIn(r.crew), "/plans", f.Encode()); res.status != 403 {
		t.Errorf("crew: got %d, want 403", res.status)
	}
}

func TestPlanForm_ANewPlanOfASite(t *testing.T) {
	r := newRig(t, 2)
	client := r.signIn(r.manager)
	f := setAll(r.openForm(client, "/plans/new"), "id", "weekly-here", "name", "Weekly in this house", "site", r.site, "every_n", "1", "every_unit", "W", "reason", "Wet rooms", "marks", "North, white\nSouth, green", "marks_every", "3")
	f["kinds"] = []string{"gfci-receptacle"}
	shown := r.submit(client, "/plans", f.Encode())
	if shown.status != 200 {
		t.Fatalf("preview: got %d %s", shown.status, shown.body)
	}
	r.wantTo(client, "/revisions", fieldsOf(t, shown.body))
	if due := r.dueOf(r.devicesOf(r.site)[0].ID, "button"); due.Plan != "weekly-here" {
		t.Errorf("got the date of %q, want the site's own plan", due.Plan)
	}
	if legend := r.open(client, "/plans/weekly-here/marks?site="+r.site); legend.status != 200 || !strings.Contains(legend.body, "North") || !strings.Contains(legend.body, "no mark") {
		t.Errorf("legend: got %d %s, want both marks and the devices without one", legend.status, legend.body)
	}
	if back := r.wantBack(client, "/plans", f, "id"); !strings.Contains(back, "there already") {
		t.Errorf("the same short name again: got %q", back)
	}
}

func TestAsked_StormAndPause(t *testing.T) {
	r := newRig(t, 3)
	client, devices := r.signIn(r.manager), r.devicesOf(r.site)
	var today forms.Day
	must(t, r.store.View(store.Scope{All: true, Role: "manager"}, func(v *store.View) error {
		s, err := v.Site(r.site)
		today = forms.DayOf(r.store.Now().In(s.Location()))
		return err
	}))
	site := "/sites/" + r.site
	r.wantTo(client, site+"/occasion", setAll(r.openForm(client, site+"/occasion"), "text", "The main switch tripped"))
	for _, d := range devices {
		if due := r.dueOf(d.ID, "instrument"); due.Due != today || due.Cause != forms.Storm {
			t.Errorf("%s: got %+v, want due today after the storm", d.ID, due)
		}
	}
	f := setAll(r.openForm(client, site+"/pause?device="+devices[0].ID), "until", (today - 1).String(), "reason", "ward closed")
	r.wantBack(client, site+"/pause", f, "until")
	r.wantTo(client, site+"/pause", setAll(f, "until", (today+30).String()))
	if due := r.dueOf(devices[0].ID, "instrument"); due.State != forms.Paused || due.Paused.Reason != "ward closed" || due.Due != today+31 {
		t.Errorf("paused: got %+v", due)
	}
	if due := r.dueOf(devices[1].ID, "instrument"); due.State == forms.Paused {
		t.Errorf("another device is paused too: %+v", due)
	}
	page := r.open(client, site+"/asked").body
	if !strings.Contains(page, "ward closed") || !strings.Contains(page, "The main switch tripped") || !strings.Contains(page, "lightning storm") {
		t.Errorf("the page shows neither: %s", page)
	}
	_, href, linked := strings.Cut(page, "/pause?pause=")
	if !linked {
		t.Fatal("the pause has no link to change it by")
	}
	href = site + "/pause?pause=" + href[:strings.IndexByte(href, '"')]
	r.wantTo(client, site+"/pause", setAll(r.openForm(client, href), "until", (today-1).String()))
	if due := r.dueOf(devices[0].ID, "instrument"); due.State == forms.Paused || due.Due != today {
		t.Errorf("after the pause was taken back: got %+v", due)
	}
}
