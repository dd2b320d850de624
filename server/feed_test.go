package server

import (
	"net/http"
	"strings"
	"testing"

	"tripwell/store"
)

var feedAddress = func(r *rig, page string) string {
	_, rest, found := strings.Cut(page, "/calendar/")
	if !found {
		r.t.Fatalf("no calendar address on the page: %s", page)
	}
	token, _, _ := strings.Cut(rest, ".ics")
	return "/calendar/" + token + ".ics"
}

func TestFeed_SecretRevocableAndWithinTheGrantsOfNow(t *testing.T) {
	r := newRig(t, 2)
	crew, reader := r.signIn(r.crew), browser(t)
	page := r.submit(crew, "/reminders/calendar", "")
	at := feedAddress(r, page.body)
	if strings.Contains(r.open(crew, "/reminders").body, at) {
		t.Error("the address is shown a second time")
	}
	got := r.open(reader, at) // no cookie
	if got.status != http.StatusOK || !strings.HasPrefix(got.header.Get("Content-Type"), "text/calendar") || !strings.Contains(got.body, "Kiln Lane") || strings.Contains(got.body, "Crew 1") {
		t.Fatalf("got %d %s", got.status, got.body)
	}
	again := func(name, value string) int {
		req, err := http.NewRequest(http.MethodGet, r.url+at, nil)
		must(t, err)
		req.Header.Set(name, value)
		return r.do(reader, req).status
	}
	if got := again("If-None-Match", got.header.Get("ETag")); got != http.StatusNotModified {
		t.Errorf("the same again by ETag: got %d, want 304", got)
	}
	if got := again("If-Modified-Since", got.header.Get("Last-Modified")); got != http.StatusNotModified {
		t.Errorf("the same again by date: got %d, want 304", got)
	}
	if got := again("If-None-Match", `"something else"`); got != http.StatusOK {
		t.Errorf("other bytes: got %d, want 200", got)
	}

	other := newID()
	r.append(store.Draft{Kind: "site.registered", Log: other, Subject: other, Body: set{"set": set{"code": "ELM", "name": "Elm House", "zone": "UTC", "standard": "NEC"}}})
	r.crew.Sites = []string{other}
	_, err := r.store.PutPerson(t.Context(), r.manager.ID, r.crew)
	must(t, err)
	if body := r.open(reader, at).body; strings.Contains(body, "Kiln Lane") {
		t.Error("the feed shows a site that was taken from its person")
	}
	r.crew.Active = false
	_, err = r.store.PutPerson(t.Context(), r.manager.ID, r.crew)
	must(t, err)
	if got := r.open(reader, at).status; got != http.StatusNotFound {
		t.Errorf("a person who may not sign in: got %d, want 404", got)
	}
	r.crew.Active, r.crew.Sites = true, []string{r.site}
	_, err = r.store.PutPerson(t.Context(), r.manager.ID, r.crew)
	must(t, err)
	crew = r.signIn(r.crew)
	newer := feedAddress(r, r.submit(crew, "/reminders/calendar", "").body)
	if old, now := r.open(reader, at).status, r.open(reader, newer).status; old != http.StatusNotFound || now != http.StatusOK {
		t.Errorf("a new address: the old one gives %d, the new one %d", old, now)
	}
	r.submit(crew, "/reminders/calendar/revoke", "")
	if got := r.open(reader, newer).status; got != http.StatusNotFound {
		t.Errorf("revoked: got %d, want 404", got)
	}
	if got := r.open(reader, "/calendar/guessed.ics").status; got != http.StatusNotFound {
		t.Errorf("guessed: got %d, want 404", got)
	}
}
