package store

import (
	"context"
	"encoding/json"
	"flag"
	"fmt"
	"slices"
	"sync"
	"sync/atomic"
	"testing"
	"time"

	"tripwell/forms"
	"tripwell/store/record"
)

var rejudgeEntries = flag.Int("rejudge-entries", 100_000, "entries of BenchmarkRejudge")

// BenchmarkRejudge judges -rejudge-entries entries again, after a revision of a limit set from a past day, while four
// phones push one entry at a time; beside it the same phones push into the same store with nothing else to do. It
// reports the 99th percentile and the median of both in ms, their ratio, and the entries judged again a second.
func BenchmarkRejudge(b *testing.B) {
	n := *rejudgeEntries
	if testing.Short() {
		n = min(n, 20_000)
	}
	s, site := benchStore(b, 10, max(n/300, 10), n)
	benchBeside(b, s, site, n, nextBenchRevision)
}

// BenchmarkReplan sets the dates of 5,000 devices anew, after a revision of the plan of button tests, while four phones
// push. It reports what BenchmarkRejudge reports.
func BenchmarkReplan(b *testing.B) {
	const sites, devices = 10, 500
	s, site := benchStore(b, sites, devices, 15_000)
	benchBeside(b, s, site, sites*devices, nextBenchPlan)
}

// nextBenchPlan is a revision of the plan of button tests: every second month, monthly, turn about.
func nextBenchPlan(b *testing.B, s *Store) (draft Draft) {
	b.Helper()
	err := s.View(Scope{Role: "owner", All: true}, func(v *View) error {
		held, err := v.PlanRevisions("", "button-monthly")
		if err != nil {
			return err
		}
		plan := *held[len(held)-1].Plan
		if plan.Every = "P2M"; len(held)%2 == 0 {
			plan.Every = "P1M"
		}
		raw, err := encodeBody(&plan)
		if err != nil {
			return err
		}
		next, _, err := v.Next(RuleDraft{Kind: "plan.set", JSON: raw}, forms.Date(2020, time.January, 1), forms.NoDay)
		if err != nil {
			return err
		}
		draft, err = next.Draft("", s.ID())
		return err
	})
	if err != nil {
		b.Fatal(err)
	}
	return draft
}

// benchBeside makes a revision that touches n entries or devices while phones push, and measures their pushes.
func benchBeside(b *testing.B, s *Store, site string, n int, next func(*testing.B, *Store) Draft) {
	b.Helper()
	pusher := newBenchPusher(b, s, site)
	for b.Loop() {
		idle := pusher.run(func() bool { return false }, 3*time.Second)
		revision := next(b, s)
		began := time.Now()
		if _, err := s.Append(context.Background(), revision); err != nil {
			b.Fatal(err)
		}
		busy := pusher.run(func() bool { return unfinished(b, s) == 0 }, time.Hour)
		took := time.Since(began)
		idle = append(idle, pusher.run(func() bool { return false }, 3*time.Second)...) // before and after: the machine changes too
		slices.Sort(idle)
		b.ReportMetric(percentile(idle, 0.99), "p99-alone-ms")
		b.ReportMetric(percentile(busy, 0.99), "p99-rejudging-ms")
		b.ReportMetric(percentile(idle, 0.5), "median-alone-ms")
		b.ReportMetric(percentile(busy, 0.5), "median-rejudging-ms")
		b.ReportMetric(percentile(busy, 0.99)/percentile(idle, 0.99), "x-p99")
		b.ReportMetric(float64(n)/took.Seconds(), "rejudged/s")
		b.ReportMetric(float64(len(busy)), "pushes-meanwhile")
	}
}

func unfinished(b *testing.B, s *Store) (n int) {
	if err := s.View(Scope{Role: "owner", All: true}, func(v *View) error { n = v.Unfinished(); return nil }); err != nil {
		b.Error(err)
	}
	return n
}

