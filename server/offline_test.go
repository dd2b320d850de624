package server

import (
	"context"
	"encoding/json"
	"fmt"
	"net/http/httptest"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
	"testing/fstest"
	"time"

	"github.com/chromedp/chromedp"

	"tripwell/store"
)

// handheld is a phone: Chromium with a profile that outlives the browser, behind a wire that can be cut.
type handheld struct {
	t       testing.TB
	base    string
	profile string
	ctx     context.Context
	stop    func()
}

// openHandheld starts a browser on a profile; a profile used before brings back what it kept.
func openHandheld(t testing.TB, base, profile string) *handheld {
	t.Helper()
	if testing.Short() {
		t.Skip("browser tests are left out with -short")
	}
	path, err := exec.LookPath("chromium")
	if err != nil {
		if os.Getenv("CI") != "" {
			t.Fatal("Chromium is not installed, and in CI browser tests must run")
		}
		t.Skip("Chromium is not installed: browser test left out")
	}
	allocator, stopAllocator := chromedp.NewExecAllocator(context.Background(),
		chromedp.ExecPath(path), chromedp.Headless, chromedp.NoFirstRun, chromedp.UserDataDir(profile),
		chromedp.Flag("no-sandbox", true), chromedp.Flag("disable-gpu", true), chromedp.Flag("disable-quic", true),
		chromedp.Flag("disable-dev-shm-usage", true), chromedp.Flag("disable-background-networking", true),
		chromedp.Flag("disable-component-update", true), chromedp.Flag("disable-sync", true), chromedp.WindowSize(390, 844))
	ctx, stop := chromedp.NewContext(allocator)
	p := &handheld{t: t, base: base, profile: profile, ctx: ctx}
	stopped := false
	p.stop = func() {
		if stopped {
			return
		}
		stopped = true
		_ = chromedp.Cancel(ctx) // closes the browser and waits for it
		stop()
		stopAllocator()
	}
	t.Cleanup(func() { p.stop() })
	p.do(chromedp.EmulateViewport(390, 844))
	return p
}

func (p *handheld) do(a chromedp.Action[chromedp.Void]) {
	p.t.Helper()
	if err := chromedp.Do(p.ctx, a); err != nil {
		p.t.Fatal(err)
	}
}

func (p *handheld) open(path string) { p.t.Helper(); p.do(chromedp.Navigate(p.base + path)) }

// signIn opens a one-time link and presses its button.
func (p *handheld) signIn(r *rig, who store.Person) {
	p.t.Helper()
	token, err := r.store.NewLink(who.ID, time.Hour)
	must(p.t, err)
	p.open("/in/" + token + "?next=/field")
	p.until("the sign-in button", `document.querySelector("main button, form button")`)
	p.until("a press on it", `(document.querySelector("main button, form button").click(), true)`)
	p.until("the field client", `location.pathname === "/field"`)
}

// until waits until an expression is true on the page.
func (p *handheld) until(what, expression string) {
	p.t.Helper()
	for end := time.Now().Add(30 * time.Second); time.Now().Before(end); time.Sleep(30 * time.Millisecond) {
		if ok, err := chromedp.Run(p.ctx, chromedp.Evaluate[bool]("Boolean("+expression+")")); err == nil && ok {
			return
		}
	}
	page, _ := chromedp.Run(p.ctx, chromedp.Evaluate[string]("location.href + '\\n' + document.body.innerText.slice(0, 1500)"))
	p.t.Fatalf("waited 30 s for %s; the page says:\n%s", what, page)
}

// get gives the value of an expression, a promise's when it is settled.
func (p *handheld) get(expression string) string {
	p.t.Helper()
	v, err := chromedp.Run(p.ctx, chromedp.Evaluate[string](expression, chromedp.EvalAwaitPromise))
	if err != nil {
		p.t.Fatalf("%s: %v", expression, err)
	}
	return v
}

func (p *handheld) sees(text string) {
	p.t.Helper()
	p.until(text, `document.body.innerText.includes(`+fmt.Sprintf("%q", text)+`)`)
}

func (p *handheld) press(within, text string) {
	p.t.Helper()
	find := fmt.Sprintf(`[...document.querySelectorAll(%q)].find((e) => e.innerText.trim().startsWith(%q))`, within, text)
	p.until(within+" "+text, find)
	p.until("a press on "+text, `(`+find+`.click(), true)`)
}

// ready waits until the worker is there with the whole client and the first sites are on the phone.
func (p *handheld) ready() {
	p.t.Helper()
	p.until("the worker", `(navigator.serviceWorker.getRegistration().then((r) => { globalThis.workerThere = Boolean(r?.active); }), globalThis.workerThere)`)
	p.until("a site on the phone", `document.querySelector(".along a")?.innerText.includes("1 site on this phone")`)
}

// row is a record as the tray's own storage has it.
type row struct {
	ID, Log, Record, State, From string
	Receipt                      store.Receipt
	Summary                      struct{ Result string }
}

