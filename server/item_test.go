package server

import (
	"net/http"
	"strings"
	"testing"

	"tripwell/forms"
	"tripwell/store"
)

// depot registers a second site with one portable item under a tag.
func (r *rig) depot(tag string) (site, item string) {
	site, item = newID(), newID()
	r.append(store.Draft{Kind: "site.registered", Log: site, Subject: site, Body: set{"set": set{"code": "CRIB", "name": "Tool crib", "zone": "America/New_York", "standard": "NEC"}}},
		store.Draft{Kind: "device.registered", Log: site, Subject: item, Body: set{"set": set{"kind": "portable-gfci", "serial": "PG-7", "installed": "2025-03-01", "where": "Shelf 2"}}})
	if tag != "" {
		r.append(store.Draft{Kind: "tag.bound", Log: site, Subject: item, Body: set{"tag": tag}})
	}
	return site, item
}

func TestItem_OfficeSaysWhereItIs(t *testing.T) {
	r := newRig(t, 1)
	b := r.signIn(r.manager)
	_, item := r.depot("")
	page := r.open(b, "/devices/"+item).body
	wantIn(t, page, "Tool crib", "Shelf 2")
	edit := "/devices/" + item + "/edit"
	form := r.openForm(b, edit)
	if form.Get("name") != "Shelf 2" || form.Get("at_site") != "" || form.Has("building") {
		t.Fatalf("the form asks where it is, and no place of its own: %v", form)
	}
	if res := r.submit(b, edit, setAll(form, "at_site", newID()).Encode()); res.status != http.StatusUnprocessableEntity {
		t.Errorf("a site that is none: got %d", res.status)
	}
	r.wantTo(b, edit, setAll(r.openForm(b, edit), "at_site", r.site, "name", "Van"))
	wantIn(t, r.open(b, "/sites/CRIB").body, "1 item of this depot is elsewhere", "Kiln Lane", "Van", "said by")
	wantIn(t, r.open(b, "/sites/KILN-LANE").body, "1 item here from elsewhere", "belongs to Tool crib")
	wantIn(t, r.open(b, "/dates?within=all&site=CRIB").body, "now at Kiln Lane")
	crew := r.signIn(r.crew) // has the host alone
	if page := r.open(crew, "/sites/KILN-LANE").body; strings.Contains(page, "Tool crib") {
		t.Error("who does not see the depot reads of its items")
	}
	r.wantTo(b, edit, setAll(r.openForm(b, edit), "at_site", "", "name", "Shelf 3"))
	if page := r.open(b, "/sites/CRIB").body; strings.Contains(page, "is elsewhere") {
		t.Error("home again, it is still listed elsewhere")
	}
}

// A new item that travels gets no place, and its label names itself.
func TestItem_RegisteredInTheOffice(t *testing.T) {
	r := newRig(t, 1)
	b := r.signIn(r.manager)
	form := setAll(r.openForm(b, "/sites/KILN-LANE/devices/new"), "kind", forms.CordSet, "room", "Cellar", "name", "Hook 4", "mint", "yes")
	to := r.wantTo(b, "/sites/KILN-LANE/devices", form)
	must(t, r.store.View(store.Scope{All: true}, func(v *store.View) error {
		d, err := v.Device(strings.TrimPrefix(to, "/devices/"), 0)
		if d.Place.ID != "" || d.Where != "Cellar · Hook 4" || d.Tag == "" {
			t.Errorf("got place %q, where %q, tag %q", d.Place.ID, d.Where, d.Tag)
		}
		return err
	}))
}

// Met by somebody without the depot: taken in as a new item and tested at once. Its label names two things until a manager
// says that they are one; then the test counts at the depot.
func TestItem_TwoRecordsOfOne(t *testing.T) {
	r := newRig(t, 1)
	b := r.signIn(r.manager)
	const tag = "K7QM2P3"
	depot, item := r.depot(tag)
	h := r.handset(r.crew)
	met := newID()
	h.push(h.record("device.registered", r.site, met, set{"set": set{"kind": "portable-gfci"}}).bytes(t))
	h.push(h.record("tag.bound", r.site, met, set{"tag": tag}).bytes(t))
	test := entryBody(5)
	test["form"] = "portable-gfci/instrument"
	test["given"].(set)["kind"] = "portable-gfci"
	made := h.record("entry.made", r.site, met, test)
	h.push(made.bytes(t))

	page := r.open(b, "/devices/"+item).body
	wantIn(t, page, "is also bound elsewhere", "/devices/"+item+"/same")
	if page := r.open(r.signIn(r.crew), "/devices/"+met).body; strings.Contains(page, "/same") {
		t.Error("crew is offered what only a manager may do")
	}
	path := "/devices/" + item + "/same"
	form := r.openForm(b, path)
	if res := r.submit(b, path, setAll(form, "other", newID()).Encode()); res.status != http.StatusUnprocessableEntity {
		t.Errorf("another that is none: got %d", res.status)
	}
	form = setAll(r.openForm(b, path), "other", met)
	r.wantTo(b, path, form)
	must(t, r.store.View(store.Scope{All: true}, func(v *store.View) error {
		entries, err := v.Entries(item)
		if err != nil {
			return err
		}
		if len(entries) != 1 || !entries[0].Imported || entries[0].Log != depot || entries[0].Body.Readings["trip_current_ma"].Typed != "5" || entries[0].ReadBy != r.crew.ID {
			t.Errorf("the test at the depot: got %+v", entries)
		}
		d, err := v.Device(item, forms.DayOf(r.store.Now()))
		if err != nil {
			return err
		}
		if d.Fields["formerly"] != met || d.AtSite != r.site || len(d.TagClash) != 0 || d.Last["instrument"].Day == forms.NoDay {
			t.Errorf("the item: got %+v", d)
		}
		gone, err := v.Device(met, forms.DayOf(r.store.Now()))
		if !gone.Retired || gone.Tag != "" {
			t.Errorf("the other: got %+v", gone.DeviceRow)
		}
		return err
	}))
	wantIn(t, r.open(b, "/devices/"+item).body, "Registered before as", "Kiln Lane")
	if res := r.open(b, path); res.status == http.StatusOK {
		t.Error("done once, it is offered again")
	}
}
