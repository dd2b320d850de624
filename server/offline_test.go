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
	"testing/fstest"
	"time"

	"github.com/skip2/go-qrcode"

	"tripwell/forms"
	"tripwell/static/chromium"
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
	ID, Log, Record, State, From, Clock string
	Receipt                             store.Receipt
	Summary                             struct{ Result string }
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

// testNext answers the button test of the device shown with one tap, hands it photos, and saves it.
func (p *handheld) testNext(photos ...string) {
	p.T.Helper()
	p.Tap(".one-tap", "")
	p.Until("the answers", `document.querySelector(".go").getAttribute("aria-disabled") === "false"`)
	for i, photo := range photos {
		p.Hand("input[type=file]", photo)
		p.Until("the photo", fmt.Sprintf(`document.querySelectorAll(".shots img").length === %d && [...document.querySelectorAll(".shots img")].every((i) => i.naturalWidth > 0)`, i+1))
	}
	p.save()
}

// save presses Save and waits until the page says that the entry is kept.
func (p *handheld) save() {
	p.T.Helper()
	p.Until("a press on Save", `(globalThis.lastSaved = document.querySelector(".saved")?.innerText ?? "", document.querySelector(".go").click(), true)`)
	p.Until("saved", `document.querySelector(".saved") && document.querySelector(".saved").innerText !== globalThis.lastSaved`)
}

// sendAll presses Send now until nothing waits; the phone may have sent by itself before.
func (p *handheld) sendAll() {
	p.T.Helper()
	p.Until("the tray", `(location.hash = "#/tray", document.querySelector("main"))`)
	p.Until("all sent", `([...document.querySelectorAll("button")].find((b) => b.innerText.trim() === "Send now")?.click(), document.querySelector("h1").innerText.includes("All sent"))`)
}

// photoRow is a photo as the tray's own storage has it, without its bytes.
type photoRow struct{ SHA256, State, Entry, Text string }

func (p *handheld) photos() (rows []photoRow) {
	p.T.Helper()
	p.Rows("tray", "photos", &rows)
	return rows
}

// siteEntry is an entry in a site's log as the server has it.
type siteEntry struct {
	ID, From, Shown, Subject string
	N                        int64
	Photos                   []string
}

// entries gives the entries in the site's log, in the log's order.
func (r *rig) entries() (list []siteEntry) {
	r.t.Helper()
	after := ""
	for {
		pulled, err := r.store.Pull(store.Scope{All: true}, r.site, after, 1000)
		must(r.t, err)
		for _, p := range pulled.Records {
			var env struct {
				ID, Kind, From, Subject string
				N                       int64
				Body                    struct {
					Shown  struct{ Result string }
					Photos []string
				}
			}
			must(r.t, json.Unmarshal([]byte(p.Record), &env))
			if env.Kind == "entry.made" {
				list = append(list, siteEntry{env.ID, env.From, env.Body.Shown.Result, env.Subject, env.N, env.Body.Photos})
			}
		}
		if after = pulled.Next; !pulled.More {
			return list
		}
	}
}

// The whole job without a line, in one run: sites taken along, the line cut, the page loaded again, a label read by the camera,
// 25 entries with two photos, the browser closed and opened again, answers lost, the line mended.
func TestOffline_TwentyFiveEntriesWithPhotosFromAScanToTheBook(t *testing.T) {
	chromium.Need(t)
	r := newRig(t, 40)
	tag := r.label(r.devices[12])
	w := newWire(t, strings.TrimPrefix(r.url, "http://"))
	code, err := qrcode.New("HTTPS://ELSEWHERE.INVALID/T/"+tag, qrcode.Medium)
	must(t, err)
	profile, camera := filepath.Join(t.TempDir(), "profile"), chromium.Camera(chromium.Film(t, code.Bitmap()))
	p := openHandheld(t, "http://"+w.addr, chromium.Profile(profile), camera)
	p.signIn(r, r.crew)
	p.ready()

	w.cut()
	p.Reload()
	p.Sees("Kiln Lane Day Clinic")
	p.Tap("a", "Find or scan")
	p.Tap("button", "Scan")
	p.Until("the device the label is on", `location.hash === "#/device/`+r.devices[12]+`"`)
	p.Tap("a", "Button test")
	for i := range 25 {
		var photo []string
		if i == 0 || i == 7 {
			photo = []string{chromium.Shot(t, uint8(i))}
		}
		p.testNext(photo...)
	}
	if n := p.waiting(); n != 25 {
		t.Fatalf("got %d entries waiting, want 25", n)
	}
	p.Close()
	p = openHandheld(t, "http://"+w.addr, chromium.Profile(profile), camera)
	p.visit("/field")
	p.Sees("25 kept on this phone")
	p.Sees("No signal")
	if n := len(r.entries()); n != 0 {
		t.Fatalf("%d entries are at the server, and the line is cut", n)
	}
	// A label's address opens the client too.
	p.visit("/T/" + tag)
	p.Until("the device of a label's address", `location.hash.includes("`+r.devices[12]+`") && document.querySelector("#field .where h1")`)

	// The line is back but every answer is lost: all is kept at the server, nothing leaves the tray.
	w.mend()
	w.deaf()
	p.visit("/field#/tray")
	p.Tap("button", "Send now")
	eventually(t, "25 entries at the server", func() bool { return len(r.entries()) == 25 })
	if kept := p.waiting(); kept != 25 {
		t.Fatalf("got %d in the tray while answers are lost, want 25", kept)
	}
	w.cut()
	w.mend()
	p.sendAll()

	r.wantOnceInOrder(25)
	entries := r.entries()
	if first := entries[0]; first.Subject != r.devices[12] {
		t.Errorf("the first entry is of %s, want the device whose label was read", first.Subject)
	}
	for i, e := range entries {
		want := 0
		if i == 0 || i == 7 {
			want = 1
		}
		if len(e.Photos) != want {
			t.Errorf("entry %d names %d photos, want %d", i+1, len(e.Photos), want)
		}
		must(t, r.store.View(r.manager.Scope(), func(v *store.View) error {
			for _, name := range e.Photos {
				if _, _, err := v.Photo(e.ID, name); err != nil {
					return err
				}
			}
			return nil
		}))
	}
	if n := p.waiting(); n != 0 {
		t.Errorf("%d entries are still in the tray", n)
	}
	for _, photo := range p.photos() {
		if photo.State != "sent" {
			t.Errorf("photo %s is %s on the phone, want sent", photo.SHA256, photo.State)
		}
	}
}

