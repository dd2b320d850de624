package server

import (
	"encoding/json"
	"html"
	"net/http"
	"strings"
	"testing"

	"tripwell/store"
	"tripwell/store/record"
)

// What did not come to stand in the book is shown with its sentence and its exact bytes, to managers.
func TestAside_ShowsWhatDoesNotStand(t *testing.T) {
	r := newRig(t, 1)
	h := r.handset(r.crew)
	named := func(maker string) string {
		e := h.record("device.registered", r.site, newID(), set{"set": set{"kind": "cord-set", "make": maker}})
		e.ID, e.Subject = record.NamedID(r.store.Org(), "KILN-LANE", "reel 4"), r.devices[0]
		return e.bytes(t)
	}
	malformed := `{"id":"<b>`
	h.n.Add(2) // two records that stay on the phone
	receipts := h.push(malformed, named("Maker"), named("Other maker"))
	if receipts[0].State != "refused" || receipts[1].State != "stored" || receipts[2].State != "already" {
		t.Fatalf("got %+v", receipts)
	}
	page := r.open(r.signIn(r.manager), "/kept-aside")
	for _, want := range []string{"2 records kept aside.", receipts[0].Text, malformed, "Maker", "Other maker", "1–2", h.installation} {
		if page.status != http.StatusOK || !strings.Contains(html.UnescapeString(page.body), want) {
			t.Errorf("got %d, %q is not shown", page.status, want)
		}
	}
	if got := r.open(r.signIn(r.crew), "/kept-aside"); got.status != http.StatusForbidden {
		t.Errorf("crew got %d, want %d", got.status, http.StatusForbidden)
	}
}

// A refused record is let in by a manager of its site with a reason: its exact bytes stand in the log and count, once.
func TestAside_AManagerTakesARefusedRecordIn(t *testing.T) {
	r := newRig(t, 1)
	h := r.handset(r.crew)
	e := h.entry(r.devices[0], 4.5)
	e.By = r.auditor.ID // never signed in on that phone
	bytes := e.bytes(t)
	refused := h.push(bytes, `{"id":"<b>`)
	if refused[0].Code != "not_permitted" {
		t.Fatalf("got %+v, want a refusal", refused)
	}
	office, page := r.signIn(r.manager), ""
	if page = r.open(office, "/kept-aside").body; strings.Count(page, `name="sha256"`) != 1 {
		t.Fatalf("got %d forms, want one: bytes that are no record cannot stand in a book", strings.Count(page, `name="sha256"`))
	}
	form := fieldsOf(t, page)
	if res := r.submit(office, "/kept-aside", form.Encode()); res.status != http.StatusUnprocessableEntity || !strings.Contains(res.body, "Say why this record") {
		t.Errorf("without a reason: got %d", res.status)
	}
	form.Set("reason", "Typed on Crew 1's phone")
	if res := r.submit(r.signIn(r.crew), "/kept-aside", form.Encode()); res.status != http.StatusForbidden {
		t.Errorf("crew: got %d, want %d", res.status, http.StatusForbidden)
	}
	elsewhere := newID()
	r.append(store.Draft{Kind: "site.registered", Log: elsewhere, Subject: elsewhere, Body: set{"set": set{"code": "OTHER", "name": "Other", "zone": "UTC", "standard": "NEC"}}})
	other := r.person("Manager 2", "manager", elsewhere)
	if res := r.submit(r.signIn(other), "/kept-aside", form.Encode()); !strings.Contains(res.body, "Only a manager of the site") {
		t.Errorf("a manager of another site: got %d", res.status)
	}
	for range 2 { // pressed twice
		if res := r.submit(office, "/kept-aside", form.Encode()); res.status != http.StatusSeeOther {
			t.Fatalf("got %d %.400s", res.status, res.body)
		}
	}
	if got := r.entries(); len(got) != 1 || got[0].ID != e.ID {
		t.Fatalf("got %+v in the log, want the record once", got)
	}
	kinds := map[string]int{}
	for _, p := range h.pullAll(r.site) {
		var env struct{ Kind, Subject, By string }
		must(t, json.Unmarshal([]byte(p.Record), &env))
		kinds[env.Kind]++
		if p.Record == bytes {
			kinds["the exact bytes"]++
		}
		if env.Kind == "record.admitted" && (env.Subject != e.ID || env.By != r.manager.ID) {
			t.Errorf("got %s, want the record's id and who let it in", p.Record)
		}
	}
	if kinds["the exact bytes"] != 1 || kinds["record.admitted"] != 1 {
		t.Errorf("got %v", kinds)
	}
	if got := h.push(bytes); got[0].State != "already" {
		t.Errorf("sent again: got %+v, want already", got)
	}
	if page := r.open(office, "/kept-aside").body; strings.Contains(page, `name="sha256"`) || !strings.Contains(page, "/records/"+e.ID) {
		t.Error("the page does not say that the record stands in the book")
	}
}
