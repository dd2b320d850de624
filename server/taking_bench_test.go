package server

import (
	"io"
	"net/http"
	"slices"
	"strconv"
	"testing"
	"time"
)

// What a phone takes along of one large site, as it travels. The floor is the line itself: 10 Mbit/s.
func BenchmarkTakeAlong(b *testing.B) {
	r := newRig(b, 10_000)
	h := r.handset(r.crew)
	client := &http.Client{Transport: &http.Transport{DisableCompression: true}} // the bytes as they travel
	for b.Loop() {
		req := h.request(http.MethodGet, "/exchange/snapshot?log="+r.site, nil)
		req.Header.Set("Accept-Encoding", "gzip")
		began := time.Now()
		res, err := client.Do(req)
		must(b, err)
		n, err := io.Copy(io.Discard, res.Body)
		must(b, err)
		must(b, res.Body.Close())
		line := float64(n*8) / 10e6
		b.ReportMetric(float64(n), "bytes")
		b.ReportMetric(line, "s-on-the-line")
		b.ReportMetric((time.Since(began).Seconds()+line)/line, "x-floor")
	}
}

// From the tap on Save until the page says saved, which it says when the strict transaction is complete; 5,000 devices are
// on the phone. The floor is an empty strict transaction of the same database.
func BenchmarkTapToSaved(b *testing.B) {
	r := newRig(b, 5_000)
	p := openHandheld(b, r.url)
	p.signIn(r, r.crew)
	p.ready()
	p.Tap("a.row", "Kiln Lane")
	p.Tap("a.row", "Outlet 1")
	p.Tap("a", "Button test")
	var took []float64
	for range 60 {
		p.Tap(".one-tap", "")
		p.Until("the answers", `document.querySelector(".go").getAttribute("aria-disabled") === "false"`)
		ms, err := strconv.ParseFloat(p.Value(`new Promise((yes) => { const was = document.querySelector(".saved")?.innerText ?? "", began = performance.now();
			const look = new MutationObserver(() => { const now = document.querySelector(".saved")?.innerText; if (now && now !== was) { look.disconnect(); yes(String(performance.now() - began)); } });
			look.observe(document.body, { subtree: true, childList: true, characterData: true }); document.querySelector(".go").click(); })`), 64)
		must(b, err)
		took = append(took, ms)
	}
	floor, err := strconv.ParseFloat(p.Value(`new Promise((yes, no) => { const open = indexedDB.open("tray"); open.onerror = no; open.onsuccess = async () => { const db = open.result, all = [];
		for (let i = 0; i < 40; i++) { const began = performance.now(); await new Promise((done) => { const tx = db.transaction("me", "readwrite", { durability: "strict" }); tx.objectStore("me").put(i, "floor"); tx.oncomplete = done; }); all.push(performance.now() - began); }
		db.close(); yes(String(all.sort((a, b) => a - b)[20])); }; })`), 64)
	must(b, err)
	slices.Sort(took)
	for b.Loop() {
	}
	b.ReportMetric(took[len(took)/2], "ms-p50")
	b.ReportMetric(took[len(took)*99/100], "ms-p99")
	b.ReportMetric(took[len(took)/2]/floor, "x-floor")
	if left := p.waiting(); left > len(took) {
		b.Fatalf("%d entries wait, and %d were made", left, len(took))
	}
}
