package store

import (
	"context"
	"crypto/sha1"
	"crypto/sha256"
	"crypto/sha512"
	"encoding/base32"
	"hash"
	"slices"
	"strings"
	"testing"
	"time"
)

// RFC 6238 appendix B, the whole table; the keys of the longer hashes are the same digits repeated to their length (errata 2866).
func TestSecondStep_VectorsOfTheRFC(t *testing.T) {
	keyed := map[string]struct {
		key  string
		hash func() hash.Hash
	}{
		"SHA1":   {"12345678901234567890", sha1.New},
		"SHA256": {"12345678901234567890123456789012", sha256.New},
		"SHA512": {"1234567890123456789012345678901234567890123456789012345678901234", sha512.New},
	}
	for _, c := range []struct {
		at         int64
		mode, want string
	}{
		{59, "SHA1", "94287082"}, {59, "SHA256", "46119246"}, {59, "SHA512", "90693936"},
		{1111111109, "SHA1", "07081804"}, {1111111109, "SHA256", "68084774"}, {1111111109, "SHA512", "25091201"},
		{1111111111, "SHA1", "14050471"}, {1111111111, "SHA256", "67062674"}, {1111111111, "SHA512", "99943326"},
		{1234567890, "SHA1", "89005924"}, {1234567890, "SHA256", "91819424"}, {1234567890, "SHA512", "93441116"},
		{2000000000, "SHA1", "69279037"}, {2000000000, "SHA256", "90698825"}, {2000000000, "SHA512", "38618901"},
		{20000000000, "SHA1", "65353130"}, {20000000000, "SHA256", "77737706"}, {20000000000, "SHA512", "47863826"},
	} {
		if got := totp([]byte(keyed[c.mode].key), c.at/stepSeconds, 8, keyed[c.mode].hash); got != c.want {
			t.Errorf("%s at %d: got %s, want %s", c.mode, c.at, got, c.want)
		}
	}
}

func TestSecondStep_OneStepOfDriftAndNoneTwice(t *testing.T) {
	key := []byte("12345678901234567890")
	now := time.Unix(1111111109, 0)
	code := func(steps int64) string { return totp(key, now.Unix()/stepSeconds+steps, stepDigits, sha1.New) }
	for steps, want := range map[int64]bool{-2: false, -1: true, 0: true, 1: true, 2: false} {
		second := secondStep{}
		if got := second.spend(key, code(steps), now); got != want {
			t.Errorf("%d steps off: got %v, want %v", steps, got, want)
		}
	}
	second := secondStep{}
	if !second.spend(key, code(0), now) || second.spend(key, code(0), now) || second.spend(key, code(-1), now) || !second.spend(key, code(1), now) {
		t.Error("a code that was used, or is older than one, was taken; or a newer one was not")
	}
}

const goodPassword = "kettle orchard nine lamps"

// withPassword gives a person a password by a fresh link, as the page does.
func (r *rig) withPassword(p Person, typed string) (session string) {
	r.Helper()
	token, err := r.NewLink(p.ID, time.Hour)
	if err != nil {
		r.Fatal(err)
	}
	if session, err = r.SpendLink(context.Background(), token, Arrival{}); err != nil {
		r.Fatal(err)
	}
	if err := r.SetPassword(context.Background(), p.ID, "", typed, session); err != nil {
		r.Fatal(err)
	}
	return session
}

func TestPassword_SignsInByNameAndSaysTheSameForEveryFailure(t *testing.T) {
	r := newRig(t)
	ctx := context.Background()
	crew := r.person("crew", true)
	r.withPassword(crew, goodPassword)
	for _, name := range []string{crew.Name, "  CREW   2 "} {
		session, half, err := r.SignIn(ctx, name, goodPassword, Arrival{Agent: "a browser"})
		if err != nil || half != "" {
			t.Fatalf("%q: %v, half %q", name, err, half)
		}
		if p, err := r.Session(session); err != nil || p.ID != crew.ID {
			t.Errorf("%q: got %q, %v", name, p.ID, err)
		}
	}
	ended := r.person("crew", true)
	r.withPassword(ended, goodPassword+" ended")
	ended.Active = false
	if _, err := r.PutPerson(ctx, r.ID(), ended); err != nil {
		t.Fatal(err)
	}
	for _, c := range [][2]string{{crew.Name, "wrong words altogether"}, {"nobody", goodPassword}, {r.manager.Name, goodPassword}, {ended.Name, goodPassword + " ended"}, {"", ""}, {crew.Name, strings.Repeat("x", 5000)}} {
		if session, half, err := r.SignIn(ctx, c[0], c[1], Arrival{}); err != errPassword || session+half != "" {
			t.Errorf("%q, %q: got %v, want the one sentence", c[0], c[1], err)
		}
	}
}

