package store

import (
	"context"
	"encoding/json"
	"fmt"
	"math/rand"
	"reflect"
	"slices"
	"testing"
	"time"

	"pgregory.net/rapid"

	"tripwell/forms"
	"tripwell/store/record"
)

var all = Scope{Role: "owner", All: true}

// told is a store's pages as values: everything the readers give of its sites on a day. What arrival decides by its
// nature is left out: Received, Pos, the flag of late arrival, and the order of what falls on one day (lists of dates and
// of failures).
func told(t testing.TB, s *Store, on forms.Day) string {
	t.Helper()
	var out []any
	err := s.View(all, func(v *View) error {
		sites, err := v.Sites()
		if err != nil {
			return err
		}
		for _, site := range sites {
			sums, err := v.SiteSums(site.ID, on)
			if err != nil {
				return err
			}
			tallies, err := v.Tallies(site.ID)
			if err != nil {
				return err
			}
			kept, err := v.Compliance(ComplianceAsk{Site: site.ID, From: forms.MonthStart(forms.MonthOf(on) - 11), To: on, Known: forms.NoDay})
			if err != nil {
				return err
			}
			full, err := v.Site(site.Code)
			if err != nil {
				return err
			}
			places, err := v.Places(site.ID)
			if err != nil {
				return err
			}
			defects, err := v.Defects(DefectAsk{Site: site.ID, State: DefectsAll, On: on})
			if err != nil {
				return err
			}
			for _, d := range defects {
				steps, err := v.DefectHistory(d)
				if err != nil {
					return err
				}
				for i := range steps {
					if e := steps[i].Entry; e != nil {
						steps[i].Entry = &bare([]Entry{*e})[0]
					}
				}
				out = append(out, d, steps)
			}
			open, err := v.DefectSums(site.ID)
			if err != nil {
				return err
			}
			past, err := v.DefectPast(site.ID, on)
			if err != nil {
				return err
			}
			out = append(out, open, past)
			out = append(out, full, sums, tallies, places, kept)
			for row, err := range v.Devices(site.ID) {
				if err != nil {
					return err
				}
				d, err := v.Device(row.ID, on)
				if err != nil {
					return err
				}
				entries, err := v.Entries(row.ID)
				if err != nil {
					return err
				}
				_, loose, err := v.DeviceDefects(row.ID, on)
				if err != nil {
					return err
				}
				out = append(out, d, bare(entries), loose)
			}
			for e, err := range v.SiteEntries(site.ID, forms.NoDay, forms.NoDay) {
				if err != nil {
					return err
				}
				_ = e
			}
			snap, err := v.Snapshot(site.ID, on)
			if err != nil {
				return err
			}
			snap.Cursor, snap.OrgCursor, snap.AsOf = "", "", time.Time{}
			out = append(out, snap)
		}
		var dates []string
		last := forms.NoDay
		for row, err := range v.Due(DueAsk{On: on, Until: forms.NoDay}) {
			if err != nil {
				return err
			}
			if row.Due.Due < last {
				t.Errorf("dates out of order: %s after %s", row.Due.Due, last)
			}
			last = row.Due.Due
			dates = append(dates, fmt.Sprint(row.Due, row.Device.Site, row.Device.ID))
		}
		slices.Sort(dates)
		out = append(out, dates)
		if n := v.Unfinished(); n != 0 {
			t.Errorf("%d records are still being worked off", n)
		}
		return nil
	})
	if err != nil {
		t.Fatal(err)
	}
	b, err := json.MarshalIndent(out, "", " ")
	if err != nil {
		t.Fatal(err)
	}
	return string(b)
}

func bare(list []Entry) []Entry {
	for i := range list {
		e := &list[i]
		e.Received, e.Pos = time.Time{}, 0
		e.Flags = slices.DeleteFunc(e.Flags, func(f Flag) bool { return f.Code == "late" })
		for j := range e.Corrections {
			e.Corrections[j].Received = time.Time{}
		}
		if e.Withdrawn != nil {
			e.Withdrawn.Received = time.Time{}
		}
	}
	return list
}

