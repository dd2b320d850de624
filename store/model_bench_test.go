package store

import (
	"context"
	"encoding/json"
	"flag"
	"fmt"
	"runtime"
	"sync/atomic"
	"testing"
	"time"

	"go.etcd.io/bbolt"

	"tripwell/forms"
	"tripwell/store/record"
)

var rebuildRecords = flag.Int("rebuild-records", 100_000, "records of BenchmarkRebuild")

// benchStore is a store with devices devices at each of sites sites, filled up with entries to n records or more: a
// button test each month, told in one tap, and an instrument test a year with figures of its own, in walking order, as
// rounds make them.
func benchStore(b *testing.B, sites, devices, n int) (*Store, string) {
	b.Helper()
	now := time.Date(2026, 12, 1, 8, 0, 0, 0, time.UTC)
	s, err := Open(b.TempDir(), Options{Now: func() time.Time { return now }, Create: true})
	if err != nil {
		b.Fatal(err)
	}
	b.Cleanup(func() {
		if err := s.Close(); err != nil {
			b.Error(err)
		}
	})
	w := &benchWriter{b: b, s: s, at: time.Date(2020, 1, 6, 7, 0, 0, 0, time.UTC), by: newID(now), n: map[string]int64{}}
	var logs []string
	var ids [][]string
	for i := range sites {
		log := w.id()
		logs, ids = append(logs, log), append(ids, nil)
		w.put("site.registered", log, log, fmt.Sprintf(`{"set":{"code":"S-%d","name":"Site %d","zone":"America/Chicago","standard":"NEC"}}`, i, i))
		panel, circ := w.id(), w.id()
		w.put("panel.set", log, panel, `{"set":{"name":"LP-2"}}`)
		w.put("circuit.set", log, circ, fmt.Sprintf(`{"set":{"panel":%q,"numbers":"14","breaker_a":20,"supply":"grounded"}}`, panel))
		for d := range devices {
			place, device := w.id(), w.id()
			w.put("place.registered", log, place, fmt.Sprintf(`{"set":{"building":"Main","floor":"Floor %d","room":"Room %d","name":"By the sink","order":%d}}`, d/100, d/4, d%4))
			w.put("device.registered", log, device, fmt.Sprintf(`{"set":{"kind":"gfci-receptacle","place":%q,"circuit":%q,"make":"Maker","model":"M-20","serial":"%08d","rating_a":20,"installed":"2019-03-01"}}`, place, circ, d))
			ids[i] = append(ids[i], device)
		}
	}
	for round := 0; w.written < n; round++ {
		for i, log := range logs {
			for _, d := range ids[i] {
				if round%12 == 11 {
					w.put("entry.made", log, d, fmt.Sprintf(`{"form":"gfci-receptacle/instrument","given":{"kind":"gfci-receptacle","form_rev":1,"limit_set":"us-class-a","limit_rev":1,"rating_a":20,"equipment_ground":"yes","supply":"grounded"},"readings":{"condition":{"value":"sound"},"found":{"value":"on"},"wiring":{"value":"correct"},"ground_continuous":{"value":"yes"},"ground_ohm":{"typed":"0.31","unit":"ohm","value":0.31},"voltage_v":{"typed":"121","unit":"V","value":121},"button_trips":{"value":"yes"},"button_resets":{"value":"yes"},"trip_current_ma":{"typed":"%.1[2]f","unit":"mA","value":%.1[2]f},"test_current_ma":{"typed":"6.8","unit":"mA","value":6.8},"trip_time_ms":{"typed":"%[1]d","unit":"ms","value":%[1]d},"restored":{"value":"yes"}},"shown":{"result":"pass","limit_rev":1,"judge":1},"source":"phone"}`, 400+w.written%300, 4.2+float64(w.written/7%15)/10))
				} else {
					w.put("entry.made", log, d, `{"form":"gfci-receptacle/button","given":{"kind":"gfci-receptacle","form_rev":1,"limit_set":"us-class-a","limit_rev":1,"rating_a":20,"equipment_ground":"yes"},"readings":{"condition":{"value":"sound"},"found":{"value":"on"},"button_trips":{"value":"yes"},"button_resets":{"value":"yes"}},"shown":{"result":"pass","limit_rev":1,"judge":1},"source":"phone"}`)
				}
			}
		}
		w.at = w.at.AddDate(0, 1, 0)
	}
	w.flush()
	return s, logs[0]
}

// benchWriter appends records in large groups.
type benchWriter struct {
	b       *testing.B
	s       *Store
	at      time.Time
	by      string
	clock   uint64
	n       map[string]int64
	lines   [][]byte
	written int
	ids     uint64
}