// nextBenchRevision is a revision of us-class-a under which every instrument entry fails or passes, turn about.
func nextBenchRevision(b *testing.B, s *Store) Draft {
	b.Helper()
	var draft Draft
	err := s.View(Scope{Role: "owner", All: true}, func(v *View) error {
		held, err := v.LimitRevisions("", "us-class-a")
		if err != nil {
			return err
		}
		set := *held[len(held)-1].LimitSet
		set.Limits = slices.Clone(set.Limits)
		for i := range set.Limits {
			if l := &set.Limits[i]; l.ID == "trip-current" {
				most := 11 - *l.Max // 6, 5, 6 …; the entries read 5.2 mA
				l.Max = &most
			}
		}
		raw, err := encodeBody(&set)
		if err != nil {
			return err
		}
		next, _, err := v.Next(RuleDraft{Kind: "limits.set", JSON: raw}, forms.Date(1990, time.January, 1), forms.NoDay)
		if err != nil {
			return err
		}
		draft, err = next.Draft("", s.ID())
		return err
	})
	if err != nil {
		b.Fatal(err)
	}
	return draft
}

// benchPusher is four phones, each sending one entry after the other.
type benchPusher struct {
	b      *testing.B
	s      *Store
	site   string
	device string
	by     string
	phones []string
	n      []int64
	made   atomic.Int64
}

func newBenchPusher(b *testing.B, s *Store, site string) *benchPusher {
	b.Helper()
	person, err := s.PutPerson(context.Background(), s.ID(), Person{Name: "Crew 1", Role: "manager", All: true, Active: true})
	if err != nil {
		b.Fatal(err)
	}
	p := &benchPusher{b: b, s: s, site: site, by: person.ID, n: make([]int64, 4)}
	for i := range 4 {
		id := newID(s.Now().Add(time.Duration(i) * time.Millisecond))
		if _, err := s.Enrol(context.Background(), p.by, id); err != nil {
			b.Fatal(err)
		}
		p.phones = append(p.phones, id)
	}
	err = s.View(Scope{Role: "owner", All: true}, func(v *View) error {
		for d, err := range v.Devices(site) {
			if err != nil {
				return err
			}
			p.device = d.ID
			return nil
		}
		return fmt.Errorf("site %s has no device", site)
	})
	if err != nil {
		b.Fatal(err)
	}
	return p
}

// run pushes until done says so or the time is up, and gives what each push took, in ms, sorted.
func (p *benchPusher) run(done func() bool, most time.Duration) []float64 {
	p.b.Helper()
	var mu sync.Mutex
	var all []float64
	var stop atomic.Bool
	var phones sync.WaitGroup
	for i := range p.phones {
		phones.Go(func() {
			for !stop.Load() {
				began := time.Now()
				if err := p.push(i); err != nil {
					p.b.Error(err)
					return
				}
				took := float64(time.Since(began).Microseconds()) / 1000
				mu.Lock()
				all = append(all, took)
				mu.Unlock()
				time.Sleep(5 * time.Millisecond)
			}
		})
	}
	for end := time.Now().Add(most); time.Now().Before(end) && !done(); {
		time.Sleep(50 * time.Millisecond)
	}
	stop.Store(true)
	phones.Wait()
	slices.Sort(all)
	return all
}

func (p *benchPusher) push(i int) error {
	p.n[i]++
	at := p.s.Now()
	var random [10]byte
	serial := p.made.Add(1)
	for k := range 8 {
		random[2+k] = byte(serial >> (8 * (7 - k)))
	}
	random[0] = byte(i + 1)
	raw := record.Write(record.Record{ID: record.NewID(at, random), Kind: "entry.made", V: 1, Log: p.site, Subject: p.device, At: at,
		Clock: uint64(at.UnixMilli())<<16 + uint64(serial)&0xffff, By: p.by, From: p.phones[i], N: p.n[i],
		Body: json.RawMessage(`{"form":"gfci-receptacle/button","given":{"kind":"gfci-receptacle","form_rev":1,"limit_set":"us-class-a","limit_rev":1},"readings":{"button_trips":{"value":"yes"},"button_resets":{"value":"yes"}},"source":"phone"}`)})
	receipts, err := p.s.Push(context.Background(), Sender{Installation: p.phones[i]}, []Incoming{{Record: raw}})
	if err == nil && receipts[0].State != "stored" {
		err = fmt.Errorf("push: %s %s", receipts[0].State, receipts[0].Text)
	}
	return err
}

func percentile(sorted []float64, p float64) float64 {
	if len(sorted) == 0 {
		return 0
	}
	return sorted[min(int(p*float64(len(sorted))), len(sorted)-1)]
}