// wantOnceInOrder wants so many entries of one phone in the site's log, each once, in the order they were made, judged by
// the server as the phone judged them.
func (r *rig) wantOnceInOrder(want int) {
	r.t.Helper()
	got := r.entries()
	if len(got) != want {
		r.t.Fatalf("got %d entries at the server, want each of %d once", len(got), want)
	}
	for i, e := range got {
		if e.N != int64(i+1) {
			r.t.Errorf("entry %d of the log has n %d, want %d", i+1, e.N, i+1)
		}
		must(r.t, r.store.View(r.manager.Scope(), func(v *store.View) error {
			judged, err := v.Entry(e.ID)
			if err == nil && string(judged.Verdict.Result) != e.Shown {
				r.t.Errorf("entry %d: the phone said %s, the server says %s", i+1, e.Shown, judged.Verdict.Result)
			}
			return err
		}))
	}
}

// label puts a new tag on the place of a device and gives it.
func (r *rig) label(device string) string {
	r.t.Helper()
	tags, err := r.store.MintTags(context.Background(), r.manager.ID, 1)
	must(r.t, err)
	r.bind(device, tags[0])
	return tags[0]
}

// bind puts a tag on the place of a device.
func (r *rig) bind(device, tag string) {
	r.t.Helper()
	r.append(store.Draft{Kind: "tag.bound", Log: r.site, Subject: r.place(device), Body: set{"tag": tag}})
}

func (r *rig) place(device string) (id string) {
	r.t.Helper()
	must(r.t, r.store.View(r.manager.Scope(), func(v *store.View) error {
		d, err := v.Device(device, forms.DayOf(time.Now()))
		id = d.Place.ID
		return err
	}))
	return id
}

// eventually waits until something outside the browser is so.
func eventually(t testing.TB, what string, is func() bool) {
	t.Helper()
	for end := time.Now().Add(30 * time.Second); !is(); time.Sleep(50 * time.Millisecond) {
		if time.Now().After(end) {
			t.Fatalf("waited 30 s for %s", what)
		}
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
	eventually(t, "an id of its own", func() bool { return twin.installation() != first })
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
	p.startAnother()
	p.testNext(chromium.Shot(t, 120))
	p.sendAll()

	// The server is put back to the backup, on another machine and without the photos: what this phone sent since goes again by
	// itself, and its photo too.
	dir := t.TempDir()
	done, err := store.Restore(t.Context(), dir, older.Name(), store.Options{Now: time.Now}, nil)
	must(t, err)
	back, err := store.Open(dir, store.Options{Now: time.Now})
	must(t, err)
	defer back.Close()
	had, now := *r, r.entries()
	had.store = back
	if done.Epoch != 2 || len(now) != 6 || len(had.entries()) != 4 {
		t.Fatalf("got epoch %d, %d entries now and %d in the backup, want 2, 6 and 4", done.Epoch, len(now), len(had.entries()))
	}
	restored := httptest.NewServer(newerServer(t, back).Handler())
	defer restored.Close()
	w.lead(restored.Listener.Addr().String())
	p.Reload()
	last := now[5]
	eventually(t, "six entries and the photo at the restored server", func() bool {
		here := false
		must(t, back.View(had.manager.Scope(), func(v *store.View) error { here = v.HasPhoto(last.Photos[0]); return nil }))
		return here && len(had.entries()) == 6
	})
	if again := had.entries(); len(again) != 6 || again[4].ID != now[4].ID || again[5].ID != last.ID {
		t.Errorf("got %+v on the restored server, want the two entries it lost", again)
	}
	p.Sees("The server was put back from a backup") // explained, and no alarm
	p.Tap("button", "Understood")
	if got := p.Value(`document.body.innerText`); strings.Contains(got, "not a continuation") || strings.Contains(got, "put back from a backup") {
		t.Errorf("got %q, want neither an alarm nor what was understood", got)
	}
	p.sendAll()
	report, err := back.Check(t.Context(), nil)
	must(t, err)
	if len(report.Problems) > 0 || report.Gaps > 0 {
		t.Errorf("the restored store after all: %d gaps in n, problems %v", report.Gaps, report.Problems)
	}
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
