package server

import (
	"html"
	"net/http"
	"strings"
	"testing"

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
