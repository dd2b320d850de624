package server

import (
	"encoding/json"
	"net/http/httptest"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"testing/fstest"
	"time"

	"tripwell/chromium"
	"tripwell/store"
)

// handheld is a phone: Chromium with a profile that outlives the browser, behind a wire that can be cut.
type handheld struct {
	*chromium.Window
	base string
}

// openHandheld starts a browser; chromium.Profile brings back what one before it kept.
func openHandheld(t testing.TB, base string, options ...chromium.Option) *handheld {
	t.Helper()
	return &handheld{chromium.Phone(t, options...), base}
}

func (p *handheld) visit(path string) { p.T.Helper(); p.Open(p.base + path) }

// signIn opens a one-time link and presses its button.
func (p *handheld) signIn(r *rig, who store.Person) {
	p.T.Helper()
	token, err := r.store.NewLink(who.ID, time.Hour)
	must(p.T, err)
	p.visit("/in/" + token + "?next=/field")
	p.Until("the sign-in button", `document.querySelector("main button, form button")`)
	p.Until("a press on it", `(document.querySelector("main button, form button").click(), true)`)
	p.Until("the field client", `location.pathname === "/field"`)
}

// ready waits until the worker is there with the whole client and the first sites are on the phone.
func (p *handheld) ready() {
	p.T.Helper()
	p.Until("the worker", `(navigator.serviceWorker.getRegistration().then((r) => { globalThis.workerThere = Boolean(r?.active); }), globalThis.workerThere)`)
	p.Until("a site on the phone", `document.querySelector(".along a")?.innerText.includes("1 site on this phone")`)
}

// row is a record as the tray's own storage has it.
type row struct {
	ID, Log, Record, State, From string
	Receipt                      store.Receipt
	Summary                      struct{ Result string }
}