// What a guess costs is the same whoever is named: without it an unknown name would be told from a known one by the clock.
func TestPassword_AnUnknownNameIsHashedToo(t *testing.T) {
	r := newRig(t)
	for range hashSlots { // no slot is free, so whoever hashes waits
		hashSlot <- struct{}{}
	}
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	_, _, err := r.SignIn(ctx, "nobody", "whatever it may be", Arrival{})
	for range hashSlots {
		<-hashSlot
	}
	if err != errBusy {
		t.Errorf("a name nobody has: got %v, want to stand in line like everybody", err)
	}
}

func TestPassword_WhatIsTaken(t *testing.T) {
	for _, c := range []struct {
		typed string
		least int
		ok    bool
	}{
		{"short of fifteen", 15, true}, {"only fourteen.", 15, false}, {"12345678", 8, false}, {"qwertyuiop", 8, false},
		{"Crew 1 2026!!", 8, false}, {"aaaaaaaaaaaaaaaaaaaa", 15, false}, {"abcabcabcabcabcabc", 15, false}, {"password password password", 15, false},
		{"tripwelltripwell2026", 15, false}, {"ünï cödé ist érlaubt", 15, true}, {strings.Repeat("lamp kettle ", 6), 15, true}, {strings.Repeat("x y", 200), 15, false},
		{"with a\nbreak in it", 15, false}, {goodPassword, 15, true},
	} {
		if err := checkPassword(c.typed, c.least, "Crew 1"); (err == nil) != c.ok {
			t.Errorf("%q: got %v, want taken %v", c.typed, err, c.ok)
		}
	}
	// OWASP ASVS 5.0 V6.2.4: at least the first three thousand that fit the rules.
	if list := commonPasswords(); len(list) < 3000 || !slices.IsSorted(list) || slices.ContainsFunc(list, func(s string) bool { return len(s) < 8 }) {
		t.Errorf("the list has %d passwords, or is not sorted", len(list))
	}
}

func TestPassword_ChangeNeedsThePresentOneOrAFreshLink(t *testing.T) {
	r := newRig(t)
	ctx := context.Background()
	crew := r.person("crew", true)
	r.withPassword(crew, goodPassword)
	session, _, err := r.SignIn(ctx, crew.Name, goodPassword, Arrival{})
	if err != nil {
		t.Fatal(err)
	}
	other, _, err := r.SignIn(ctx, crew.Name, goodPassword, Arrival{})
	if err != nil {
		t.Fatal(err)
	}
	next := "other words for the kettle"
	if err := r.SetPassword(ctx, crew.ID, "not the present one", next, session); code(err) != "invalid" {
		t.Errorf("without the present one: got %v", err)
	}
	if err := r.SetPassword(ctx, crew.ID, goodPassword, next, session); err != nil {
		t.Fatal(err)
	}
	if _, err := r.Session(other); code(err) != "not_signed_in" {
		t.Errorf("another session after the change: got %v, want it ended", err)
	}
	if _, err := r.Session(session); err != nil {
		t.Errorf("the session that changed it: %v", err)
	}
	if _, _, err := r.SignIn(ctx, crew.Name, goodPassword, Arrival{}); err != errPassword {
		t.Errorf("the old one: got %v", err)
	}
	token, err := r.NewLink(crew.ID, time.Hour)
	if err != nil {
		t.Fatal(err)
	}
	byLink, err := r.SpendLink(ctx, token, Arrival{})
	if err != nil {
		t.Fatal(err)
	}
	r.pass(freshLink + time.Minute)
	if err := r.SetPassword(ctx, crew.ID, "", goodPassword, byLink); code(err) != "invalid" {
		t.Errorf("an hour-old link sets a password unasked: %v", err)
	}
}

func TestPassword_TwoOfOneNameCannotBothHaveOne(t *testing.T) {
	r := newRig(t)
	crew := r.person("crew", true)
	r.withPassword(crew, goodPassword)
	twin, err := r.PutPerson(context.Background(), r.ID(), Person{Name: strings.ToUpper(crew.Name), Role: "crew", All: true, Active: true})
	if err != nil {
		t.Fatal(err)
	}
	token, err := r.NewLink(twin.ID, time.Hour)
	if err != nil {
		t.Fatal(err)
	}
	session, err := r.SpendLink(context.Background(), token, Arrival{})
	if err != nil {
		t.Fatal(err)
	}
	if err := r.SetPassword(context.Background(), twin.ID, "", "different words again", session); code(err) != "conflict" {
		t.Errorf("got %v, want conflict", err)
	}
}

