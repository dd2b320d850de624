package store

import (
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"math/rand"
	"slices"
	"strings"
	"testing"
	"time"

	"tripwell/forms"
	"tripwell/store/record"
)

// hand writes records by anybody, at any time.
type hand struct {
	t     testing.TB
	site  string
	lines []Incoming
}

func (h *hand) write(by string, at time.Time, kind, log, subject string, body any) string {
	h.t.Helper()
	raw, err := json.Marshal(body)
	if err != nil {
		h.t.Fatal(err)
	}
	from := newID(at)
	id := newID(at)
	line := record.Write(record.Record{ID: id, Kind: kind, V: 1, Log: log, Subject: subject, At: at, Clock: record.NextClock(0, at),
		By: by, From: from, N: 1, Body: raw})
	h.lines = append(h.lines, Incoming{Record: line, Held: []Held{{Store: from, Received: at.Add(time.Minute)}}})
	return id
}

func (h *hand) grant(person string, at time.Time, role string) {
	h.write(newID(at), at, "grant.set", record.Office, person, map[string]any{"role": role, "all": false, "sites": []string{h.site}, "active": true})
}

// Crew change their own entries, a manager everybody's: by the roles at the time of the work, whatever comes first.
func TestGranted_WhoMayChangeAnEntry(t *testing.T) {
	at := time.Date(2026, 3, 2, 9, 0, 0, 0, time.UTC)
	day := func(n int) time.Time { return at.AddDate(0, 0, n) }
	h := &hand{t: t, site: newID(at)}
	h.write(newID(at), at, "site.registered", h.site, h.site, map[string]any{"set": map[string]any{"code": "ELM", "name": "Elm", "zone": "UTC", "standard": "NEC"}})
	tester, mate, manager, demoted, promoted, sooner := newID(at), newID(at), newID(at), newID(at), newID(at), newID(at)
	for person, role := range map[string]string{tester: "crew", mate: "crew", manager: "manager", demoted: "manager", promoted: "crew", sooner: "crew"} {
		h.grant(person, day(0), role)
	}
	h.grant(demoted, day(5), "crew")
	h.grant(promoted, day(20), "manager")
	h.grant(sooner, day(9), "manager")
	cases := []struct {
		by, name string
		withdraw bool
		inForce  bool
	}{
		{tester, "the tester", false, true},
		{mate, "another of the crew", false, false},
		{manager, "a manager", false, true},
		{demoted, "who is no manager any more", false, false},
		{promoted, "who is no manager yet", false, false},
		{sooner, "who has become one", false, true},
		{mate, "another of the crew", true, false},
		{manager, "a manager", true, true},
	}
	entries := make([]string, len(cases))
	for i, c := range cases {
		device := newID(at)
		h.write(manager, day(1), "device.registered", h.site, device, map[string]any{"set": map[string]any{"kind": "gfci-receptacle"}})
		entries[i] = h.write(tester, day(2), "entry.made", h.site, device, button("yes", "yes"))
		body := map[string]any{"entry": entries[i], "reason": "misread"}
		kind := "entry.withdrawn"
		if !c.withdraw {
			kind, body["readings"] = "entry.corrected", button("no", "no")["readings"]
		}
		h.write(c.by, day(10), kind, h.site, entries[i], body)
	}
	var want string
	for round := range 12 {
		if round > 0 {
			rand.New(rand.NewSource(int64(round))).Shuffle(len(h.lines), func(i, j int) { h.lines[i], h.lines[j] = h.lines[j], h.lines[i] })
		}
		s := heldStore(t, h.lines, 1+round*3, day(30))
		err := s.View(all, func(v *View) error {
			for i, c := range cases {
				e, err := v.Entry(entries[i])
				if err != nil {
					return err
				}
				inForce := e.Withdrawn != nil || e.Verdict.Result == forms.Fail
				flagged := slices.ContainsFunc(e.Flags, func(f Flag) bool { return strings.HasSuffix(f.Code, "-idle") })
				if inForce != c.inForce || flagged == c.inForce || len(e.NotPermitted) == 0 == !c.inForce {
					t.Errorf("round %d: changed by %s, withdrawn %v: in force %v, flagged %v, want in force %v", round, c.name, c.withdraw, inForce, flagged, c.inForce)
				}
			}
			return nil
		})
		if err != nil {
			t.Fatal(err)
		}
		got := told(t, s, forms.DayOf(day(30)))
		if want == "" {
			want = got
		}
		if got != want {
			t.Fatalf("round %d: %s", round, firstDifference(got, want))
		}
		rebuiltEqual(t, s)
	}
}

// heldStore is a store that took records with their earlier holders, in groups of a size.
func heldStore(t *testing.T, lines []Incoming, group int, at time.Time) *Store {
	t.Helper()
	s, err := Open(t.TempDir(), Options{Now: func() time.Time { return at }, Create: true})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { _ = s.Close() })
	for batch := range slices.Chunk(lines, group) {
		receipts, err := s.Push(context.Background(), Sender{Owner: true}, batch)
		if err != nil {
			t.Fatal(err)
		}
		for _, rc := range receipts {
			if rc.State != "stored" {
				t.Fatalf("%s: %s %s", rc.ID, rc.State, rc.Text)
			}
		}
	}
	return s
}

func rebuiltEqual(t *testing.T, s *Store) {
	t.Helper()
	before, err := s.ViewHash()
	if err != nil {
		t.Fatal(err)
	}
	if err := s.Rebuild(context.Background(), nil); err != nil {
		t.Fatal(err)
	}
	if after, err := s.ViewHash(); err != nil || after != before {
		t.Errorf("rebuilt: hash %s %v, want %s", after, err, before)
	}
}

