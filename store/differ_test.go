package store

import (
	"bytes"
	"context"
	"fmt"
	"slices"
	"testing"
	"time"

	"tripwell/store/record"
)

func TestPush_NamedRecordsWithOtherValues(t *testing.T) {
	r := newRig(t)
	site, elsewhere := r.site("ELM"), r.site("OAK")
	p := r.phone(r.person("crew", false, site))
	stranger := r.phone(r.person("crew", false, elsewhere))
	id, device := record.NamedID(r.Org(), site, "MDP/3"), newID(r.clock())
	made := func(p *phone, maker string, length string) []byte {
		r.pass(time.Minute)
		return p.makeWith(id, "device.registered", site, device, map[string]any{"set": map[string]any{"kind": "cord-set", "make": maker, "length_m": length}})
	}
	first := made(p, "Maker", "7.5")
	rest := [][]byte{made(p, "Maker", "7.5"), made(p, "Other", "7.5"), first}
	if got := states(p.push(append([][]byte{first}, rest...)...)); !slices.Equal(got, []string{"stored", "already", "already", "already"}) {
		t.Fatalf("got %v", got)
	}
	if got := states(p.push(rest...)); !slices.Equal(got, []string{"already", "already", "already"}) {
		t.Fatalf("sent again: got %v", got)
	}
	if got := states(stranger.push(made(stranger, "Mine", "1"))); !slices.Equal(got, []string{"already"}) {
		t.Fatalf("from somebody who has not the site: got %v", got)
	}
	differ := func(scope Scope) (list []Difference) {
		if err := r.View(scope, func(v *View) (err error) { list, err = v.Differences(); return err }); err != nil {
			t.Fatal(err)
		}
		return list
	}
	list := differ(all)
	if len(list) != 1 || !bytes.Equal(list[0].Bytes, rest[1]) || list[0].Record != id || list[0].By != p.by.ID || list[0].Log != site {
		t.Fatalf("got %+v, want the one that says something else, once", list)
	}
	if got := fmt.Sprint(list[0].Values); got != "[{set.make Maker Other}]" {
		t.Errorf("got %s", got)
	}
	if list := differ(Scope{Role: "manager", Sites: []string{elsewhere}}); len(list) > 0 {
		t.Errorf("another site's manager sees %+v", list)
	}
	err := r.View(all, func(v *View) error {
		d, err := v.Device(device, 0)
		if d.Make != "Maker" {
			t.Errorf("make is %q: the first stays", d.Make)
		}
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	if _, err := r.Check(context.Background(), nil); err != nil {
		t.Fatal(err)
	}
}
