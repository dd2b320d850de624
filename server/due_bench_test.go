package server

import (
	"bytes"
	"context"
	"encoding/json"
	"flag"
	"fmt"
	"testing"
	"time"

	"tripwell/forms"
	"tripwell/store"
	"tripwell/store/record"
)

var (
	dueDevices = flag.Int("due-devices", 100_000, "devices of BenchmarkDue")
	dueSites   = flag.Int("due-sites", 2_000, "sites of BenchmarkDue")
)

// dueStore is a store with many sites and devices, each device with a last test of each task on a day of its own, and a
// year of monthly tests at some, so that every site has dates, overdue ones and months behind it.
func dueStore(b *testing.B, sites, devices int) *Server {
	b.Helper()
	now := time.Date(2026, 12, 1, 15, 0, 0, 0, time.UTC)
	st, err := store.Open(b.TempDir(), store.Options{Now: func() time.Time { return now }, Create: true})
	must(b, err)
	b.Cleanup(func() { must(b, st.Close()) })
	w := &dueWriter{b: b, st: st, at: now.AddDate(-2, 0, 0), n: map[string]int64{}}
	w.by = w.id()
	for i := range sites {
		log, place := w.id(), w.id()
		w.put("site.registered", log, log, fmt.Sprintf(`{"set":{"code":"S-%04d","name":"Site %d","zone":"America/Chicago","standard":"NEC"}}`, i, i))
		for d := range devices / sites {
			if d%4 == 0 {
				place = w.id()
				w.put("place.registered", log, place, fmt.Sprintf(`{"set":{"building":"Main","floor":"Floor %d","room":"Room %d","name":"By the sink","order":%d}}`, d/100, d/4, d))
			}
			device := w.id()
			w.put("device.registered", log, device, fmt.Sprintf(`{"set":{"kind":"gfci-receptacle","place":%q,"rating_a":20,"installed":"2019-03-01"}}`, place))
			day := now.AddDate(0, 0, -1-(i*7+d*13)%420).Format(time.DateOnly)
			w.put("entry.imported", log, device, fmt.Sprintf(`{"form":"gfci-receptacle/instrument","day":%q,"result":"pass"}`, day))
			if button := now.AddDate(0, 0, -1-(i+d)%35).Format(time.DateOnly); d%8 > 0 {
				w.put("entry.imported", log, device, fmt.Sprintf(`{"form":"gfci-receptacle/button","day":%q,"result":"pass"}`, button))
				continue
			}
			for m := range 12 {
				w.put("entry.imported", log, device, fmt.Sprintf(`{"form":"gfci-receptacle/button","day":%q,"result":"pass"}`, now.AddDate(0, m-12, 0).Format(time.DateOnly)))
			}
		}
	}
	w.flush()
	s, err := New(st, Options{})
	must(b, err)
	return s
}

type dueWriter struct {
	b     *testing.B
	st    *store.Store
	at    time.Time
	by    string
	clock uint64
	n     map[string]int64
	batch []store.Incoming
	ids   uint64
}

func (w *dueWriter) id() string {
	w.ids++
	var r [10]byte
	for i := range 8 {
		r[2+i] = byte(w.ids >> (8 * (7 - i)))
	}
	return record.NewID(w.at, r)
}

func (w *dueWriter) put(kind, log, subject, body string) {
	w.n[log]++
	w.clock = record.NextClock(w.clock, w.at)
	w.batch = append(w.batch, store.Incoming{Record: record.Write(record.Record{ID: w.id(), Kind: kind, V: 1, Log: log, Subject: subject, At: w.at, Clock: w.clock,
		By: w.by, From: w.by, N: w.n[log], Body: json.RawMessage(body)})})
	if len(w.batch) == 20_000 {
		w.flush()
	}
}

func (w *dueWriter) flush() {
	w.b.Helper()
	receipts, err := w.st.Push(context.Background(), store.Sender{Owner: true}, w.batch)
	must(w.b, err)
	for _, r := range receipts {
		if r.State != "stored" {
			w.b.Fatalf("%+v", r)
		}
	}
	w.batch = nil
}

// BenchmarkDue renders the page of the next 200 dates among all devices, and the overview of all sites. Floor: the same
// templates with the same values, already made.
func BenchmarkDue(b *testing.B) {
	s := dueStore(b, *dueSites, *dueDevices)
	all := store.Scope{All: true, Role: "manager"}
	on := forms.DayOf(s.store.Now())
	b.Run("next-200", func(b *testing.B) {
		s.benchPage(b, all, "dates.html", func(v *store.View) (any, int, error) {
			view := datesPage{Frame: frameOf("Dates", "dates"), On: on.String()}
			err := s.buildDates(v, datesAsk{within: "", on: on, today: on}, &view)
			rows := 0
			for _, g := range view.Groups {
				rows += len(g.Rows)
			}
			return view, rows, err
		}, datesShown)
	})
	b.Run("overview", func(b *testing.B) {
		s.benchPage(b, all, "overview.html", func(v *store.View) (any, int, error) {
			view := overviewPage{Frame: frameOf("Overview", "overview")}
			err := s.buildOverview(v, &view)
			return view, len(view.Sites), err
		}, *dueSites)
	})
}

// benchPage makes and renders a page, and renders it again from the values.
func (s *Server) benchPage(b *testing.B, sc store.Scope, page string, build func(*store.View) (any, int, error), rows int) {
	b.Helper()
	var ours, floor time.Duration
	render := func(view any) int {
		var out bytes.Buffer
		must(b, s.pages[page].Execute(&out, view))
		return out.Len()
	}
	size := 0
	var constant any
	for b.Loop() {
		began := time.Now()
		must(b, s.store.View(sc, func(v *store.View) error {
			view, n, err := build(v)
			if n != rows {
				b.Fatalf("%s: got %d rows, want %d", page, n, rows)
			}
			constant = view
			return err
		}))
		size = render(constant)
		ours += time.Since(began)
		began = time.Now()
		render(constant)
		floor += time.Since(began)
	}
	b.ReportMetric(float64(ours)/float64(floor), "x-floor")
	b.ReportMetric(float64(size)/(1<<10), "KB")
	b.ReportMetric(float64(ours.Milliseconds())/float64(b.N), "ms/page")
}