// A phone's own push of a change to somebody else's entry is taken, shown, and not in force.
func TestGranted_PushedChangeOfSomebodyElse(t *testing.T) {
	r := newRig(t)
	site := r.site("ELM")
	device := r.device(site, map[string]any{"kind": "gfci-receptacle"})
	a, b := r.phone(r.person("crew", false, site)), r.phone(r.person("crew", false, site))
	line := a.make("entry.made", site, device, button("no", "no"))
	rec, _ := record.Parse(line)
	a.push(line)
	r.pass(time.Hour)
	if got := states(b.push(b.make("entry.withdrawn", site, rec.ID, map[string]any{"entry": rec.ID, "reason": "mine"}))); got[0] != "stored" {
		t.Fatalf("got %v: arrival must not depend on other records", got)
	}
	if s := r.sums(site, forms.DayOf(r.clock())); s.Failed != 1 {
		t.Errorf("%d failed, want 1: the withdrawal is not in force", s.Failed)
	}
	r.pass(time.Hour)
	a.push(a.make("entry.withdrawn", site, rec.ID, map[string]any{"entry": rec.ID, "reason": "wrong outlet"}))
	if s := r.sums(site, forms.DayOf(r.clock())); s.Failed != 0 {
		t.Errorf("%d failed, want none: its tester withdrew it", s.Failed)
	}
}

// Nobody may make a device that looks like its own owner.
func TestEnrol_NoDeviceHasThePersonsID(t *testing.T) {
	r := newRig(t)
	p := r.person("crew", true)
	if _, err := r.Enrol(context.Background(), p.ID, p.ID); code(err) != "conflict" {
		t.Errorf("got %v, want conflict", err)
	}
}

func flagsOf(r *rig, entry string) string {
	r.Helper()
	var out []string
	err := r.View(all, func(v *View) error {
		e, err := v.Entry(entry)
		for _, f := range e.Flags {
			if f.Code != "no-instrument" {
				out = append(out, strings.TrimSpace(f.Code+" "+f.Detail))
			}
		}
		return err
	})
	if err != nil {
		r.Fatal(err)
	}
	return fmt.Sprint(out)
}

func TestFlags_AccessThatEndedBeforeArrival(t *testing.T) {
	r := newRig(t)
	site := r.site("ELM")
	p := r.phone(r.person("crew", false, site))
	device := newID(r.clock())
	early := p.make("entry.made", site, device, button("yes", "yes"))
	p.push(early)
	line := p.make("entry.made", site, device, button("yes", "yes"))
	r.pass(48 * time.Hour)
	p.by.Sites = nil
	if _, err := r.PutPerson(context.Background(), r.ID(), p.by); err != nil {
		t.Fatal(err)
	}
	r.pass(time.Hour)
	if got := states(p.push(line)); got[0] != "stored" {
		t.Fatalf("got %v, want stored: it had the site when it worked", got)
	}
	late := p.make("entry.made", site, device, button("yes", "yes"))
	if got := states(p.push(late)); got[0] != "refused not_permitted" {
		t.Errorf("made after the access ended: got %v", got)
	}
	rec, _ := record.Parse(line)
	if got := flagsOf(r, rec.ID); got != "[access-ended 2026-12-03]" {
		t.Errorf("got %s", got)
	}
	rec, _ = record.Parse(early)
	if got := flagsOf(r, rec.ID); got != "[]" {
		t.Errorf("arrived in time: got %s", got)
	}
}

func TestFlags_NumbersMissingAndUsedTwice(t *testing.T) {
	r := newRig(t)
	site := r.site("ELM")
	p := r.phone(r.person("crew", false, site))
	device := newID(r.clock())
	var lines [][]byte
	var ids []string
	for range 6 {
		line := p.make("entry.made", site, device, button("yes", "yes"))
		rec, _ := record.Parse(line)
		lines, ids = append(lines, line), append(ids, rec.ID)
	}
	gaps := func() string {
		var out []string
		err := r.View(all, func(v *View) error {
			list, err := v.Gaps()
			for _, g := range list {
				if g.Installation != p.id || g.Log != site || g.Person != p.by.ID {
					t.Errorf("gap of another: %+v", g)
				}
				out = append(out, fmt.Sprintf("%d-%d", g.From, g.To))
			}
			return err
		})
		if err != nil {
			t.Fatal(err)
		}
		return fmt.Sprint(out)
	}
	p.push(lines[0], lines[5])
	if got := flagsOf(r, ids[5]); got != "[n-gap 2–5]" || gaps() != "[2-5]" {
		t.Errorf("1 and 6 came: flags %s, gaps %s", got, gaps())
	}
	p.push(lines[2])
	if got := flagsOf(r, ids[2]) + flagsOf(r, ids[5]); got != "[n-gap 2][n-gap 4–5]" || gaps() != "[2-2 4-5]" {
		t.Errorf("3 came: flags %s, gaps %s", got, gaps())
	}
	p.push(bytes.Replace(lines[3], []byte("entry.made"), []byte("entry.sung"), 1), lines[4])
	if got := flagsOf(r, ids[4]); got != "[]" || gaps() != "[2-2]" {
		t.Errorf("4 was refused, 5 came: flags %s, gaps %s", got, gaps())
	}
	p.n[site] = 5
	again := p.make("entry.made", site, device, button("yes", "yes"))
	rec, _ := record.Parse(again)
	p.push(lines[1], again)
	if got := flagsOf(r, ids[5]) + flagsOf(r, rec.ID); got != "[n-reused 6][n-reused 6]" || gaps() != "[]" {
		t.Errorf("6 came twice: flags %s, gaps %s", got, gaps())
	}
}
