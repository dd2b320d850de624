package server

import (
	"net/http"
	"net/url"
	"strings"
	"testing"

	"tripwell/store"
)

const words = "kettle orchard nine lamps"

// setPassword gives a person a password on their own page, in a browser that a link just signed in.
func (r *rig) setPassword(p store.Person, typed string) *http.Client {
	r.t.Helper()
	b := r.signIn(p)
	res := r.submit(b, "/me/password", url.Values{"password": {typed}, "again": {typed}}.Encode())
	if res.status != 303 || res.header.Get("Location") != "/me?said=password" {
		r.t.Fatalf("set password: got %d %s", res.status, res.body)
	}
	return b
}

func (r *rig) tryPassword(b *http.Client, name, typed string) answer {
	r.t.Helper()
	return r.submit(b, "/in/password", url.Values{"name": {name}, "password": {typed}}.Encode())
}

func TestPassword_SignsInAndNeverComesBack(t *testing.T) {
	r := newRig(t, 0)
	r.setPassword(r.crew, words)
	b := browser(t)
	if res := r.tryPassword(b, r.crew.Name, words); res.status != 303 || res.header.Get("Location") != "/field" {
		t.Fatalf("got %d to %q", res.status, res.header.Get("Location"))
	}
	if res := r.open(b, "/me"); res.status != 200 || !strings.Contains(res.body, "password") {
		t.Errorf("signed in: got %d", res.status)
	}
	wrong, nobody := r.tryPassword(browser(t), r.crew.Name, "not these words"), r.tryPassword(browser(t), "Nobody 9", "not these words")
	if wrong.status != 400 || nobody.status != 400 || strings.ReplaceAll(wrong.body, r.crew.Name, "Nobody 9") != nobody.body {
		t.Errorf("wrong password %d, unknown name %d: want the same page", wrong.status, nobody.status)
	}
	if strings.Contains(wrong.body, "not these words") {
		t.Error("the password came back with the page")
	}
	res := r.submit(r.signIn(r.crew), "/me/password", url.Values{"password": {"short one"}, "again": {"short one"}}.Encode())
	if res.status != 422 || strings.Contains(res.body, "short one") || !strings.Contains(res.body, `aria-invalid="true"`) {
		t.Errorf("too short: got %d, want the form again without what was typed", res.status)
	}
}

func TestPassword_GuessingLocksNobodyOut(t *testing.T) {
	r := newRig(t, 0)
	r.setPassword(r.crew, words)
	r.setPassword(r.auditor, words+" too")
	var last answer
	for range guessAtOnce + 1 {
		last = r.tryPassword(browser(t), r.crew.Name, "guess after guess")
	}
	if last.status != http.StatusTooManyRequests {
		t.Fatalf("after %d guesses: got %d, want 429", guessAtOnce+1, last.status)
	}
	if res := r.tryPassword(browser(t), r.crew.Name, words); res.status != http.StatusTooManyRequests {
		t.Errorf("the right one among guesses: got %d, want 429, else guessing would pay", res.status)
	}
	if res := r.tryPassword(browser(t), r.auditor.Name, words+" too"); res.status != 303 {
		t.Errorf("somebody else behind the same address: got %d", res.status)
	}
	r.signIn(r.crew) // by a link
}

// Whoever tries a name from everywhere stops neither the address its owner uses nor anything but passwords.
func TestGuesses_AnOwnersAddressGoesOn(t *testing.T) {
	g := newGuesses()
	g.right("192.0.2.1", "Crew 1")
	for i := range 3 * guessAllAtOnce {
		g.wrong("198.51.100."+string(rune('a'+i%26))+string(rune('a'+i/26)), "crew  1")
	}
	if g.mayTry("203.0.113.9", "Crew 1") {
		t.Error("a name under attack may be tried from anywhere")
	}
	if !g.mayTry("192.0.2.1", "CREW 1") {
		t.Error("its owner's address is shut out")
	}
	for range guessAtOnce {
		g.wrong("192.0.2.1", "Crew 1")
	}
	if g.mayTry("192.0.2.1", "Crew 1") {
		t.Error("a known address may guess for ever")
	}
	for i := range guessesMost + 10 {
		g.wrong("192.0.2.7", strings.Repeat("x", i%100)+string(rune('a'+i%26))+string(rune(0x4e00+i)))
	}
	if len(g.by) > guessesMost {
		t.Errorf("%d counts are kept", len(g.by))
	}
}

func TestSession_SigningInGivesANewOneAndEndsTheOld(t *testing.T) {
	r := newRig(t, 0)
	r.setPassword(r.crew, words)
	b := browser(t)
	b.Jar.SetCookies(mustURL(t, r.url), []*http.Cookie{{Name: cookieNameLocal, Value: "planted-by-somebody-else-planted-by-so", Path: "/"}})
	r.tryPassword(b, r.crew.Name, words)
	first := b.Jar.Cookies(mustURL(t, r.url))[0].Value
	if first == "planted-by-somebody-else-planted-by-so" {
		t.Fatal("the planted session id was kept")
	}
	r.tryPassword(b, r.crew.Name, words)
	second := b.Jar.Cookies(mustURL(t, r.url))[0].Value
	if first == second {
		t.Error("the session is the same after signing in again")
	}
	if _, err := r.store.Session(first); !isRefusal(err) {
		t.Errorf("the former session: got %v, want it ended", err)
	}
}

func TestMe_SessionsAndPhonesAreTheirOwners(t *testing.T) {
	r := newRig(t, 0)
	h := r.enrol(r.crew)
	mine, other := r.signIn(r.crew), r.signIn(r.crew)
	stranger := r.signIn(r.auditor)
	page := r.open(mine, "/me")
	if page.status != 200 || strings.Count(page.body, `name="session"`) < 1 || !strings.Contains(page.body, "/me/phones/"+h.installation) {
		t.Fatalf("got %d, want sessions and the phone", page.status)
	}
	if strings.Contains(r.open(stranger, "/me").body, h.installation) {
		t.Error("somebody else sees the phone")
	}
	if res := r.submit(stranger, "/me/phones/"+h.installation, ""); res.status != 404 {
		t.Errorf("somebody else takes the phone off: got %d", res.status)
	}
	if res := r.submit(mine, "/me/sessions", ""); res.status != 303 {
		t.Fatalf("got %d", res.status)
	}
	if res := r.open(other, "/me"); res.status != 401 && res.status != 303 {
		t.Errorf("the other browser: got %d, want it signed out", res.status)
	}
	if res := r.submit(mine, "/me/phones/"+h.installation, ""); res.status != 303 {
		t.Fatalf("got %d", res.status)
	}
	if _, _, err := r.store.Bearer(h.token); !isRefusal(err) {
		t.Errorf("the phone's token: got %v, want it gone", err)
	}
}
