package server

import (
	"bytes"
	"encoding/json"
	"fmt"
	"io"
	"net/http"
	"net/http/httptest"
	"slices"
	"strings"
	"sync"
	"testing"
	"time"

	"tripwell/static/chromium"
	"tripwell/store"
)

// front stands before a real server as a proxy does in many houses, and answers the exchange in its place while it is told
// to. It counts how often each record was sent through it.
type front struct {
	mu     sync.Mutex
	server http.Handler
	answer func(r *http.Request, body []byte) (status int, ours bool) // nil: everything goes through
	delay  time.Duration
	sent   map[string]int // record → pushes it was in
	most   int            // records in the largest push that went through
	url    string
}

func newFront(t *testing.T, server http.Handler) *front {
	t.Helper()
	f := &front{server: server, sent: map[string]int{}}
	srv := httptest.NewServer(f)
	t.Cleanup(srv.Close)
	f.url = srv.URL
	return f
}

func (f *front) answers(answer func(r *http.Request, body []byte) (int, bool)) {
	f.mu.Lock()
	defer f.mu.Unlock()
	f.answer = answer
}

func (f *front) ServeHTTP(w http.ResponseWriter, r *http.Request) {
	if !strings.HasPrefix(r.URL.Path, "/exchange/") {
		f.server.ServeHTTP(w, r)
		return
	}
	body, err := io.ReadAll(r.Body)
	if err != nil {
		return
	}
	r.Body = io.NopCloser(bytes.NewReader(body))
	f.mu.Lock()
	delay := f.delay
	if f.answer != nil {
		if status, ours := f.answer(r, body); ours {
			f.mu.Unlock()
			if status == http.StatusTooManyRequests {
				w.Header().Set("Retry-After", "1")
			}
			http.Error(w, "<html>not our server's answer</html>", status) // a page of the proxy's own, no JSON
			return
		}
	}
	if r.URL.Path == "/exchange/push" {
		ids := idsIn(body)
		f.most = max(f.most, len(ids))
		for _, id := range ids {
			f.sent[id]++
		}
	}
	f.mu.Unlock()
	time.Sleep(delay)
	f.server.ServeHTTP(w, r)
}

// idsIn gives the ids of the records in a push; bytes that are no record count under themselves.
func idsIn(body []byte) (ids []string) {
	var push struct{ Records []struct{ Record string } }
	_ = json.Unmarshal(body, &push)
	for _, r := range push.Records {
		var env struct{ ID string }
		if json.Unmarshal([]byte(r.Record), &env) != nil {
			env.ID = r.Record
		}
		ids = append(ids, env.ID)
	}
	return ids
}

// always answers with one status, whatever is asked of the exchange.
func always(status int) func(*http.Request, []byte) (int, bool) {
	return func(*http.Request, []byte) (int, bool) { return status, true }
}

// beginWalk opens the first outlet's button test on a phone that has just been signed in.
func beginWalk(t *testing.T, r *rig, base string, options ...chromium.Option) *handheld {
	t.Helper()
	p := openHandheld(t, base, options...)
	p.signIn(r, r.crew)
	p.ready()
	p.startAnother()
	return p
}

