package bundle

import (
	"bytes"
	"context"
	"crypto/sha256"
	"encoding/json"
	"flag"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"runtime"
	"strings"
	"sync"
	"testing"
	"time"

	"tripwell/export/register"
	"tripwell/forms"
	"tripwell/store"
	"tripwell/store/record"
)

var benchEntries = flag.Int("bundle-entries", 100_000, "entries in the store of BenchmarkBundle and BenchmarkVerify")

// benchBundle is a store of many button tests and its bundle in a file, made once for both benchmarks.
type benchBundle struct {
	house *house
	path  string
}

// benchDevices is how many devices the entries are spread over: each is pressed once a month.
const benchDevices = 2_000

func newBenchBundle(b *testing.B) *benchBundle {
	h := newHouse(b)
	devices := h.manyDevices(benchDevices)
	for made := 0; made < *benchEntries; {
		var batch []store.Incoming
		for range min(500, *benchEntries-made) {
			if made > 0 && made%(benchDevices/20) == 0 { // twenty days' work a month
				h.now = h.now.Add(36 * time.Hour)
			}
			made++
			h.n++
			h.now = h.now.Add(30 * time.Second)
			d := devices[made%len(devices)]
			body, err := json.Marshal(map[string]any{"form": d.Kind + "/button", "given": map[string]any{"kind": d.Kind}, "source": "phone", "note": fmt.Sprint("round ", made),
				"readings": map[string]any{"condition": "sound", "found": "on", "button_trips": "yes", "button_resets": "yes"}})
			must(b, err)
			h.clock = max(uint64(h.now.UnixMilli())<<16, h.clock+1)
			batch = append(batch, store.Incoming{Record: record.Write(record.Record{ID: h.newID("bench", fmt.Sprint(made)), Kind: "entry.made", V: 1, Log: h.site.ID,
				Subject: d.ID, At: h.now, Clock: h.clock, By: h.crew.ID, From: h.phone, N: h.n, Body: body})})
		}
		got, err := h.Push(context.Background(), store.Sender{Installation: h.phone, Sent: h.now}, batch)
		must(b, err)
		for _, r := range got {
			if r.State != "stored" {
				b.Fatalf("%s: %s", r.State, r.Text)
			}
		}
	}
	return &benchBundle{h, filepath.Join(b.TempDir(), "bundle.zip")}
}

// manyDevices takes in a register of so many devices with a button.
func (h *house) manyDevices(n int) (devices []store.DeviceRow) {
	h.t.Helper()
	list := "site,building,floor,room,place,kind,panel,circuit,make,model,installed\n"
	for i := range n {
		list += fmt.Sprintf("%s,Annex,Floor %d,Room %d,Wall %d,gfci-receptacle,LP-%d,%d,Make A,G20,2021-04-12\n", h.site.Code, i/200, i/8, i%8, i/160, i/4%40+1)
	}
	_, err := register.Import(context.Background(), h.Store, "register.csv", strings.NewReader(list), register.Options{By: h.ID(), NewTags: true}, nil)
	must(h.t, err)
	must(h.t, h.View(everything, func(v *store.View) error {
		for d, err := range v.Devices(h.site.ID) {
			if err != nil {
				return err
			}
			if d.Place.Building == "Annex" {
				devices = append(devices, d)
			}
		}
		return nil
	}))
	if len(devices) != n {
		h.t.Fatalf("got %d devices of %d", len(devices), n)
	}
	return devices
}

func (bb *benchBundle) write(b *testing.B) {
	f, err := os.Create(bb.path)
	must(b, err)
	must(b, Write(context.Background(), f, bb.house.Store, everything, Ask{From: forms.NoDay, To: forms.NoDay}))
	must(b, f.Close())
}

// floor hashes what the bundle holds once: no check of it can do less.
func (bb *benchBundle) floor(b *testing.B) time.Duration {
	f, err := os.Open(bb.path)
	must(b, err)
	defer f.Close()
	info, err := f.Stat()
	must(b, err)
	r, err := open(f, info.Size())
	must(b, err)
	var all bytes.Buffer
	for name := range r.files {
		in, err := r.files[name].Open()
		must(b, err)
		_, err = io.Copy(&all, in)
		must(b, err)
	}
	from := time.Now()
	sha256.Sum256(all.Bytes())
	return time.Since(from)
}

// BenchmarkBundle writes a bundle of 100,000 entries (-bundle-entries) to a file: records, stamps, tree, and the workbook made from
// them anew. x-floor is against hashing the unpacked bytes once; there is no goal but to know it.
func BenchmarkBundle(b *testing.B) {
	bb := newBenchBundle(b)
	for b.Loop() {
		peak := watchHeap()
		from := time.Now()
		bb.write(b)
		took := time.Since(from)
		b.ReportMetric(peak(), "peak-MB")
		b.ReportMetric(took.Seconds(), "s")
		b.ReportMetric(float64(took)/float64(bb.floor(b)), "x-floor")
	}
}

// BenchmarkVerify checks that bundle, every cell of its workbook included. The floor is that of BenchmarkBundle.
func BenchmarkVerify(b *testing.B) {
	bb := newBenchBundle(b)
	bb.write(b)
	for b.Loop() {
		f, err := os.Open(bb.path)
		must(b, err)
		info, err := f.Stat()
		must(b, err)
		peak := watchHeap()
		from := time.Now()
		r, err := Verify(context.Background(), f, info.Size(), Check{})
		took := time.Since(from)
		must(b, err)
		b.ReportMetric(peak(), "peak-MB")
		if len(r.Findings) > 0 {
			b.Fatal(r.text())
		}
		b.ReportMetric(took.Seconds(), "s")
		b.ReportMetric(float64(took)/float64(bb.floor(b)), "x-floor")
		must(b, f.Close())
	}
}

// watchHeap gives, when called, the most heap in MB that was in use since, above what was in use before.
func watchHeap() func() float64 {
	runtime.GC()
	var m runtime.MemStats
	runtime.ReadMemStats(&m)
	base, most := m.HeapInuse, m.HeapInuse
	stop, done := make(chan struct{}), sync.WaitGroup{}
	done.Go(func() {
		for {
			select {
			case <-stop:
				return
			case <-time.After(20 * time.Millisecond):
				runtime.ReadMemStats(&m)
				most = max(most, m.HeapInuse)
			}
		}
	})
	return func() float64 {
		close(stop)
		done.Wait()
		return float64(most-base) / 1e6
	}
}