func (p *handheld) tray() []row {
	p.t.Helper()
	raw := p.get(`new Promise((yes, no) => { const open = indexedDB.open("tray"); open.onerror = no;
		open.onsuccess = () => { const all = open.result.transaction("records").objectStore("records").getAll(); all.onerror = no;
			all.onsuccess = () => { yes(JSON.stringify(all.result)); open.result.close(); }; }; })`)
	var rows []row
	must(p.t, json.Unmarshal([]byte(raw), &rows))
	return rows
}

func (p *handheld) waiting() int {
	n := 0
	for _, r := range p.tray() {
		if r.State == "waiting" {
			n++
		}
	}
	return n
}

// testNext answers the button test of the device shown with one tap and saves it; n is how many are kept then.
func (p *handheld) testNext() {
	p.t.Helper()
	p.press(".one-tap", "")
	p.until("the answers", `document.querySelector(".go").getAttribute("aria-disabled") === "false"`)
	p.until("a press on Save", `(globalThis.lastSaved = document.querySelector(".saved")?.innerText ?? "", document.querySelector(".go").click(), true)`)
	p.until("saved", `document.querySelector(".saved") && document.querySelector(".saved").innerText !== globalThis.lastSaved`)
}

// siteRecords gives the entries in a site's log as the server has them, in the log's order.
func (r *rig) entries() (list []struct {
	ID, From, Shown string
	N               int64
}) {
	r.t.Helper()
	pulled, err := r.store.Pull(store.Scope{All: true}, r.site, "", 1000)
	must(r.t, err)
	for _, p := range pulled.Records {
		var env struct {
			ID, Kind, From string
			N              int64
			Body           struct{ Shown struct{ Result string } }
		}
		must(r.t, json.Unmarshal([]byte(p.Record), &env))
		if env.Kind == "entry.made" {
			list = append(list, struct {
				ID, From, Shown string
				N               int64
			}{env.ID, env.From, env.Body.Shown.Result, env.N})
		}
	}
	return list
}

func TestOffline_TwentyFiveEntriesThroughACutAClosedBrowserAndALostAnswer(t *testing.T) {
	if testing.Short() {
		t.Skip("browser tests are left out with -short")
	}
	r := newRig(t, 30)
	w := newWire(t, strings.TrimPrefix(r.url, "http://"))
	profile := filepath.Join(t.TempDir(), "profile")
	p := openHandheld(t, "http://"+w.addr, profile)
	p.signIn(r, r.crew)
	p.ready()

	w.cut()
	p.do(chromedp.Reload())
	p.sees("Kiln Lane Day Clinic")
	p.press("a.row", "Kiln Lane")
	p.press("a.row", "Outlet 1")
	p.press("a", "Button test")
	for range 25 {
		p.testNext()
	}
	if n := p.waiting(); n != 25 {
		t.Fatalf("got %d entries waiting, want 25", n)
	}
	p.stop()
	p = openHandheld(t, "http://"+w.addr, profile)
	p.open("/field")
	p.sees("25 kept on this phone")
	p.sees("No signal")
	if n := len(r.entries()); n != 0 {
		t.Fatalf("%d entries are at the server, and the line is cut", n)
	}
	// A label's address opens the client too.
	p.open("/T/K7QM2P3")
	p.until("the client at a label's address", `location.pathname === "/T/K7QM2P3" && document.querySelector("#field .where h1")`)

	// The line is back but every answer is lost: all is kept at the server, nothing leaves the tray.
	w.mend()
	w.deaf()
	p.open("/field#/tray")
	p.press("button", "Send now")
	for end := time.Now().Add(20 * time.Second); len(r.entries()) < 25 && time.Now().Before(end); time.Sleep(50 * time.Millisecond) {
	}
	if n, kept := len(r.entries()), p.waiting(); n != 25 || kept != 25 {
		t.Fatalf("got %d at the server and %d in the tray while answers are lost, want 25 and 25", n, kept)
	}
	w.cut()
	w.mend()
	p.press("button", "Send now")
	p.sees("All sent")

	got := r.entries()
	if len(got) != 25 {
		t.Fatalf("got %d entries at the server, want each of 25 once", len(got))
	}
	for i, e := range got {
		if e.N != int64(i+1) {
			t.Errorf("entry %d of the log has n %d, want %d", i+1, e.N, i+1)
		}
		must(t, r.store.View(r.manager.Scope(), func(v *store.View) error {
			judged, err := v.Entry(e.ID)
			if err == nil && string(judged.Verdict.Result) != e.Shown {
				t.Errorf("entry %d: the phone said %s, the server says %s", i+1, e.Shown, judged.Verdict.Result)
			}
			return err
		}))
	}
}

