package server

import (
	"encoding/json"
	"fmt"
	"html"
	"net/http"
	"path/filepath"
	"reflect"
	"slices"
	"strings"
	"testing"
	"time"

	"tripwell/forms"
	"tripwell/static/chromium"
	"tripwell/store"
)

// alongRow is what a phone has of a site, without what differs from phone to phone: its cursors and when it was taken.
type alongRow struct {
	Snapshot struct {
		Places, Devices []map[string]any
	}
}

// Two phones move and rename one device without a line, a third puts its label elsewhere: all three and the server come to the same
// state, both tests of the device are kept, and the manager sees which values lost.
func TestTogether_TwoPhonesChangeOneDeviceAndAThirdItsLabel(t *testing.T) {
	chromium.Need(t)
	t.Parallel() // mostly waiting for pages
	r := newRig(t, 8)
	device, other := r.devices[1], r.devices[5]
	tag := r.label(device)
	w := newWire(t, strings.TrimPrefix(r.url, "http://"))
	phones := make([]*handheld, 3)
	for i := range phones {
		phones[i] = openHandheld(t, "http://"+w.addr, chromium.Profile(filepath.Join(t.TempDir(), fmt.Sprint("phone-", i))))
		phones[i].signIn(r, r.crew)
		phones[i].ready()
	}
	w.cut()
	for i, spot := range []string{"North wall", "South wall"} {
		p := phones[i]
		p.fill("#/move/"+r.devices[3], map[string]string{"name": "By the " + strings.ToLower(spot)})
		p.Tap("button", "The spot is called this")
		p.Sees("saved on this phone")
		p.fill("#/move/"+device, map[string]string{"name": spot, "room": "Room 9"})
		p.Tap("button", "The device sits here now")
		p.Sees("saved on this phone")
		p.Until("the test", `(location.hash = "#/test/`+device+`/button", document.querySelector(".one-tap"))`)
		p.testNext()
	}
	third := phones[2]
	third.Until("the label's page", `(location.hash = "#/label/`+other+`/`+tag+`", document.querySelector(".choose button"))`)
	third.Tap("button", "Move the label here")
	third.Sees("saved on this phone")

	w.mend()
	for _, p := range phones {
		p.sendAll()
	}
	if got := r.entries(); len(got) != 2 || got[0].Subject != device || got[1].Subject != device || got[0].From == got[1].From {
		t.Fatalf("got %+v, want a test of each phone", got)
	}
	for i, p := range phones { // everything is sent; a phone opened again takes what the others did
		p.Reload()
		eventually(t, fmt.Sprintf("phone %d to agree with the server", i+1), func() bool { return reflect.DeepEqual(p.copyOf(), r.snapshot()) })
	}
	office := r.signIn(r.manager)
	for device, either := range map[string][]string{ // which change is the later one is a matter of half a second of the phones' clocks
		device:       {"Place: South wall stands; North wall was given by Crew 1", "Place: North wall stands; South wall was given by Crew 1"},
		r.devices[3]: {"Spot: By the south wall stands; By the north wall was given by Crew 1", "Spot: By the north wall stands; By the south wall was given by Crew 1"},
		other:        {strings.ReplaceAll(showTag(tag), "-", hyphen)},
	} {
		page := r.open(office, "/devices/"+device)
		said := html.UnescapeString(page.body)
		if page.status != http.StatusOK || !slices.ContainsFunc(either, func(want string) bool { return strings.Contains(said, want) }) {
			t.Errorf("got %d, the page of %s says none of %q", page.status, device, either)
		}
	}
	// Saving the edit page settles what the page shows.
	r.wantTo(office, "/devices/"+device+"/edit", r.openForm(office, "/devices/"+device+"/edit"))
	if page := r.open(office, "/devices/"+device); strings.Contains(page.body, "without knowing of each other") {
		t.Errorf("the page still tells of two changes after it was saved")
	}
}

// fill opens a page of work and types into the fields of its place.
func (p *handheld) fill(hash string, fields map[string]string) {
	p.T.Helper()
	p.Until("the page "+hash, `(location.hash = `+chromium.Quote(hash)+`, document.querySelector("#place-name"))`)
	for field, text := range fields {
		p.Until("the field "+field, fmt.Sprintf(`((e) => e && (e.value = %q, e.dispatchEvent(new Event("input", { bubbles: true })), true))(document.querySelector("#place-%s"))`, text, field))
		p.Until("the draft of "+field, fmt.Sprintf(`document.querySelector("#place-%s")?.value === %q`, field, text))
	}
}

// copyOf is the phone's copy of its one site.
func (p *handheld) copyOf() alongRow {
	p.T.Helper()
	var rows []alongRow
	p.Rows("along", "sites", &rows)
	if len(rows) != 1 {
		p.Fail("got %d sites on the phone, want 1", len(rows))
	}
	return rows[0]
}

// snapshot is what the server gives of the site now.
func (r *rig) snapshot() (row alongRow) {
	r.t.Helper()
	must(r.t, r.store.View(r.manager.Scope(), func(v *store.View) error {
		snap, err := v.Snapshot(r.site, forms.DayOf(time.Now()))
		if err != nil {
			return err
		}
		raw, err := json.Marshal(map[string]any{"snapshot": snap})
		if err != nil {
			return err
		}
		return json.Unmarshal(raw, &row)
	}))
	return row
}
