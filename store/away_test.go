package store

import (
	"bytes"
	"slices"
	"testing"
	"time"

	"tripwell/forms"
)

// set is the body of a record that sets fields.
func setsOf(fields map[string]any) map[string]any { return map[string]any{"set": fields} }

func TestItems_TravelWithTheirHistory(t *testing.T) {
	r := newRig(t)
	depot, host, third := r.site("DEP"), r.site("HOST"), r.site("THIRD")
	item, cord := newID(r.clock()), newID(r.clock())
	r.append(Draft{Kind: "device.registered", Log: depot, Subject: item, By: r.manager.ID, Body: setsOf(map[string]any{"kind": forms.PortableGFCI, "where": "Crib 3"})},
		Draft{Kind: "device.registered", Log: depot, Subject: cord, By: r.manager.ID, Body: setsOf(map[string]any{"kind": forms.CordSet})})
	both, hostOnly := r.person("crew", false, depot, host), r.person("crew", false, host)
	met, stranger := r.phone(both), r.phone(hostOnly)
	at := func(sc Scope, site string) (list []Whereabouts) {
		t.Helper()
		err := r.Store.View(sc, func(v *View) (err error) {
			list, err = v.ItemsHere(site)
			return err
		})
		if err != nil {
			t.Fatal(err)
		}
		return list
	}
	all := Scope{All: true}
	if list := at(all, host); len(list) != 0 {
		t.Fatalf("nothing was brought yet: %v", list)
	}
	r.pass(time.Hour)
	for _, receipt := range met.push(met.make("device.set", depot, item, setsOf(map[string]any{"at_site": host, "where": nil})),
		met.make("entry.made", depot, item, map[string]any{"form": forms.PortableGFCI + "/" + forms.TaskButton, "readings": map[string]any{"found": "on", "button_trips": "yes", "button_resets": "yes"}, "source": "phone"})) {
		if receipt.State != "stored" {
			t.Fatalf("whoever has the depot writes into its log: %+v", receipt)
		}
	}
	list := at(all, host)
	if len(list) != 1 || list[0].Item.ID != item || list[0].Depot.ID != depot || list[0].At.ID != host || list[0].By != both.ID || list[0].Said.IsZero() || list[0].Tested == forms.NoDay {
		t.Fatalf("the host: got %+v", list)
	}
	if len(at(all, third)) != 0 || len(at(all, depot)) != 0 {
		t.Error("it is at one site only")
	}
	if list := at(Scope{Sites: []string{host}}, host); len(list) != 0 {
		t.Errorf("who does not see the depot does not see its items: %+v", list)
	}
	// The depot sees where its own items are, also where it does not see the site itself.
	err := r.Store.View(Scope{Sites: []string{depot}}, func(v *View) error {
		d, err := v.Device(item, 0)
		if err != nil {
			return err
		}
		w, err := v.Whereabouts(d.DeviceRow)
		if d.AtSite != host || w.At.ID != host || w.At.Name != "" {
			t.Errorf("the depot: got %q, %+v", d.AtSite, w)
		}
		return err
	})
	if err != nil {
		t.Fatal(err)
	}

	// Access is judged for the log the record is in (FORMATS 19): the depot's. What is refused is kept for a manager.
	moved := stranger.make("device.set", depot, item, setsOf(map[string]any{"at_site": third}))
	if got := stranger.push(moved)[0]; got.State != "refused" || got.Code != "not_permitted" {
		t.Fatalf("without the depot: got %+v", got)
	}
	if len(at(all, third)) != 0 {
		t.Error("a refused record moved the item")
	}
	err = r.Store.View(Scope{All: true, Role: "manager"}, func(v *View) error {
		list, err := v.Refused()
		if !slices.ContainsFunc(list, func(f Refusal) bool { return bytes.Equal(f.Bytes, moved) }) {
			t.Errorf("the refused record is not kept aside: %+v", list)
		}
		return err
	})
	if err != nil {
		t.Fatal(err)
	}

	// Home again, and retired ones are nowhere.
	r.append(Draft{Kind: "device.set", Log: depot, Subject: item, By: r.manager.ID, Body: setsOf(map[string]any{"at_site": depot})})
	if len(at(all, host)) != 0 {
		t.Error("brought home, it is still listed at the host")
	}
	r.append(Draft{Kind: "device.set", Log: depot, Subject: cord, By: r.manager.ID, Body: setsOf(map[string]any{"at_site": host})})
	if len(at(all, host)) != 1 {
		t.Error("the cord set is not listed")
	}
	r.append(Draft{Kind: "device.retired", Log: depot, Subject: cord, By: r.manager.ID, Body: map[string]any{"reason": "cut", "on": "2026-12-01"}})
	if len(at(all, host)) != 0 {
		t.Error("a retired item is listed")
	}
}
