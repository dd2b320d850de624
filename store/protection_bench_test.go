package store

import (
	"encoding/json"
	"errors"
	"fmt"
	"testing"
	"time"

	"go.etcd.io/bbolt"

	"tripwell/forms"
	"tripwell/store/record"
)

// circuitStore is one site with n devices on circuits of twenty: a protector with six receptacles behind it, twice, and six
// more that hang on the circuit itself.
func circuitStore(b *testing.B, n int) (s *Store, site string, circuits, devices []string) {
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
	w := &benchWriter{b: b, s: s, at: time.Date(2025, 1, 6, 7, 0, 0, 0, time.UTC), by: newID(now), n: map[string]int64{}}
	site = w.id()
	w.put("site.registered", site, site, `{"set":{"code":"ELM","name":"Elm","zone":"UTC","standard":"NEC"}}`)
	panel, circ, source := w.id(), "", ""
	w.put("panel.set", site, panel, `{"set":{"name":"LP-2"}}`)
	for i := range n {
		if i%20 == 0 {
			circ = w.id()
			circuits = append(circuits, circ)
			w.put("circuit.set", site, circ, fmt.Sprintf(`{"set":{"panel":%q,"numbers":"%d","breaker_a":20,"conductor":"12 AWG","standard":"NEC"}}`, panel, i/20+1))
		}
		place, device, kind, by := w.id(), w.id(), forms.ProtectedReceptacle, source
		switch {
		case i%20 >= 14:
			kind, by = forms.PlainReceptacle, ""
		case i%20 == 0 || i%20 == 7:
			kind, by, source = forms.GFCIReceptacle, "", device
		}
		fields := map[string]any{"kind": kind, "place": place, "circuit": circ, "rating_a": 20, "installed": "2019-03-01"}
		if by != "" {
			fields["fed_by"] = by
		}
		body, err := json.Marshal(map[string]any{"set": fields})
		if err != nil {
			b.Fatal(err)
		}
		w.put("place.registered", site, place, fmt.Sprintf(`{"set":{"building":"Main","floor":"Floor %d","room":"Room %d","name":"By the sink","order":%d}}`, i/200, i/8, i%8))
		w.put("device.registered", site, device, string(body))
		devices = append(devices, device)
	}
	w.flush()
	return s, site, circuits, devices
}

// BenchmarkMap changes what feeds one outlet and reads the map of its circuit of twenty anew, in a site of 1,000, 10,000 and
// 100,000 devices, in the transaction that takes the change in (which is then given up, so that no disk is measured).
// Floor: read the rows of that circuit's devices, as its page lists them.
func BenchmarkMap(b *testing.B) {
	for _, n := range []int{1_000, 10_000, 100_000} {
		b.Run(fmt.Sprint(n), func(b *testing.B) { benchMap(b, n) })
	}
}

func benchMap(b *testing.B, n int) {
	s, site, circuits, devices := circuitStore(b, n)
	on, givenUp := forms.Date(2026, time.December, 1), errors.New("given up")
	clock, i := uint64(1)<<62, 0
	var ours, floor time.Duration
	change := func(tx *bbolt.Tx, device, source string) {
		clock++
		raw := fmt.Sprintf(`{"set":{"fed_by":%q}}`, source)
		r := &record.Record{ID: newID(on.Time()), Kind: "device.set", V: 1, Log: site, Subject: device, At: on.Time(), Clock: clock, By: devices[0], From: devices[0], N: 1, Body: json.RawMessage(raw)}
		f := newFold(tx)
		if err := f.record(r, record.Stamp{Received: on.Time()}, 1<<40); err != nil {
			b.Fatal(err)
		}
		if err := f.flush(); err != nil {
			b.Fatal(err)
		}
	}
	for b.Loop() {
		for range 200 {
			i = (i + 7919) % (len(devices) / 20)
			circuit := circuits[i]
			err := s.db.Update(func(tx *bbolt.Tx) error {
				v := &View{tx: tx, s: s, scope: all}
				began := time.Now()
				sv, err := v.siteNamed(site)
				if err != nil {
					return err
				}
				w := newWiring(v, sv)
				ids, err := w.onCircuit(parseID(circuit), false)
				if err != nil {
					return err
				}
				for _, id := range ids {
					d, err := v.deviceThing(sv, id)
					if err != nil {
						return err
					}
					if _, ok, err := v.rowAt(sv, d.n, on); err != nil || !ok {
						return fmt.Errorf("row %s: %v", id, err)
					}
				}
				floor += time.Since(began)

				began = time.Now()
				change(tx, devices[i*20+3], devices[i*20+15])
				v = &View{tx: tx, s: s, scope: all}
				p, err := v.ProtectionOn(circuit, on)
				if err != nil {
					return err
				}
				if dead := p.Dead(circuit); len(dead) != 20 || p.Source(devices[i*20+3]) != devices[i*20+15] {
					return fmt.Errorf("%d of 20 devices on the map", len(dead))
				}
				for _, id := range ids {
					p.Cover(id.String())
				}
				ours += time.Since(began)
				return givenUp
			})
			if err != givenUp {
				b.Fatal(err)
			}
		}
	}
	b.ReportMetric(float64(ours)/float64(floor), "x-floor")
	b.ReportMetric(float64(ours.Microseconds())/float64(b.N*200), "µs/change")
}