// year is a set of records about one site: registers, fields set at once on two phones, a replacement, labels, entries
// of all results, corrections, withdrawals, a site plan and a site limit set.
func year(r *rig, t *rapid.T) (site string, lines [][]byte) {
	draw := func(n int, name string) int { return rapid.IntRange(0, n-1).Draw(t, name) }
	a, b := r.phone(r.manager), r.phone(r.manager)
	phones := []*phone{a, b}
	site = newID(r.clock())
	put := func(kind, subject string, body any) {
		r.pass(time.Duration(1+draw(400, "minutes")) * time.Minute)
		if draw(12, "a while") == 0 {
			r.pass(time.Duration(5+draw(40, "days")) * 24 * time.Hour)
		}
		lines = append(lines, phones[draw(2, "phone")].make(kind, site, subject, body))
	}
	set := func(pairs ...any) map[string]any {
		m := map[string]any{}
		for i := 0; i < len(pairs); i += 2 {
			m[pairs[i].(string)] = pairs[i+1]
		}
		return map[string]any{"set": m}
	}
	id := func() string { return newID(r.clock()) }
	put("site.registered", site, set("code", "ELM", "name", "Elm", "zone", "America/Chicago", "standard", "NEC"))
	panel, circ := id(), id()
	put("panel.set", panel, set("name", "LP-2"))
	put("circuit.set", circ, set("panel", panel, "numbers", []string{"14", "16"}, "supply", "grounded"))
	var places, devices, entries, pauses []string
	for i := range 3 {
		p := id()
		places = append(places, p)
		put("place.registered", p, set("building", "Main", "floor", fmt.Sprint(10-i), "room", "Kitchen", "name", fmt.Sprintf("Spot %d", i), "order", i))
	}
	tags := []string{tagOf(t, 1), tagOf(t, 2)}
	for i := range 4 {
		d := id()
		devices = append(devices, d)
		kind := []string{"gfci-receptacle", "rcd", "hospital-receptacle"}[draw(3, "kind")]
		body := set("kind", kind, "circuit", circ, "rated_residual_ma", 30, "installed", fmt.Sprintf("2026-0%d-11", 1+draw(9, "installed")))
		if i < 3 {
			body["set"].(map[string]any)["place"] = places[i]
		}
		put("device.registered", d, body)
	}
	tasks := []string{"gfci-receptacle/button", "gfci-receptacle/instrument", "rcd/button", "hospital-receptacle/receptacle"}
	answers := []string{"yes", "no"}
	readings := func() map[string]any {
		m := map[string]any{"found": "on", "condition": "sound", "button_trips": answers[draw(2, "trips")], "button_resets": answers[draw(2, "resets")]}
		if draw(2, "measured") == 0 {
			m["trip_current_ma"] = map[string]any{"value": 3 + draw(5, "ma"), "unit": "mA"}
		}
		if draw(5, "untested") == 0 {
			why := []string{"circuit-dead", "no-access"}[draw(2, "why")]
			return map[string]any{"found": "no-power", "button_trips": map[string]any{"missing": why}}
		}
		return m
	}
	for range 40 {
		d := devices[draw(4, "device")]
		switch draw(18, "what") {
		case 0:
			put("device.set", d, map[string]any{"set": map[string]any{"make": fmt.Sprint("make ", draw(9, "make"))}, "seen": "0000000000000001"})
		case 1:
			put("tag.bound", places[draw(3, "place")], map[string]any{"tag": tags[draw(2, "tag")]})
		case 2:
			put("tag.freed", places[draw(3, "place")], map[string]any{"tag": tags[draw(2, "tag")]})
		case 3:
			if len(entries) > 0 {
				e := entries[draw(len(entries), "entry")]
				put("entry.corrected", e, map[string]any{"entry": e, "readings": readings(), "reason": "misread"})
			}
		case 4:
			if len(entries) > 0 && draw(3, "withdraw") == 0 {
				e := entries[draw(len(entries), "entry")]
				put("entry.withdrawn", e, map[string]any{"entry": e, "reason": "another outlet"})
			}
		case 5:
			if draw(4, "retire") == 0 {
				put("device.retired", d, map[string]any{"reason": "worn", "on": "2026-12-01"})
			}
		case 6:
			if draw(3, "replace") == 0 {
				next := id()
				put("device.replaced", devices[0], map[string]any{"with": next, "reason": "end of life"})
				put("device.registered", next, set("kind", "gfci-receptacle"))
				devices[0] = next
			}
		case 7:
			put("site.set", site, set("zone", []string{"America/Chicago", "Pacific/Auckland", "UTC"}[draw(3, "zone")]))
		case 8:
			every := []string{"P1M", "P3M", "P6M"}[draw(3, "every")]
			put("plan.set", PlanSubject("own"), map[string]any{"plan": forms.Plan{ID: "own", Revision: 1 + draw(2, "revision"), Task: "button",
				Kinds: []string{"gfci-receptacle", "rcd"}, Every: every, Duty: forms.OnceEachPeriod, Grace: []string{"", "P5D"}[draw(2, "grace")], Lead: []string{"", "P10D"}[draw(2, "lead")],
				InForce: forms.Date(2026, time.January, 1), Start: &forms.Start{Replaced: "P0D"}}})
		case 16, 17:
			subject := id()
			if draw(3, "of one") == 0 && len(entries) > 0 { // of the defect a test may have begun, whether it did or not
				subject = record.NamedID("defect", d, "button_trips", entries[draw(len(entries), "entry")])
			}
			switch draw(7, "defect") {
			case 0:
				put("defect.opened", subject, map[string]any{"device": d, "text": "cracked", "cause": []string{"", "protection-lost"}[draw(2, "cause")], "severity": "repair"})
			case 1:
				put("defect.made_safe", subject, map[string]any{"device": d, "how": "breaker off and tagged"})
			case 2:
				put("defect.assigned", subject, map[string]any{"device": d, "crew": "Crew 1", "due": "2026-12-24", "parts": []string{"receptacle"}})
			case 3, 4:
				put("defect.repaired", subject, map[string]any{"device": d, "how": "terminal tightened"})
			case 5:
				put("defect.closed", subject, map[string]any{"device": d, "reason": "works again"})
			default:
				put("defect.reopened", subject, map[string]any{"device": d, "reason": "came back"})
			}
		case 9:
			put("entry.imported", d, map[string]any{"form": tasks[draw(4, "form")], "day": fmt.Sprintf("2026-0%d-15", 1+draw(9, "month")), "result": forms.Results()[draw(6, "result")]})
			entries = append(entries, idOfLine(t, lines))
		case 10:
			body := map[string]any{"cause": forms.Causes()[draw(5, "cause")], "on": fmt.Sprintf("2026-1%d-%02d", draw(3, "occasion month"), 1+draw(28, "occasion day"))}
			if draw(3, "whole site") > 0 {
				body["devices"] = []string{d}
			}
			put("occasion.noted", id(), body)
		case 11:
			body := map[string]any{"from": fmt.Sprintf("2026-1%d-%02d", draw(3, "pause month"), 1+draw(28, "pause day")), "until": fmt.Sprintf("2026-12-%02d", 1+draw(31, "pause end")), "reason": "closed"}
			if draw(3, "whole site paused") > 0 {
				body["devices"] = []string{d}
			}
			if len(pauses) == 0 || draw(2, "new pause") == 0 {
				pauses = append(pauses, id())
			}
			put("pause.set", pauses[draw(len(pauses), "pause")], body)
		default:
			put("entry.made", d, map[string]any{"form": tasks[draw(4, "form")], "given": map[string]any{"kind": "gfci-receptacle", "rated_residual_ma": 30}, "readings": readings(), "source": "phone"})
			entries = append(entries, idOfLine(t, lines))
		}
	}
	return site, lines
}