func TestSecondStep_FollowsThePasswordAndSpareCodesWorkOnce(t *testing.T) {
	r := newRig(t)
	ctx := context.Background()
	crew := r.person("crew", true)
	session := r.withPassword(crew, goodPassword)
	key, address, err := r.OfferSecond(ctx, crew)
	if err != nil || !strings.Contains(address, "secret="+key) {
		t.Fatalf("got %q, %v", address, err)
	}
	raw, err := base32.StdEncoding.WithPadding(base32.NoPadding).DecodeString(key)
	if err != nil {
		t.Fatal(err)
	}
	now := func() string { return totp(raw, r.clock().Unix()/stepSeconds, stepDigits, sha1.New) }
	if _, err := r.ConfirmSecond(ctx, crew.ID, "000000x", session); code(err) != "invalid" {
		t.Errorf("a wrong code switched it on: %v", err)
	}
	spare, err := r.ConfirmSecond(ctx, crew.ID, now(), session)
	if err != nil || len(spare) != spareCodes {
		t.Fatalf("got %d codes, %v", len(spare), err)
	}
	half := func() string {
		t.Helper()
		got, half, err := r.SignIn(ctx, crew.Name, goodPassword, Arrival{})
		if err != nil || got != "" || half == "" {
			t.Fatalf("got session %q, half %q, %v; want half", got, half, err)
		}
		return half
	}
	h := half()
	if _, err := r.Session(h); code(err) != "not_signed_in" {
		t.Error("half a sign-in is a session")
	}
	if _, err := r.SpendLink(ctx, h, Arrival{}); code(err) != "not_found" {
		t.Error("half a sign-in is a link")
	}
	if _, err := r.SecondStep(ctx, h, now(), Arrival{}); err != errSecond {
		t.Errorf("the code that switched it on: got %v, want it used", err)
	}
	r.pass(stepSeconds * time.Second)
	if _, err := r.SecondStep(ctx, h, now(), Arrival{}); err != nil {
		t.Errorf("the next code: %v", err)
	}
	if _, err := r.SecondStep(ctx, h, now(), Arrival{}); code(err) != "not_found" {
		t.Errorf("the same half again: got %v", err)
	}
	if _, err := r.SecondStep(ctx, half(), strings.ToLower(spare[3]), Arrival{}); err != nil {
		t.Errorf("a spare code: %v", err)
	}
	if _, err := r.SecondStep(ctx, half(), spare[3], Arrival{}); err != errSecond {
		t.Errorf("a spare code twice: got %v", err)
	}
	h = half()
	for i := range halfWrong {
		want := errSecond
		if i == halfWrong-1 {
			want = errHalf
		}
		if _, err := r.SecondStep(ctx, h, "000000", Arrival{}); err != want {
			t.Errorf("wrong code %d: got %v", i+1, err)
		}
	}
	r.pass(stepSeconds * time.Second)
	if _, err := r.SecondStep(ctx, h, now(), Arrival{}); code(err) != "not_found" {
		t.Errorf("a good code after five wrong ones: got %v", err)
	}
	if st, err := r.Secret(crew.ID); err != nil || st.CodesLeft != spareCodes-1 || !st.Second {
		t.Errorf("got %+v, %v", st, err)
	}
	if err := r.EndSecond(ctx, crew.ID, goodPassword); err != nil {
		t.Error(err)
	}
	if s, _, err := r.SignIn(ctx, crew.Name, goodPassword, Arrival{}); err != nil || s == "" {
		t.Errorf("after it was switched off: %v", err)
	}
}

func TestSession_TheOneABrowserHadEndsAndOthersAreListed(t *testing.T) {
	r := newRig(t)
	ctx := context.Background()
	crew := r.person("crew", true)
	first, err := r.StartSession(ctx, crew.ID, Arrival{How: ByLink, Agent: "first", Address: "192.0.2.1"})
	if err != nil {
		t.Fatal(err)
	}
	planted, err := r.StartSession(ctx, r.manager.ID, Arrival{})
	if err != nil {
		t.Fatal(err)
	}
	second, err := r.StartSession(ctx, crew.ID, Arrival{Agent: strings.Repeat("é", 300), Former: planted})
	if err != nil {
		t.Fatal(err)
	}
	if _, err := r.Session(planted); code(err) != "not_signed_in" {
		t.Errorf("the session the browser had before: got %v, want it ended", err)
	}
	list, err := r.Sessions(crew.ID, second)
	if err != nil || len(list) != 2 {
		t.Fatalf("got %d sessions, %v", len(list), err)
	}
	for _, row := range list {
		if strings.Contains(row.ID, second) || row.Own != (row.Address == "") || len(row.Agent) > 200 {
			t.Errorf("got %+v", row)
		}
		if _, err := r.Session(row.ID); err == nil {
			t.Error("the id of a session opens it")
		}
	}
	if err := r.EndSessions(ctx, r.manager.ID, list[0].ID, ""); err != nil {
		t.Fatal(err)
	}
	if list, _ := r.Sessions(crew.ID, ""); len(list) != 2 {
		t.Error("somebody ended another's session")
	}
	if err := r.EndSessions(ctx, crew.ID, "", second); err != nil {
		t.Fatal(err)
	}
	if _, err := r.Session(first); code(err) != "not_signed_in" {
		t.Error("the other session goes on")
	}
	if _, err := r.Session(second); err != nil {
		t.Error("the sign-in that asked to end the others ended too")
	}
}
