package server

import (
	"fmt"
	"net/http"
	"strconv"
	"strings"
	"testing"
	"time"

	"tripwell/static/chromium"
	"tripwell/store"
)

const monthEntries, monthPhotos = 5_000, 500

// BenchmarkMonth is thirty days without signal: 5,000 entries and 500 photos are kept by the client's own modules on a phone with a
// site of 500 devices, the browser is closed and opened, one more entry is made, and then all of it is sent. The floor of the sending
// is the same records and photos pushed by a program that keeps nothing. It takes minutes and is no part of the tests:
//
//	go test -run xxx -bench Month -benchtime 1x ./server
func BenchmarkMonth(b *testing.B) {
	for b.Loop() { // what is reported before its end is forgotten
	}
	r := newRig(b, 500)
	w := newWire(b, strings.TrimPrefix(r.url, "http://"))
	profile := b.TempDir()
	p := openHandheld(b, "http://"+w.addr, chromium.Profile(profile))
	p.signIn(r, r.crew)
	p.ready()
	p.Value(monthModules)
	w.cut()
	kept := p.seconds(fmt.Sprintf(monthKept, r.site, chromium.Quote(strings.Join(r.devices, " ")), monthEntries, monthPhotos))
	b.ReportMetric(kept/monthEntries*1000, "ms-keep")
	b.ReportMetric(p.seconds(`navigator.storage.estimate().then((e) => String(e.usage / 1e6))`), "MB-kept")
	p.Close()

	p = openHandheld(b, "http://"+w.addr, chromium.Profile(profile))
	began := time.Now()
	p.visit("/field")
	p.Sees(fmt.Sprintf("%d kept on this phone", monthEntries))
	b.ReportMetric(time.Since(began).Seconds(), "s-open")
	p.startAnother()
	began = time.Now()
	p.testNext()
	b.ReportMetric(time.Since(began).Seconds()*1000, "ms-one-more")

	w.mend()
	began = time.Now()
	p.Until("the tray", `(location.hash = "#/tray", document.querySelector("h1"))`)
	p.Tap("button", "Send now")
	p.Value(`(async () => { const db = await new Promise((yes) => { const open = indexedDB.open("tray"); open.onsuccess = () => yes(open.result); });
		const waiting = () => new Promise((yes) => { const ask = db.transaction("records").objectStore("records").index("state").count("waiting"); ask.onsuccess = () => yes(ask.result); });
		while ((await waiting()) > 0) await new Promise((yes) => setTimeout(yes, 100)); db.close(); return "sent"; })()`)
	b.ReportMetric(time.Since(began).Seconds(), "s-entries-sent")
	p.Value(`(async () => { while (!document.querySelector("footer").innerText.includes("All sent")) await new Promise((yes) => setTimeout(yes, 200)); return "sent"; })()`)
	drained := time.Since(began)
	b.ReportMetric(drained.Seconds(), "s-sent")
	floor := r.pushBare(b, p)
	b.ReportMetric(floor.Seconds(), "s-floor")
	b.ReportMetric(drained.Seconds()/floor.Seconds(), "x-floor")
	r.wantMonth(b)
}

// monthModules loads what keeps records while there is a line; a page outside the client's own has no other way to them.
const monthModules = `(async () => { const root = document.querySelector("script[src*='/assets/']").src.replace(/[^/]*$/, "");
	const [{ trayDB }, { makeRecord }] = await Promise.all(["db.mjs", "making.mjs"].map((m) => import(root + m)));
	globalThis.month = { tray: trayDB(), makeRecord }; return "loaded"; })()`