func idOfLine(t *rapid.T, lines [][]byte) string {
	r, f := record.Parse(lines[len(lines)-1])
	if f != nil {
		t.Fatal(f)
	}
	return r.ID
}

func tagOf(t *rapid.T, seed uint32) string {
	for bits := seed * 7919; ; bits++ {
		if tag, ok := record.DrawTag(bits); ok {
			return tag
		}
	}
}

// fed is a store that got the lines in an order, in groups of a size, all at one moment.
func fed(t testing.TB, lines [][]byte, order []int, group int, at time.Time) *Store {
	t.Helper()
	s, err := Open(t.TempDir(), Options{Now: func() time.Time { return at }, Create: true})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		if err := s.Close(); err != nil {
			t.Error(err)
		}
	})
	for len(order) > 0 {
		n := min(group, len(order))
		var batch []Incoming
		for _, i := range order[:n] {
			batch = append(batch, Incoming{Record: lines[i]})
		}
		order = order[n:]
		receipts, err := s.Push(context.Background(), Sender{Owner: true}, batch)
		if err != nil {
			t.Fatal(err)
		}
		for _, rc := range receipts {
			if rc.State != "stored" {
				t.Fatalf("%s: %s %s %s", rc.ID, rc.State, rc.Code, rc.Text)
			}
		}
	}
	return s
}

