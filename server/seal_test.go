package server

import (
	"context"
	"net/http"
	"strings"
	"testing"

	"tripwell/static/chromium"
	"tripwell/store"
)

// correctLast corrects the newest test of the site.
func (r *rig) correctLast() (entry string) {
	r.t.Helper()
	list := r.entries()
	entry = list[len(list)-1].ID
	r.append(store.Draft{Kind: "entry.corrected", Log: r.site, Subject: entry, Body: set{"entry": entry, "reason": "Said too much", "readings": entryBody(5)["readings"]}})
	return entry
}

func (r *rig) seal(entry, reason string) {
	r.t.Helper()
	_, err := r.store.Seal(context.Background(), ownerScope, entry, reason)
	must(r.t, err)
}

// TestSeal_ThePhoneThatMadeItDropsItsCopyToo seals a test after the phone that made it has sent it with its photo.
func TestSeal_ThePhoneThatMadeItDropsItsCopyToo(t *testing.T) {
	chromium.Need(t)
	r := newRig(t, 4)
	p := openHandheld(t, r.url)
	p.signIn(r, r.crew)
	p.ready()
	p.visit("/field#/device/" + r.devices[0])
	p.Tap("a", "Button test")
	p.testNext(chromium.Shot(t, 3))
	p.sendAll()
	if len(p.tray()) != 1 || len(p.photos()) != 1 {
		t.Fatalf("the phone keeps %v and %v", p.tray(), p.photos())
	}
	r.seal(r.correctLast(), "A face in the photo")
	p.Reload() // the exchange runs when the client starts
	eventually(t, "nothing of it on the phone", func() bool { return len(p.tray()) == 0 && len(p.photos()) == 0 })
}

func TestSeal_PagesSayWhyByWhomAndWhen(t *testing.T) {
	r := newRig(t, 3)
	r.append(store.Draft{Kind: "entry.made", Log: r.site, Subject: r.devices[0], Body: entryBody(5)})
	entry := r.entries()[0].ID
	b := r.signIn(r.manager)
	if page := r.open(b, "/records/"+entry+"/seal"); !strings.Contains(page.body, "Correct this test first") || strings.Contains(page.body, "tripwell seal") {
		t.Errorf("a test nobody corrected: %d %s", page.status, page.body)
	}
	r.correctLast()
	if page := r.open(b, "/records/"+entry+"/seal"); !strings.Contains(page.body, "tripwell seal "+entry) {
		t.Errorf("corrected: %s", page.body)
	}
	r.seal(entry, "The note named a tenant")
	for _, path := range []string{"/entries/" + entry, "/devices/" + r.devices[0], "/records/" + entry + "/seal"} {
		if page := r.open(b, path); !strings.Contains(page.body, "The note named a tenant") || !strings.Contains(page.body, "the owner of the store") {
			t.Errorf("%s does not say why and by whom: %d %s", path, page.status, page.body)
		}
	}
	if raw := r.open(b, "/records/"+entry).body; !strings.HasPrefix(raw, `{"sealed":"`) || strings.Contains(raw, "readings") {
		t.Errorf("the record reads %s", raw)
	}
	if page := r.open(r.signIn(r.crew), "/records/"+entry+"/seal"); page.status != http.StatusForbidden {
		t.Errorf("crew: got %d, want 403", page.status)
	}
}

// What somebody said of a defect is sealed too, and its line stays with why.
func TestSeal_OfADefect(t *testing.T) {
	r := newRig(t, 1)
	opened := newID()
	r.append(store.Draft{ID: opened, Kind: "defect.opened", Log: r.site, Subject: newID(), Body: set{"device": r.devices[0], "text": "Quillfeather keeps a heater on it", "severity": "repair"}})
	r.seal(opened, "It named a tenant")
	var id string
	must(t, r.store.View(ownerScope, func(v *store.View) error {
		list, err := v.Defects(store.DefectAsk{Device: r.devices[0]})
		if err == nil && len(list) == 1 {
			id = list[0].ID
		}
		return err
	}))
	if page := r.open(r.signIn(r.manager), "/defects/"+id); page.status != http.StatusOK || !strings.Contains(page.body, "It named a tenant") || strings.Contains(page.body, "Quillfeather") {
		t.Errorf("%d %s", page.status, page.body)
	}
}
