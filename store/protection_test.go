package store

import (
	"context"
	"encoding/json"
	"fmt"
	"math/rand"
	"slices"
	"testing"
	"time"

	"pgregory.net/rapid"

	"tripwell/forms"
)

// wiredUp is a set of records about one site whose devices are wired, wired otherwise, retired and replaced on three phones
// with clocks of their own, some of it said of devices before they are registered or never registered at all.
func wiredUp(r *rig, t *rapid.T) (site string, lines [][]byte) {
	draw := func(n int, name string) int { return rapid.IntRange(0, n-1).Draw(t, name) }
	phones := []*phone{r.phone(r.manager), r.phone(r.manager), r.phone(r.manager)}
	site = newID(r.clock())
	put := func(kind, subject string, body any) {
		r.pass(time.Duration(draw(3, "minutes")) * time.Minute)
		lines = append(lines, phones[draw(3, "phone")].make(kind, site, subject, body))
	}
	set := func(fields map[string]any) map[string]any { return map[string]any{"set": fields} }
	put("site.registered", site, set(map[string]any{"code": "ELM", "name": "Elm", "zone": "UTC", "standard": "NEC"}))
	var circuits, devices []string
	for range 3 {
		circuits = append(circuits, newID(r.clock()))
	}
	for i := range circuits {
		put("circuit.set", circuits[i], set(map[string]any{"panel": "LP", "numbers": fmt.Sprint(i)}))
	}
	for range 3 + draw(8, "devices") {
		devices = append(devices, newID(r.clock()))
	}
	kinds := []string{forms.GFCIReceptacle, forms.GFCIReceptacle, forms.ProtectedReceptacle, forms.PlainReceptacle, forms.GFCIBreaker}
	for i, d := range devices {
		fields := map[string]any{"kind": kinds[draw(len(kinds), "kind")]}
		if c := draw(4, "circuit"); c > 0 {
			fields["circuit"] = circuits[c-1]
		}
		if i != len(devices)-1 { // the last stays unregistered
			put("device.registered", d, set(fields))
		}
	}
	for range 4 + draw(24, "edits") {
		d := devices[draw(len(devices), "device")]
		switch draw(10, "edit") {
		case 0:
			put("device.set", d, set(map[string]any{"circuit": circuits[draw(3, "circuit")]}))
		case 1:
			put("device.set", d, set(map[string]any{"kind": kinds[draw(len(kinds), "kind")]}))
		case 2:
			put("device.set", d, set(map[string]any{"fed_by": nil}))
		case 3:
			put("circuit.set", circuits[draw(3, "circuit")], set(map[string]any{"order": rapid.Permutation(devices).Draw(t, "order")}))
		case 4:
			put("device.retired", d, map[string]any{"reason": "worn"})
		case 5:
			put("device.replaced", d, map[string]any{"with": devices[draw(len(devices), "with")], "reason": "worn"})
		default:
			put("device.set", d, set(map[string]any{"fed_by": devices[draw(len(devices), "source")]}))
		}
	}
	return site, lines
}

// mapTold is all that the map of a site says, and holds that what is walked from one device or circuit says the same.
func mapTold(t interface{ Fatalf(string, ...any) }, s *Store, site string, on forms.Day) string {
	var out []any
	err := s.View(all, func(v *View) error {
		whole, err := v.SiteProtection(site, on)
		if err != nil {
			return err
		}
		out = append(out, whole.LeftOut())
		for row, err := range v.Devices(site) {
			if err != nil {
				return err
			}
			one, err := v.ProtectionOf(row.ID, on)
			if err != nil {
				return err
			}
			says := func(p *Protection) string {
				ahead, behind := p.Ahead(row.ID), p.Behind(row.ID)
				slices.Sort(ahead)
				slices.Sort(behind)
				out := fmt.Sprint(row.ID, p.Source(row.ID), ahead, behind)
				for _, id := range append(behind, row.ID) {
					out += fmt.Sprint(p.Cover(id).State)
				}
				return out
			}
			if got, want := says(one), says(whole); got != want {
				t.Fatalf("walked from %s:\n%s\nof the whole site:\n%s", row.ID, got, want)
			}
			out = append(out, says(one), one.Cover(row.ID))
		}
		circuits, err := v.Circuits(site)
		if err != nil {
			return err
		}
		for _, c := range circuits {
			one, err := v.ProtectionOn(c.ID, on)
			if err != nil {
				return err
			}
			breakers, runs := one.Runs(c.ID)
			if b, r := whole.Runs(c.ID); fmt.Sprint(b, r) != fmt.Sprint(breakers, runs) {
				t.Fatalf("circuit %s: got %v %v, want %v %v", c.Numbers, breakers, runs, b, r)
			}
			out = append(out, c, breakers, runs, one.Dead(c.ID))
		}
		return nil
	})
	if err != nil {
		t.Fatalf("%v", err)
	}
	b, err := json.Marshal(out)
	if err != nil {
		t.Fatalf("%v", err)
	}
	return string(b)
}

// Random edits in random order on several replicas: the same map on all of them, equal to the one a rebuild makes, and what
// is walked from one device is what the map of the whole site says of it.
func TestProtection_ArrivalOrderHasNoSay(t *testing.T) {
	if testing.Short() {
		t.Skip("long property run")
	}
	rapid.Check(t, func(rt *rapid.T) {
		r := newRig(t)
		site, lines := wiredUp(r, rt)
		at := r.clock().Add(time.Hour)
		on := forms.DayOf(at)
		order := seqOf(len(lines))
		want := mapTold(rt, fed(t, lines, order, 5, at), site, on)
		for replica := range 2 {
			seed := rapid.Int64().Draw(rt, "shuffle")
			rand.New(rand.NewSource(seed)).Shuffle(len(order), func(i, j int) { order[i], order[j] = order[j], order[i] })
			s := fed(t, lines, order, rapid.IntRange(1, 40).Draw(rt, "group"), at)
			if got := mapTold(rt, s, site, on); got != want {
				rt.Fatalf("replica %d, shuffled by %d: %s", replica, seed, firstDifference(got, want))
			}
			before, err := s.ViewHash()
			if err == nil {
				err = s.Rebuild(context.Background(), nil)
			}
			if after, _ := s.ViewHash(); err != nil || after != before {
				rt.Fatalf("rebuilt: hash %s %v, want %s", after, err, before)
			}
		}
	})
}
