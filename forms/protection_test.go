package forms

import (
	"cmp"
	"fmt"
	"reflect"
	"slices"
	"testing"

	"pgregory.net/rapid"
)

// wiredSite draws devices of all kinds with circuits and sources that may name anything: themselves, each other, nobody.
func wiredSite(t *rapid.T) []Wired {
	n := rapid.IntRange(1, 14).Draw(t, "devices")
	kinds := []string{GFCIReceptacle, GFCIReceptacle, ProtectedReceptacle, ProtectedReceptacle, PlainReceptacle, GFCIBreaker, RCBO}
	var out []Wired
	for i := range n {
		d := Wired{ID: fmt.Sprint("d", i), Kind: rapid.SampledFrom(kinds).Draw(t, "kind"), Clock: uint64(rapid.IntRange(1, 6).Draw(t, "clock")), Record: fmt.Sprint("r", rapid.IntRange(0, 99).Draw(t, "record"))}
		if c := rapid.IntRange(0, 3).Draw(t, "circuit"); c > 0 {
			d.Circuit = fmt.Sprint("c", c)
		}
		if s := rapid.IntRange(-4, n+1).Draw(t, "source"); s >= 0 {
			d.Source = fmt.Sprint("d", s) // d(n) and d(n+1) are in no register
		}
		d.Gone = rapid.IntRange(0, 7).Draw(t, "gone") == 0
		out = append(out, d)
	}
	return out
}

// everyWay is the map as a definition says it, without any care for time: pairs (fed, source), reachability by trying.
type everyWay struct {
	devices map[string]Wired
	feeds   map[[2]string]bool
	left    []Feed
}

func mapByDefinition(devices []Wired) *everyWay {
	p := &everyWay{devices: map[string]Wired{}, feeds: map[[2]string]bool{}}
	for _, d := range devices {
		p.devices[d.ID] = d
	}
	for _, d := range devices {
		if _, ok := p.devices[d.Source]; !ok && d.Source != "" {
			p.devices[d.Source] = Wired{ID: d.Source, Gone: true}
		}
		for _, b := range devices {
			if d.Circuit != "" && d.Circuit == b.Circuit && ProtectsCircuit(b.Kind) && !ProtectsCircuit(d.Kind) && !d.Gone && !b.Gone {
				p.feeds[[2]string{d.ID, b.ID}] = true
			}
		}
	}
	load := slices.DeleteFunc(slices.Clone(devices), func(d Wired) bool { return d.Source == "" || d.Gone })
	slices.SortFunc(load, func(a, b Wired) int {
		return cmp.Or(cmp.Compare(a.Clock, b.Clock), cmp.Compare(a.Record, b.Record), cmp.Compare(a.ID, b.ID))
	})
	for _, d := range load {
		if d.Source == d.ID || p.fedFrom(d.Source, d.ID, map[string]bool{}) {
			p.left = append(p.left, Feed{d.ID, d.Source})
			continue
		}
		p.feeds[[2]string{d.ID, d.Source}] = true
	}
	return p
}

// fedFrom follows every way from a device to its sources.
func (p *everyWay) fedFrom(device, source string, on map[string]bool) bool {
	if on[device] {
		return false
	}
	on[device] = true
	defer delete(on, device)
	for f := range p.feeds {
		if f[0] == device && (f[1] == source || p.fedFrom(f[1], source, on)) {
			return true
		}
	}
	return false
}

func (p *everyWay) all(related func(id string) bool) []string {
	out := []string{}
	for id := range p.devices {
		if related(id) {
			out = append(out, id)
		}
	}
	slices.Sort(out)
	return out
}

func sorted(ids []string) []string {
	out := append([]string{}, ids...)
	slices.Sort(out)
	return out
}