// Two pages of one phone, a copied profile, a newer version of the program, and a server put back to an older backup.
func TestOffline_TwoPagesACopyAnotherVersionAndAServerPutBack(t *testing.T) {
	if testing.Short() {
		t.Skip("browser tests are left out with -short")
	}
	r := newRig(t, 12)
	w := newWire(t, strings.TrimPrefix(r.url, "http://"))
	profile, copied := filepath.Join(t.TempDir(), "profile"), filepath.Join(t.TempDir(), "copy")
	p := openHandheld(t, "http://"+w.addr, profile)
	p.signIn(r, r.crew)
	p.ready()
	p.press("a.row", "Kiln Lane")
	p.press("a.row", "Outlet 1")
	p.press("a", "Button test")
	p.testNext()
	p.until("the first entry at the server", `document.querySelector(".foot .tray").innerText.includes("All sent")`)
	p.stop()
	must(t, os.CopyFS(copied, os.DirFS(profile)))

	// The copy counts on with the same id; the server sees one n twice, and the copy draws an id of its own.
	p = openHandheld(t, "http://"+w.addr, profile)
	p.open("/field")
	p.ready()
	first := p.installation()
	p.testAnother()
	p.sees("All sent")
	twin := openHandheld(t, "http://"+w.addr, copied)
	twin.open("/field")
	twin.ready()
	twin.testAnother()
	twin.sees("All sent")
	twin.until("an id of its own", `(new Promise((yes) => { const open = indexedDB.open("tray"); open.onsuccess = () => { const q = open.result.transaction("me").objectStore("me").get("installation");
		q.onsuccess = () => { globalThis.idNow = q.result; open.result.close(); yes(); }; }; }), globalThis.idNow && globalThis.idNow !== `+fmt.Sprintf("%q", first)+`)`)
	twin.testAnother()
	twin.sees("All sent")
	got := r.entries()
	if len(got) != 4 || got[3].From == first || got[3].N != 1 || got[2].From != first || got[2].N != got[1].N {
		t.Errorf("got %+v, want four entries: the third with an n used before, the fourth the first of another id", got)
	}
	twin.stop()

	// A newer program: offered, not taken while a form is open, then taken whole; it opens without a line.
	older, err := os.Create(filepath.Join(t.TempDir(), store.BookFile))
	must(t, err)
	_, err = r.store.Backup(older)
	must(t, err)
	must(t, older.Close())
	newer := httptest.NewServer(newerServer(t, r.store).Handler())
	defer newer.Close()
	w.lead(newer.Listener.Addr().String())
	p.startAnother()
	p.until("the look for another version", `(navigator.serviceWorker.getRegistration().then((r) => r.update()), document.body.innerText.includes("once this page is finished"))`)
	p.testNext() // the client of before works with the server of now
	p.until("the sites", `(location.hash = "#/", document.querySelector(".along"))`)
	// Asked for, it is taken at once or, where the browser still holds the older worker, when the client is opened next.
	p.press("button", "Take it now")
	p.stop()
	p = openHandheld(t, "http://"+w.addr, profile)
	p.open("/field")
	p.until("the newer client", `globalThis.newerClient`)
	w.cut()
	p.do(chromedp.Reload())
	p.until("the newer client without a line", `globalThis.newerClient && document.querySelector(".along")`)
	w.mend()
	p.testAnother()
	p.sees("All sent")

	// The server is put back to the backup: what this phone sent since goes again by itself.
	back, err := store.Open(filepath.Dir(older.Name()), store.Options{Now: time.Now})
	must(t, err)
	defer back.Close()
	had, now := *r, r.entries()
	had.store = back
	if len(now) != 6 || len(had.entries()) != 4 {
		t.Fatalf("got %d entries now and %d in the backup, want 6 and 4", len(now), len(had.entries()))
	}
	restored := httptest.NewServer(newerServer(t, back).Handler())
	defer restored.Close()
	w.lead(restored.Listener.Addr().String())
	p.do(chromedp.Reload())
	for end := time.Now().Add(20 * time.Second); len(had.entries()) < 6 && time.Now().Before(end); time.Sleep(50 * time.Millisecond) {
	}
	if again := had.entries(); len(again) != 6 || again[4].ID != now[4].ID || again[5].ID != now[5].ID {
		t.Errorf("got %+v on the restored server, want the two entries it lost", again)
	}
	p.sees("All sent")
}

// newerServer is the program of a later day: one of the client's modules differs.
func newerServer(t *testing.T, s *store.Store) *Server {
	t.Helper()
	srv, err := New(s, Options{})
	must(t, err)
	files := fstest.MapFS{}
	for name, file := range srv.assets.files {
		files[name] = &fstest.MapFile{Data: file.plain}
	}
	files["field.mjs"] = &fstest.MapFile{Data: append([]byte("globalThis.newerClient = true;\n"), files["field.mjs"].Data...)}
	srv.assets, err = readAssets(files)
	must(t, err)
	srv.pages, err = srv.readPages()
	must(t, err)
	return srv
}

func (p *handheld) installation() string {
	p.t.Helper()
	return p.get(`new Promise((yes) => { const open = indexedDB.open("tray"); open.onsuccess = () => { const q = open.result.transaction("me").objectStore("me").get("installation"); q.onsuccess = () => { open.result.close(); yes(q.result); }; }; })`)
}

// testAnother makes one more button test, from the list of sites on.
func (p *handheld) testAnother() {
	p.t.Helper()
	p.startAnother()
	p.testNext()
}

func (p *handheld) startAnother() {
	p.t.Helper()
	p.until("the sites", `(location.hash = "#/", document.querySelector(".along"))`)
	p.press("a.row", "Kiln Lane")
	p.press("main .room a.row", "")
	p.press("a", "Button test")
}
