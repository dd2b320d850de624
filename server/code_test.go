package server

import (
	"net/http"
	"net/url"
	"regexp"
	"testing"
)

// A manager makes a code, a phone types it; nobody can try codes until one fits.
func TestCode_IsTypedOnceAndGuessingStops(t *testing.T) {
	r := newRig(t, 0)
	office := r.signIn(r.manager)
	type_ := func(b *http.Client, code string) answer {
		return r.submit(b, "/in", url.Values{"link": {code}, "next": {"/field"}}.Encode())
	}
	page := r.submit(office, "/people/"+r.crew.ID+"/code", "")
	m := regexp.MustCompile(`<p class="code">([0-9A-Z]{4}-[0-9A-Z]{4})</p>`).FindStringSubmatch(page.body)
	if m == nil {
		t.Fatalf("got %d, want a page with the code", page.status)
	}
	if res := type_(browser(t), m[1]); res.status != http.StatusSeeOther || res.header.Get("Location") != "/field" || res.header.Get("Set-Cookie") == "" {
		t.Errorf("typed: got %d to %q, want a session and /field", res.status, res.header.Get("Location"))
	}
	if res := type_(browser(t), m[1]); res.status != http.StatusBadRequest || res.header.Get("Set-Cookie") != "" {
		t.Errorf("typed again: got %d, want the page again and no session", res.status)
	}
	good, err := r.store.NewCode(r.crew.ID)
	must(t, err)
	var last answer
	for range 15 {
		last = type_(browser(t), "ZZZZ-ZZZZ")
	}
	if last.status != http.StatusTooManyRequests || last.header.Get("Retry-After") == "" {
		t.Errorf("after 15 wrong codes: got %d, want 429 with Retry-After", last.status)
	}
	if res := type_(browser(t), good); res.status != http.StatusTooManyRequests {
		t.Errorf("a good code while wrong ones pour in: got %d, want 429, else guessing would pay", res.status)
	}
	r.signIn(r.crew) // links are too long to guess and go on
}