// Answers that decide nothing: each is said in words, nothing leaves the tray, and once they end all arrives once.
func TestTrouble_AnswersThatDecideNothing(t *testing.T) {
	chromium.Need(t)
	t.Parallel() // mostly waiting for pages
	r := newRig(t, 30)
	f := newFront(t, r.server.Handler())
	p := beginWalk(t, r, f.url)
	f.answers(always(http.StatusInternalServerError))
	for range 8 {
		p.testNext()
	}
	p.Until("the tray", `(location.hash = "#/tray", document.querySelector(".rows.none, .rows") !== null)`)
	for _, fault := range []struct {
		status int
		says   string
	}{
		{http.StatusInternalServerError, "The server could not answer just now."},
		{http.StatusBadGateway, "The server could not answer just now."},
		{http.StatusTooManyRequests, "The server is busy."},
		{http.StatusUnauthorized, "You are signed out."},
	} {
		f.answers(always(fault.status))
		p.Tap("button", "Send now")
		p.Sees(fault.says)
		if n := p.waiting(); n != 8 {
			t.Fatalf("after %d: %d entries wait, want 8", fault.status, n)
		}
	}
	// A proxy that takes no more than three records at a time, then a token that is no longer good: the phone halves its
	// batches, and takes a new token by the session of its browser.
	_, err := r.store.Enrol(t.Context(), r.crew.ID, p.installation())
	must(t, err)
	f.answers(func(q *http.Request, body []byte) (int, bool) {
		return http.StatusRequestEntityTooLarge, q.URL.Path == "/exchange/push" && len(idsIn(body)) > 3
	})
	p.Tap("button", "Send now")
	p.Sees("All sent")
	r.wantOnceInOrder(8)
	if f.most > 3 {
		t.Errorf("a push of %d records went through a proxy that takes 3", f.most)
	}
}

// One record that is no JSON any more, in the middle of the others: it is kept apart here and there, with a sentence, and
// all others arrive.
func TestTrouble_OneMalformedRecordInTheMiddle(t *testing.T) {
	chromium.Need(t)
	t.Parallel() // mostly waiting for pages
	r := newRig(t, 30)
	w := newWire(t, strings.TrimPrefix(r.url, "http://"))
	p := beginWalk(t, r, "http://"+w.addr)
	w.cut()
	for range 5 {
		p.testNext()
	}
	rows := p.tray()
	slices.SortFunc(rows, func(a, b row) int { return strings.Compare(a.Clock, b.Clock) })
	bad := rows[2]
	torn := bad.Record[:len(bad.Record)-30]
	p.Value(fmt.Sprintf(`new Promise((yes, no) => { const open = indexedDB.open("tray"); open.onsuccess = () => { const tx = open.result.transaction("records", "readwrite"), all = tx.objectStore("records");
		all.get(%q).onsuccess = (e) => all.put({ ...e.target.result, record: %s }); tx.oncomplete = () => { open.result.close(); yes("torn"); }; tx.onabort = no; }; })`, bad.ID, chromium.Quote(torn)))
	w.mend()
	p.Until("the tray", `(location.hash = "#/tray", document.querySelector("main"))`)
	p.Until("the refusal", `([...document.querySelectorAll("button")].find((b) => b.innerText.trim() === "Send now")?.click(), document.body.innerText.includes("1 refused"))`)
	p.Sees("Refused by the server")
	p.Picture("refused")
	got := r.entries()
	if len(got) != 4 || got[0].N != 1 || got[1].N != 2 || got[2].N != 4 || got[3].N != 5 {
		t.Fatalf("got %+v, want the four others in their order", got)
	}
	var refused []store.Refusal
	must(t, r.store.View(r.manager.Scope(), func(v *store.View) (err error) { refused, err = v.Refused(); return err }))
	if len(refused) != 1 || string(refused[0].Bytes) != torn {
		t.Fatalf("got %+v in quarantine, want the torn bytes", refused)
	}
	for _, row := range p.tray() {
		if (row.State == "refused") != (row.ID == bad.ID) || row.State == "waiting" {
			t.Errorf("record %s is %s on the phone", row.ID, row.State)
		}
	}
	p.Sees("This record was damaged on this phone.")
	p.Tap("button", "Handed over")
	p.Sees("All sent")
}

