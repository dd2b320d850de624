package server

import (
	"context"
	"encoding/json"
	"fmt"
	"net/http/httptest"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"tripwell/static/chromium"
	"tripwell/store"
	"tripwell/store/proof"
)

// heads gives what the server tells a phone of its logs, by log.
func (h *handset) heads() map[string]logRow {
	h.r.t.Helper()
	var got logsAnswer
	must(h.r.t, json.Unmarshal([]byte(h.fetch("/exchange/logs").body), &got))
	heads := map[string]logRow{}
	for _, l := range got.Logs {
		heads[l.Log] = l
	}
	return heads
}

func TestHead_GoesOnFromEveryHeadThatWasGiven(t *testing.T) {
	r := newRig(t, 3)
	h := r.handset(r.crew)
	seen := []logRow{h.heads()[r.site]}
	var sent []string
	var places []int64
	for i := range 9 {
		line := h.entry(r.devices[i%3], 4.5).bytes(t)
		sent, places = append(sent, line), append(places, h.push(line)[0].Pos)
		seen = append(seen, h.heads()[r.site])
	}
	for i, was := range seen {
		at := min(i, len(sent)-1)
		var got headAnswer
		must(t, json.Unmarshal([]byte(h.fetch(fmt.Sprintf("/exchange/head?log=%s&from=%d&own=%d", r.site, was.Size, places[at])).body), &got))
		root, err := proof.ParseHash(got.Root)
		must(t, err)
		before, err := proof.ParseHash(was.Root)
		must(t, err)
		if err := proof.CheckConsistency(got.Proof, got.Size, root, was.Size, before); err != nil || got.Root != seen[len(seen)-1].Root || got.Epoch != 1 {
			t.Errorf("from %d: got %+v %v, want a proof that the log goes on from there", was.Size, got, err)
		}
		leaf := proof.LeafHash([]byte(got.Own.Stamp + "\n" + sent[at]))
		if err := proof.CheckInclusion(got.Own.Proof, got.Size, root, got.Own.Pos-1, leaf); err != nil {
			t.Errorf("place %d: %v", places[at], err)
		}
	}
	wantWrong(t, h.fetch("/exchange/head?log=office"), 404, "not_found")
	wantWrong(t, h.fetch("/exchange/head?log="+r.site+"&from=-1"), 400, "invalid")
	wantWrong(t, h.fetch("/exchange/head?log="+r.site+"&own=first"), 400, "invalid")
	if got := h.fetch("/exchange/head?log=" + r.site + "&from=9999&own=9999"); got.status != 200 || strings.Contains(got.body, `"own"`) || !strings.Contains(got.body, `"proof":[]`) {
		t.Errorf("beyond its end: got %d %s", got.status, got.body)
	}
}

// A phone's word alone accuses nobody: the server looks for itself, and only what does not hold stands on the manager's page.
func TestHead_WhatAPhoneDoesNotFindContinuedStandsOnTheManagersPage(t *testing.T) {
	r := newRig(t, 1)
	h, b := r.handset(r.crew), r.signIn(r.manager)
	h.push(h.entry(r.devices[0], 4.5).bytes(t))
	good := h.heads()[r.site]
	tell := func(size int64, root string) answer {
		body, err := json.Marshal(headDoubted{Log: r.site, Size: size, Root: root})
		must(t, err)
		return h.send("/exchange/head", body)
	}
	shown := func() bool {
		return strings.Contains(r.open(b, "/kept-aside").body, "Phones know another book") && strings.Contains(r.open(b, "/").body, "not a continuation")
	}
	if got := tell(good.Size, good.Root); !strings.Contains(got.body, `"holds":true`) || shown() {
		t.Errorf("a head that holds: got %s", got.body)
	}
	other := proof.LeafHash([]byte("another")).String()
	if got := tell(good.Size, other); !strings.Contains(got.body, `"holds":false`) || !shown() {
		t.Errorf("another root: got %s, and it is shown: %v", got.body, shown())
	}
	if tell(good.Size, good.Root); shown() {
		t.Error("the phone found its head continued again, and the page still says otherwise")
	}
	if tell(good.Size+5, good.Root); !shown() {
		t.Error("a log that is shorter than a phone knew is not shown")
	}
	if res := r.submit(r.signIn(r.crew), "/kept-aside/head", "log="+r.site+"&installation="+h.installation); res.status != 403 {
		t.Errorf("crew: got %d, want 403", res.status)
	}
	if res := r.submit(b, "/kept-aside/head", "log="+r.site+"&installation="+h.installation); res.status != 303 || shown() {
		t.Errorf("looked into: got %d, and it is shown: %v", res.status, shown())
	}
	wantWrong(t, tell(0, good.Root), 400, "invalid")
	wantWrong(t, tell(1, "no hash"), 400, "invalid")
}

// Somebody puts an older copy of the book's file in its place, without a restore, and others write on in it: the phone says that it
// knew another book, sends again what it keeps, goes on working, and its manager reads it. That a restored server is explained and not
// called wrong is held by the test of a server put back.
func TestHead_APhoneSaysThatTheBookIsNotTheOneItKnew(t *testing.T) {
	chromium.Need(t)
	r := newRig(t, 6)
	w := newWire(t, strings.TrimPrefix(r.url, "http://"))
	p := openHandheld(t, "http://"+w.addr)
	p.signIn(r, r.crew)
	p.ready()
	p.testAnother()
	p.sendAll()
	dir := t.TempDir()
	older, err := os.Create(filepath.Join(dir, store.BookFile))
	must(t, err)
	_, err = r.store.Backup(older)
	must(t, err)
	must(t, older.Close())
	p.testAnother()
	p.sendAll()
	if got := p.Value(`document.querySelector(".notices").innerText`); strings.Contains(got, "book") {
		t.Fatalf("a book in order: got %q", got)
	}

	back, err := store.Open(dir, store.Options{Now: time.Now})
	must(t, err)
	defer back.Close()
	was := *r
	was.store = back
	other := was.handset(r.crew)
	_, err = back.Push(context.Background(), store.Sender{Installation: other.installation, Sent: time.Now()}, []store.Incoming{{Record: []byte(other.entry(r.devices[5], 5.1).bytes(t))}})
	must(t, err)
	putBack, err := New(back, Options{})
	must(t, err)
	server := httptest.NewServer(putBack.Handler())
	defer server.Close()
	w.lead(server.Listener.Addr().String())
	p.Reload()
	p.Sees("The server's book is not a continuation of the one this phone knew")
	p.testAnother() // work goes on
	p.sendAll()
	eventually(t, "all three entries of the phone", func() bool { return len(was.entries()) == 4 })
	p.Until("what happened", `(location.hash = "#/tray", document.body.innerText.includes("The server's book: Kiln Lane Day Clinic"))`)
	p.Sees("It stands on your manager's page.")
	var doubts []store.HeadDoubt
	must(t, back.View(r.manager.Scope(), func(v *store.View) (err error) { doubts, err = v.HeadDoubts(); return err }))
	if len(doubts) != 1 || doubts[0].Log != r.site || doubts[0].Person != r.crew.ID || doubts[0].Installation != p.installation() {
		t.Errorf("got %+v for the manager, want this phone's head of the site", doubts)
	}
	p.Tap("button", "Take the book as it is now")
	p.Until("the notice gone", `!document.body.innerText.includes("not a continuation")`)
	p.testAnother()
	p.sendAll()
	p.Until("no new doubt", `(location.hash = "#/", document.querySelector(".along") && !document.body.innerText.includes("not a continuation"))`)
}