func (w *benchWriter) id() string {
	w.ids++
	var r [10]byte
	for i := range 8 {
		r[2+i] = byte(w.ids >> (8 * (7 - i)))
	}
	return record.NewID(w.at, r)
}

func (w *benchWriter) put(kind, log, subject, body string) {
	w.n[log]++
	w.clock = record.NextClock(w.clock, w.at)
	w.lines = append(w.lines, record.Write(record.Record{ID: w.id(), Kind: kind, V: 1, Log: log, Subject: subject, At: w.at, Clock: w.clock,
		By: w.by, From: w.by, N: w.n[log], Body: json.RawMessage(body)}))
	if w.written++; len(w.lines) == 20_000 {
		w.flush()
	}
}

func (w *benchWriter) flush() {
	err := w.s.db.Update(func(tx *bbolt.Tx) error {
		g := newGroup(w.s, tx)
		for _, raw := range w.lines {
			r, f := record.Parse(raw)
			if f != nil {
				return f
			}
			if _, err := g.accept(r, stampFor(raw, record.Stamp{Received: r.At})); err != nil {
				return err
			}
		}
		return g.flush()
	})
	if err != nil {
		w.b.Fatal(err)
	}
	w.lines = nil
}

// BenchmarkRebuild computes the read models of -rebuild-records records anew. Floor: read the same records and decode
// them, envelope, stamp and body, one after the other.
func BenchmarkRebuild(b *testing.B) {
	s, _ := benchStore(b, 10, *rebuildRecords/300, *rebuildRecords)
	defer func(was int) { rebuildSlice = was }(rebuildSlice)
	rebuildSlice = 50_000 // tests make it small
	hash, err := s.ViewHash()
	if err != nil {
		b.Fatal(err)
	}
	var ours, floor time.Duration
	peak := uint64(0)
	for b.Loop() {
		began := time.Now()
		err := s.view(func(tx *bbolt.Tx) error {
			return tx.Bucket(bktRec).ForEach(func(k, v []byte) error {
				rec, err := readRec(v)
				if err != nil {
					return err
				}
				r, f := record.Reread(rec.raw)
				if f != nil {
					return f
				}
				if _, err := record.ParseStamp(rec.stamp); err != nil {
					return err
				}
				if r.Kind == "entry.made" {
					_, err = readEntry(r)
				}
				return err
			})
		})
		if err != nil {
			b.Fatal(err)
		}
		floor += time.Since(began)
		began = time.Now()
		stop := watchHeap(&peak)
		if err := s.Rebuild(context.Background(), nil); err != nil {
			b.Fatal(err)
		}
		stop()
		ours += time.Since(began)
	}
	if after, err := s.ViewHash(); err != nil || after != hash {
		b.Fatalf("rebuilt: hash %s %v, want %s", after, err, hash)
	}
	b.ReportMetric(float64(ours)/float64(floor), "x-floor")
	b.ReportMetric(float64(peak)/(1<<20), "peak-MB")
}

// watchHeap keeps the largest heap seen until stop is called.
func watchHeap(peak *uint64) (stop func()) {
	runtime.GC()
	var done atomic.Bool
	ended := make(chan struct{})
	go func() {
		defer close(ended)
		var m runtime.MemStats
		for !done.Load() {
			runtime.ReadMemStats(&m)
			*peak = max(*peak, m.HeapInuse)
			time.Sleep(20 * time.Millisecond)
		}
	}()
	return func() { done.Store(true); <-ended }
}

// BenchmarkSnapshot reads and encodes what a phone takes along of one site with 5,000 devices. Floor: encode the same
// snapshot, already in memory.
func BenchmarkSnapshot(b *testing.B) {
	s, site := benchStore(b, 1, 5_000, 10_000+13*5_000)
	var ours, floor time.Duration
	var constant Snapshot
	bytes := 0
	read := func() {
		err := s.View(Scope{Role: "owner", All: true}, func(v *View) (err error) {
			constant, err = v.Snapshot(site, forms.Date(2026, time.December, 1))
			return err
		})
		if err != nil {
			b.Fatal(err)
		}
	}
	encode := func() {
		out, err := json.Marshal(constant)
		if err != nil {
			b.Fatal(err)
		}
		bytes = len(out)
	}
	read()
	for b.Loop() {
		began := time.Now()
		encode()
		floor += time.Since(began)
		began = time.Now()
		read()
		encode()
		ours += time.Since(began)
	}
	b.ReportMetric(float64(ours)/float64(floor), "x-floor")
	b.ReportMetric(float64(bytes)/(1<<20), "MB")
}