func TestModel_ArrivalOrderHasNoSay(t *testing.T) {
	if testing.Short() {
		t.Skip("long property run")
	}
	rapid.Check(t, func(rt *rapid.T) {
		r := newRig(t)
		_, lines := year(r, rt)
		at := r.clock().Add(time.Hour)
		on := forms.DayOf(at)
		order := make([]int, len(lines))
		for i := range order {
			order[i] = i
		}
		first := fed(t, lines, order, 7, at)
		want := told(t, first, on)
		seed := rapid.Int64().Draw(rt, "shuffle")
		rand.New(rand.NewSource(seed)).Shuffle(len(order), func(i, j int) { order[i], order[j] = order[j], order[i] })
		second := fed(t, lines, order, rapid.IntRange(1, 60).Draw(rt, "group"), at)
		if got := told(t, second, on); got != want {
			rt.Fatalf("shuffled by %d: %s", seed, firstDifference(got, want))
		}
		for _, s := range []*Store{first, second} {
			before, err := s.ViewHash()
			if err != nil {
				rt.Fatal(err)
			}
			if err := s.Rebuild(context.Background(), nil); err != nil {
				rt.Fatal(err)
			}
			if after, err := s.ViewHash(); err != nil || after != before {
				rt.Fatalf("rebuilt: hash %s %v, want %s", after, err, before)
			}
		}
	})
}

func firstDifference(got, want string) string {
	for i := range min(len(got), len(want)) {
		if got[i] != want[i] {
			from := max(0, i-300)
			return fmt.Sprintf("got  …%s\nwant …%s", got[from:min(len(got), i+200)], want[from:min(len(want), i+200)])
		}
	}
	return "one is longer"
}

func TestNaturalKey_SortsNumbersBySize(t *testing.T) {
	names := []string{"Room 10", "room 2", "Room 02b", "Annex", "Room", "Éclair", "10", "9", "Room 2 A"}
	slices.SortFunc(names, func(a, b string) int {
		if naturalKey(a) < naturalKey(b) {
			return -1
		}
		return 1
	})
	want := []string{"9", "10", "Annex", "Room", "room 2", "Room 2 A", "Room 02b", "Room 10", "Éclair"}
	if !reflect.DeepEqual(names, want) {
		t.Errorf("got %q, want %q", names, want)
	}
}