func (p *handheld) tray() (rows []row) {
	p.T.Helper()
	p.Rows("tray", "records", &rows)
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
	p.T.Helper()
	p.Tap(".one-tap", "")
	p.Until("the answers", `document.querySelector(".go").getAttribute("aria-disabled") === "false"`)
	p.Until("a press on Save", `(globalThis.lastSaved = document.querySelector(".saved")?.innerText ?? "", document.querySelector(".go").click(), true)`)
	p.Until("saved", `document.querySelector(".saved") && document.querySelector(".saved").innerText !== globalThis.lastSaved`)
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
	chromium.Need(t)
	r := newRig(t, 30)
	w := newWire(t, strings.TrimPrefix(r.url, "http://"))
	profile := filepath.Join(t.TempDir(), "profile")
	p := openHandheld(t, "http://"+w.addr, chromium.Profile(profile))
	p.signIn(r, r.crew)
	p.ready()

	w.cut()
	p.Reload()
	p.Sees("Kiln Lane Day Clinic")
	p.Tap("a.row", "Kiln Lane")
	p.Tap("a.row", "Outlet 1")
	p.Tap("a", "Button test")
	for range 25 {
		p.testNext()
	}
	if n := p.waiting(); n != 25 {
		t.Fatalf("got %d entries waiting, want 25", n)
	}
	p.Close()
	p = openHandheld(t, "http://"+w.addr, chromium.Profile(profile))
	p.visit("/field")
	p.Sees("25 kept on this phone")
	p.Sees("No signal")
	if n := len(r.entries()); n != 0 {
		t.Fatalf("%d entries are at the server, and the line is cut", n)
	}
	// A label's address opens the client too.
	p.visit("/T/K7QM2P3")
	p.Until("the client at a label's address", `location.pathname === "/T/K7QM2P3" && document.querySelector("#field .where h1")`)

	// The line is back but every answer is lost: all is kept at the server, nothing leaves the tray.
	w.mend()
	w.deaf()
	p.visit("/field#/tray")
	p.Tap("button", "Send now")
	for end := time.Now().Add(20 * time.Second); len(r.entries()) < 25 && time.Now().Before(end); time.Sleep(50 * time.Millisecond) {
	}
	if n, kept := len(r.entries()), p.waiting(); n != 25 || kept != 25 {
		t.Fatalf("got %d at the server and %d in the tray while answers are lost, want 25 and 25", n, kept)
	}
	w.cut()
	w.mend()
	p.Tap("button", "Send now")
	p.Sees("All sent")

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
	chromium.Need(t)
	r := newRig(t, 12)
	w := newWire(t, strings.TrimPrefix(r.url, "http://"))
	profile, copied := filepath.Join(t.TempDir(), "profile"), filepath.Join(t.TempDir(), "copy")
	p := openHandheld(t, "http://"+w.addr, chromium.Profile(profile))
	p.signIn(r, r.crew)
	p.ready()
	p.Tap("a.row", "Kiln Lane")
	p.Tap("a.row", "Outlet 1")
	p.Tap("a", "Button test")
	p.testNext()
	p.Until("the first entry at the server", `document.querySelector(".foot .tray").innerText.includes("All sent")`)
	p.Close()
	must(t, os.CopyFS(copied, os.DirFS(profile)))

	// The copy counts on with the same id; the server sees one n twice, and the copy draws an id of its own.
	p = openHandheld(t, "http://"+w.addr, chromium.Profile(profile))
	p.visit("/field")
	p.ready()
	first := p.installation()
	p.testAnother()
	p.Sees("All sent")
	twin := openHandheld(t, "http://"+w.addr, chromium.Profile(copied))
	twin.visit("/field")
	twin.ready()
	twin.testAnother()
	twin.Sees("All sent")
	for end := time.Now().Add(20 * time.Second); twin.installation() == first && time.Now().Before(end); time.Sleep(50 * time.Millisecond) {
	}
	twin.testAnother()
	twin.Sees("All sent")
	got := r.entries()
	if len(got) != 4 || got[3].From == first || got[3].N != 1 || got[2].From != first || got[2].N != got[1].N {
		t.Errorf("got %+v, want four entries: the third with an n used before, the fourth the first of another id", got)
	}
	twin.Close()

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
	p.Until("the look for another version", `(navigator.serviceWorker.getRegistration().then((r) => r.update()), document.body.innerText.includes("once this page is finished"))`)
	p.testNext() // the client of before works with the server of now
	p.Until("the sites", `(location.hash = "#/", document.querySelector(".along"))`)
	// Asked for, it is taken at once or, where the browser still holds the older worker, when the client is opened next.
	p.Tap("button", "Take it now")
	p.Close()
	p = openHandheld(t, "http://"+w.addr, chromium.Profile(profile))
	p.visit("/field")
	p.Until("the newer client", `globalThis.newerClient`)
	w.cut()
	p.Reload()
	p.Until("the newer client without a line", `globalThis.newerClient && document.querySelector(".along")`)
	w.mend()
	p.testAnother()
	p.Sees("All sent")

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
	p.Reload()
	for end := time.Now().Add(20 * time.Second); len(had.entries()) < 6 && time.Now().Before(end); time.Sleep(50 * time.Millisecond) {
	}
	if again := had.entries(); len(again) != 6 || again[4].ID != now[4].ID || again[5].ID != now[5].ID {
		t.Errorf("got %+v on the restored server, want the two entries it lost", again)
	}
	p.Sees("All sent")
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

func (p *handheld) installation() (id string) {
	p.T.Helper()
	p.Row("tray", "me", "installation", &id)
	return id
}

// testAnother makes one more button test, from the list of sites on.
func (p *handheld) testAnother() {
	p.T.Helper()
	p.startAnother()
	p.testNext()
}

func (p *handheld) startAnother() {
	p.T.Helper()
	p.Until("the sites", `(location.hash = "#/", document.querySelector(".along"))`)
	p.Tap("a.row", "Kiln Lane")
	p.Tap("main .room a.row", "")
	p.Tap("a", "Button test")
}