// monthKept keeps entries over thirty days, each in its own transaction; every tenth has a photo of the size a phone's has.
const monthKept = `(async (site, devices, entries, photos) => {
	const { tray, makeRecord } = globalThis.month, board = new OffscreenCanvas(1600, 1200), pen = board.getContext("2d");
	const shot = async (i) => { for (let y = 0; y < 1200; y += 12) for (let x = 0; x < 1600; x += 12) { pen.fillStyle = "hsl(" + ((x * 7 + y * 13 + i * 31) %% 360) + " 40%% " + (30 + (x * y + i * 17) %% 50) + "%%)"; pen.fillRect(x, y, 12, 12); }
		const blob = await board.convertToBlob({ type: "image/jpeg", quality: 0.8 }), sum = new Uint8Array(await crypto.subtle.digest("SHA-256", await blob.arrayBuffer()));
		const sha256 = [...sum].map((b) => b.toString(16).padStart(2, "0")).join(""); await tray.putPhoto({ sha256, blob, state: "draft", saved: Date.now() }); return sha256; };
	const yes = { value: "yes" };
	let spent = 0;
	for (let i = 0; i < entries; i++) {
		const at = Date.now() - 30 * 86_400_000 + i * 30 * 86_400_000 / entries, device = devices[i %% devices.length], names = i %% (entries / photos) === 0 ? [await shot(i)] : [];
		const body = { form: "gfci-receptacle/button", given: { kind: "gfci-receptacle", form_rev: 1, limit_set: "us-class-a", limit_rev: 1, rating_a: 20 }, readings: { found: { value: "on" }, condition: { value: "sound" }, button_trips: yes, load_dead_when_tripped: yes, button_resets: yes, restored: yes },
			shown: { result: "pass", limit_rev: 1, judge: 1 }, source: "phone", note: "", photos: names };
		const began = performance.now();
		await tray.keep(site, [], [(facts) => { const made = makeRecord({ kind: "entry.made", log: site, subject: device, at, offset: 0, body, ...facts });
			return { clock: made.clock, row: { id: made.id, log: site, record: made.record, state: "waiting", saved: at, summary: { entry: made.id, device, task: "button", day: new Date(at).toISOString().slice(0, 10), result: "pass", readings: body.readings, title: "Outlet" } } }; }], names);
		spent += performance.now() - began;
	}
	return String(spent / 1000); })(%q, %s.split(" "), %d, %d)`

// seconds gives a figure the page computes.
func (p *handheld) seconds(expression string) float64 {
	p.T.Helper()
	n, err := strconv.ParseFloat(p.Value(expression), 64)
	must(p.T, err)
	return n
}

// pushBare sends the same records and photos to a store of its own, batch by batch and one photo at a time.
func (r *rig) pushBare(b *testing.B, p *handheld) time.Duration {
	b.Helper()
	other := newRig(b, 0)
	h := other.handset(other.crew)
	var lines []string
	for _, e := range r.entries() {
		fresh := h.record("entry.made", other.site, newID(), entryBody(4.5))
		body := entryBody(4.5)
		body["photos"] = e.Photos
		fresh.Body = body
		lines = append(lines, fresh.bytes(b))
	}
	names, ids := map[string]string{}, r.entries()
	for i, e := range ids {
		for _, name := range e.Photos {
			names[name] = lines[i]
		}
	}
	began := time.Now()
	for from := 0; from < len(lines); from += 200 { // these are longer than those of a button test
		h.push(lines[from:min(from+200, len(lines))]...)
	}
	for name, line := range names {
		raw, err := r.store.PhotoBytes(name)
		must(b, err)
		req := h.request(http.MethodPost, "/exchange/photo?sha256="+name+"&entry="+idOf(b, line), raw)
		if res := other.do(h.client, req); res.status != http.StatusOK {
			b.Fatalf("photo: got %d %s", res.status, res.body)
		}
	}
	return time.Since(began)
}

func idOf(t testing.TB, line string) string {
	t.Helper()
	ids := idsIn(pushBody(t, line))
	return ids[0]
}

// wantMonth wants everything at the server once.
func (r *rig) wantMonth(b *testing.B) {
	b.Helper()
	got, photos := r.entries(), 0
	if len(got) != monthEntries+1 {
		b.Fatalf("got %d entries at the server, want %d", len(got), monthEntries+1)
	}
	must(b, r.store.View(r.manager.Scope(), func(v *store.View) error {
		for i, e := range got {
			if e.N != int64(i+1) {
				b.Errorf("entry %d has n %d", i+1, e.N)
			}
			for _, name := range e.Photos {
				if v.HasPhoto(name) {
					photos++
				}
			}
		}
		return nil
	}))
	if photos != monthPhotos {
		b.Errorf("got %d photos at the server, want %d", photos, monthPhotos)
	}
}