func TestProtectionMap_EqualsAWalkOfEveryWay(t *testing.T) {
	rapid.Check(t, func(rt *rapid.T) {
		devices := wiredSite(rt)
		state := map[string]string{}
		for _, d := range devices {
			state[d.ID] = rapid.SampledFrom(standings[:4]).Draw(rt, "stands")
		}
		m := NewProtectionMap(rapid.Permutation(devices).Draw(rt, "order"))
		p := mapByDefinition(devices)
		if !slices.Equal(m.LeftOut(), p.left) {
			rt.Fatalf("left out: got %v, want %v", m.LeftOut(), p.left)
		}
		for id := range p.devices {
			ahead := sorted(m.Ahead(id))
			if want := p.all(func(s string) bool { return s != id && p.fedFrom(id, s, map[string]bool{}) }); !slices.Equal(ahead, want) {
				rt.Fatalf("ahead of %s: got %v, want %v", id, ahead, want)
			}
			if slices.Contains(m.Ahead(id), id) {
				rt.Fatalf("%s feeds itself", id)
			}
			behind := sorted(m.Behind(id))
			if want := p.all(func(d string) bool { return d != id && p.fedFrom(d, id, map[string]bool{}) }); !slices.Equal(behind, want) {
				rt.Fatalf("behind %s: got %v, want %v", id, behind, want)
			}
			want := len(standings)
			for _, by := range append(ahead, id) {
				d := p.devices[by]
				switch {
				case d.Gone && by != id && (d.Kind == "" || Protects(d.Kind)):
					want = min(want, slices.Index(standings, StandsRemoved))
				case !d.Gone && Protects(d.Kind):
					want = min(want, slices.Index(standings, state[by]))
				}
			}
			got := m.Cover(id, func(by string) string { return state[by] })
			if i := slices.Index(standings, got.State); (i < 0 && (want != len(standings) || got.State != Unprotected)) || i >= 0 && i != want {
				rt.Fatalf("cover of %s: got %v, want %d of %v", id, got, want, standings)
			}
		}
		for _, c := range []string{"c1", "c2", "c3"} {
			on := func(id string) bool { d := p.devices[id]; return d.Circuit == c && !d.Gone }
			want := p.all(func(id string) bool {
				for s := range p.devices {
					if on(s) && (s == id || p.fedFrom(id, s, map[string]bool{})) {
						return true
					}
				}
				return false
			})
			if got := sorted(m.OnCircuit(c)); !slices.Equal(got, want) {
				rt.Fatalf("circuit %s: got %v, want %v", c, got, want)
			}
			drawn(rt, m, c, on)
		}
	})
}

// drawn holds that everything of a circuit is drawn once.
func drawn(rt *rapid.T, m *ProtectionMap, c string, on func(string) bool) {
	seen := map[string]int{}
	var look func(runs []Run)
	look = func(runs []Run) {
		for _, r := range runs {
			seen[r.ID]++
			look(r.Load)
		}
	}
	breakers, runs := m.Runs(c)
	look(runs)
	for _, b := range breakers {
		seen[b]++
	}
	for id, i := range m.byID {
		if n := seen[id]; n > 1 || on(id) && n != 1 {
			rt.Fatalf("%s (node %d) is drawn %d times on %s", id, i, n, c)
		}
	}
}

func TestProtectionMap_LoopLosesItsNewestEdge(t *testing.T) {
	m := NewProtectionMap([]Wired{
		{ID: "a", Kind: GFCIReceptacle, Source: "b", Clock: 5, Record: "x"},
		{ID: "b", Kind: GFCIReceptacle, Source: "c", Clock: 9, Record: "y"},
		{ID: "c", Kind: GFCIReceptacle, Source: "a", Clock: 7, Record: "z"},
	})
	if got, want := m.LeftOut(), []Feed{{"b", "c"}}; !reflect.DeepEqual(got, want) {
		t.Errorf("got %v, want %v", got, want)
	}
	if got := m.Ahead("c"); !slices.Equal(got, []string{"a", "b"}) {
		t.Errorf("got %v", got)
	}
}

func TestProtectionMap_WhatTestTakesThePowerFrom(t *testing.T) {
	m := NewProtectionMap([]Wired{
		{ID: "breaker", Kind: GFCIBreaker, Circuit: "14"},
		{ID: "pantry", Kind: GFCIReceptacle, Circuit: "14"},
		{ID: "door", Kind: ProtectedReceptacle, Circuit: "14", Source: "pantry"},
		{ID: "hall", Kind: ProtectedReceptacle, Source: "door"},
		{ID: "desk", Kind: PlainReceptacle, Circuit: "16"},
	})
	for id, want := range map[string][]string{"breaker": {"pantry", "door", "hall"}, "pantry": {"door", "hall"}, "door": {"hall"}, "desk": nil} {
		if got := m.Behind(id); !slices.Equal(got, want) {
			t.Errorf("%s: got %v, want %v", id, got, want)
		}
	}
	stands := map[string]string{"breaker": StandsFailed, "pantry": StandsWell}
	for id, want := range map[string]Cover{"hall": {StandsWell, "pantry"}, "desk": {Unprotected, ""}, "breaker": {StandsFailed, "breaker"}} {
		if got := m.Cover(id, func(by string) string { return stands[by] }); got != want {
			t.Errorf("%s: got %v, want %v", id, got, want)
		}
	}
}
