package server

import (
	"fmt"
	"io"
	"math"
	"net"
	"net/http"
	"slices"
	"strconv"
	"strings"
	"sync"
	"sync/atomic"
	"testing"
	"time"

	"github.com/chromedp/cdproto/cdp"
	"github.com/chromedp/cdproto/performance"
	"github.com/chromedp/chromedp"
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

// From the tap on Save until the page says saved, which it says when the strict transaction is complete, with 5,000 devices on the
// phone and the server there. The floor is a bare strict put of an entry's size into a database of its own, in the same page and right
// after each save; 150 of each.
func BenchmarkTapToSaved(b *testing.B) {
	r := newRig(b, 5_000)
	p := openHandheld(b, r.url)
	p.signIn(r, r.crew)
	p.ready()
	p.Tap("a.row", "Kiln Lane")
	p.Tap("a.row", "Outlet 1")
	p.Tap("a", "Button test")
	p.Value(`new Promise((yes, no) => { const open = indexedDB.open("floor"); open.onerror = no; open.onupgradeneeded = () => open.result.createObjectStore("put"); open.onsuccess = () => { globalThis.floorDB = open.result; yes("open"); }; })`)
	var took, floor []float64
	began := threadTime(p)
	for range 150 {
		p.Tap(".one-tap", "")
		p.Until("the answers", `document.querySelector(".go").getAttribute("aria-disabled") === "false"`)
		took = append(took, p.seconds(`new Promise((yes) => { const was = document.querySelector(".saved")?.innerText ?? "", began = performance.now();
			const look = new MutationObserver(() => { const now = document.querySelector(".saved")?.innerText; if (now && now !== was) { look.disconnect(); yes(String(performance.now() - began)); } });
			look.observe(document.body, { subtree: true, childList: true, characterData: true }); document.querySelector(".go").click(); })`))
		floor = append(floor, p.seconds(`new Promise((yes, no) => { const began = performance.now(), tx = globalThis.floorDB.transaction("put", "readwrite", { durability: "strict" }); tx.onabort = no;
			tx.objectStore("put").put("x".repeat(1200), began); tx.oncomplete = () => yes(String(performance.now() - began)); })`))
	}
	spent := threadTime(p) - began
	for b.Loop() {
	}
	slices.Sort(took)
	slices.Sort(floor)
	for _, at := range []int{50, 99} {
		i := len(took) * at / 100
		b.ReportMetric(took[i], fmt.Sprintf("ms-p%d", at))
		b.ReportMetric(floor[i], fmt.Sprintf("ms-floor-p%d", at))
		b.ReportMetric(took[i]/floor[i], fmt.Sprintf("x-floor-p%d", at))
	}
	b.ReportMetric(spent/float64(len(took)), "ms-cpu/entry") // of the page's own thread, the two taps and this test's looks included: what a loaded machine does not stretch
	if left := p.waiting(); left > len(took) {
		b.Fatalf("%d entries wait, and %d were made", left, len(took))
	}
}

// From the address typed on a phone that was never here to 10,000 devices on it, over a line of 10 Mbit/s: the client, the worker, the first site. The floor is what the line takes for the bytes it carried.
func BenchmarkFirstOpening(b *testing.B) {
	r := newRig(b, 10_000)
	l := newSlowLine(b, r.url)
	p := openHandheld(b, "http://"+l.Addr().String())
	p.signIn(r, r.crew)
	p.ready()
	took := func(what string) float64 {
		ms, err := strconv.ParseFloat(p.Value(what), 64)
		must(b, err)
		return ms / 1000
	}
	p.Until("the snapshot's timing", `performance.getEntriesByType("resource").some((e) => e.name.includes("/exchange/snapshot"))`)
	taken := took(`String(performance.getEntriesByType("resource").find((e) => e.name.includes("/exchange/snapshot")).responseEnd)`)
	opened := took(`String(performance.getEntriesByType("resource").find((e) => e.name.includes("/words/")).responseEnd)`)
	asked := took(`String(1000 * performance.getEntriesByType("resource").length)`)
	for b.Loop() {
	}
	line := float64(l.carried.Load()*8) / lineBits
	b.ReportMetric(opened, "s-until-open")
	b.ReportMetric(taken, "s-until-taken")
	b.ReportMetric(asked, "files-and-calls")
	b.ReportMetric(float64(l.carried.Load()), "bytes")
	b.ReportMetric(taken/line, "x-floor")

	// The round of a site of 10,000, from the tap on it until its rows are on the page.
	began := threadTime(p)
	drawn := took(`new Promise((yes) => { const began = performance.now(), look = new MutationObserver(() => { if (document.querySelectorAll(".rows .row").length > 20) { look.disconnect(); requestAnimationFrame(() => setTimeout(() => yes(String(performance.now() - began)))); } });
		look.observe(document.body, { subtree: true, childList: true }); document.querySelector("ul.rows a.row").click(); })`)
	b.ReportMetric(1000*drawn, "ms-round-drawn")
	b.ReportMetric(threadTime(p)-began, "ms-cpu-round-drawn")
}

const lineBits = 10e6 // bit/s

// slowLine carries bytes as a line of lineBits does, all connections together.
type slowLine struct {
	net.Listener
	carried atomic.Int64
	mu      sync.Mutex
	free    time.Time // when the line has carried all it was given
}

func newSlowLine(b *testing.B, to string) *slowLine {
	b.Helper()
	l, err := net.Listen("tcp", "127.0.0.1:0")
	must(b, err)
	b.Cleanup(func() { _ = l.Close() })
	s := &slowLine{Listener: l}
	go func() {
		for {
			phone, err := l.Accept()
			if err != nil {
				return
			}
			there, err := net.Dial("tcp", strings.TrimPrefix(to, "http://"))
			if err != nil {
				_ = phone.Close()
				return
			}
			go s.carry(there, phone)
			go s.carry(phone, there)
		}
	}()
	return s
}

func (s *slowLine) carry(to, from net.Conn) {
	defer to.Close()
	buf := make([]byte, 4<<10)
	for {
		n, err := from.Read(buf)
		if n > 0 {
			s.mu.Lock()
			s.free = time.Now().Add(max(0, time.Until(s.free))).Add(time.Duration(float64(n*8) / lineBits * 1e9))
			until := s.free
			s.mu.Unlock()
			s.carried.Add(int64(n))
			time.Sleep(time.Until(until))
			if _, err := to.Write(buf[:n]); err != nil {
				return
			}
		}
		if err != nil {
			return
		}
	}
}

// threadTime is how long the page's own thread has worked, in ms.
func threadTime(p *handheld) float64 {
	_, err := chromedp.Call(p.Ctx, performance.Enable, performance.EnableParams{})
	must(p.T, err)
	got, err := chromedp.Call(p.Ctx, performance.GetMetrics, cdp.Empty{})
	must(p.T, err)
	for _, m := range got.Metrics {
		if m.Name == "ThreadTime" {
			return m.Value * 1000
		}
	}
	return math.NaN()
}