// Two pages of one browser: each makes entries, one of them sends for both, and each record goes once.
func TestTrouble_TwoPagesSendOnce(t *testing.T) {
	chromium.Need(t)
	t.Parallel() // mostly waiting for pages
	r := newRig(t, 30)
	f := newFront(t, r.server.Handler())
	f.delay = 300 * time.Millisecond // long enough for both pages to begin
	w := newWire(t, strings.TrimPrefix(f.url, "http://"))
	p := beginWalk(t, r, "http://"+w.addr)
	w.cut()
	second := &handheld{p.Tab(), p.base}
	second.visit("/field")
	second.startAnother()
	for range 4 {
		p.testNext()
		second.testNext()
	}
	w.mend()
	for _, page := range []*handheld{p, second} { // both at once, in one turn each
		page.JS(`(location.hash = "#/tray", setTimeout(() => [...document.querySelectorAll("button")].find((b) => b.innerText.trim() === "Send now")?.click(), 50))`)
	}
	p.Sees("All sent")
	second.Sees("All sent")
	r.wantOnceInOrder(8)
	f.mu.Lock()
	defer f.mu.Unlock()
	for id, times := range f.sent {
		if times != 1 {
			t.Errorf("record %s was sent %d times, want once", id, times)
		}
	}
	if len(f.sent) != 8 {
		t.Errorf("%d records were sent, want 8", len(f.sent))
	}
}

// A phone without room says so before and after: nothing typed is lost, no number is used up, and with room it is kept.
func TestTrouble_NoRoomLeft(t *testing.T) {
	chromium.Need(t)
	t.Parallel() // mostly waiting for pages
	r := newRig(t, 12)
	w := newWire(t, strings.TrimPrefix(r.url, "http://"))
	p := beginWalk(t, r, "http://"+w.addr)
	w.cut()
	p.testNext()
	profile := p.Profile
	p.Close() // a browser measures the room it has now and then only; a new one measures it at once
	p = openHandheld(t, "http://"+w.addr, chromium.Profile(profile))
	p.Room(p.base, 1)
	p.visit("/field")
	p.startAnother()
	p.Tap(".one-tap", "")
	p.Until("the answers", `document.querySelector(".go").getAttribute("aria-disabled") === "false"`)
	p.Hand("input[type=file]", chromium.Shot(t, 90))
	p.Sees("This phone has no room left for the photo.")
	p.Tap(".go", "Save")
	p.Sees("This phone has no room left, so the entry is not kept.")
	p.Picture("full")
	if n := p.waiting(); n != 1 {
		t.Fatalf("got %d entries kept, want the one from before", n)
	}
	p.Until("what was answered", `document.querySelector(".one-tap[aria-pressed=true]")`)
	p.Room(p.base, 0)
	p.save()
	w.mend()
	p.sendAll()
	r.wantOnceInOrder(2)
}

// The browser drops its database under an open page, as phones do to pages that were long in the background: the page opens it again.
func TestTrouble_LostDatabaseIsOpenedAgain(t *testing.T) {
	chromium.Need(t)
	t.Parallel() // mostly waiting for pages
	r := newRig(t, 12)
	w := newWire(t, strings.TrimPrefix(r.url, "http://"))
	p := beginWalk(t, r, "http://"+w.addr)
	w.cut()
	p.testNext()
	p.DropDatabases()
	for range 3 {
		p.testNext()
	}
	p.DropDatabases()
	w.mend()
	p.sendAll()
	r.wantOnceInOrder(4)
}

// A page that asks the server all the time does not keep a newer version of itself from taking over.
func TestTrouble_ANewerVersionTakesOverWhileThePageAsks(t *testing.T) {
	chromium.Need(t)
	t.Parallel()
	r := newRig(t, 4)
	w := newWire(t, strings.TrimPrefix(r.url, "http://"))
	p := openHandheld(t, "http://"+w.addr)
	p.signIn(r, r.crew)
	p.ready()
	newer := httptest.NewServer(newerServer(t, r.store).Handler())
	defer newer.Close()
	w.lead(newer.Listener.Addr().String())
	// The look for a newer version is repeated: the first may meet a line that was just cut.
	p.Until("the newer version offered", `(navigator.serviceWorker.getRegistration().then((r) => r.update()), document.body.innerText.includes("Take it now"))`)
	p.JS(`(setInterval(() => fetch("/exchange/logs").catch(() => {}), 5), true)`)
	p.Tap("button", "Take it now")
	p.Until("the newer client", `globalThis.newerClient`)
}
