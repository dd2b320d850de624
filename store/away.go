package store

import (
	"cmp"
	"slices"
	"time"

	"tripwell/forms"
)

// Items that travel belong to their depot for ever: every record about one stands in the depot's log. Where it is now is a
// field of the register like any other (at_site, where), and is read here.

// Whereabouts is where a portable item is as somebody last said it.
type Whereabouts struct {
	Item   DeviceRow
	Depot  Site
	At     Site      // the site it is at; only ID where the reader does not see that site, zero at its depot
	Said   time.Time // when somebody last said where it is, zero where nobody did
	By     string    // who said it: a person's id
	Tested forms.Day // the newest test that says something, NoDay for none
}

// Whereabouts tells where a portable item is.
func (v *View) Whereabouts(d DeviceRow) (w Whereabouts, err error) {
	w = Whereabouts{Item: d, Tested: forms.NoDay}
	if w.Depot, err = v.Site(d.Site); err != nil {
		return w, err
	}
	for _, last := range d.Last {
		w.Tested = max(w.Tested, last.Day)
	}
	if d.AtSite != "" {
		if w.At = (Site{ID: d.AtSite}); v.scope.May(d.AtSite) {
			if sv, err := v.open(d.AtSite); err == nil {
				w.At = sv.Site
			}
		}
	}
	sv, err := v.open(d.Site)
	if err != nil {
		return w, err
	}
	t, err := v.deviceThing(sv, parseID(d.ID))
	if err != nil || t == nil {
		return w, err
	}
	clock, rec := t.saidOf("at_site")
	if later, other := t.saidOf("where"); later > clock {
		rec = other
	}
	if rec == (id16{}) {
		return w, nil
	}
	r, st, _, _, err := v.recordAt(rec)
	if err == nil {
		w.Said, w.By = happened(r, st), r.By
	}
	return w, err
}

// ItemsHere lists the items of other depots that are at a site, as far as the reader sees those depots: by depot, then by
// what they are.
func (v *View) ItemsHere(site string) (list []Whereabouts, err error) {
	host, err := v.siteNamed(site)
	if err != nil {
		return nil, err
	}
	depots, err := v.everySite()
	if err != nil {
		return nil, err
	}
	for _, sv := range depots {
		if sv.ID == host.ID {
			continue
		}
		err := v.scan(bktFeed, feedKey(sv.ord, host.id, 0)[:20], func(key, _ []byte) error {
			d, ok, err := v.rowAt(sv, read32(key[20:]), sv.today)
			if err != nil || !ok || d.Retired || !forms.IsPortable(d.Kind) {
				return err
			}
			w, err := v.Whereabouts(d)
			list = append(list, w)
			return err
		})
		if err != nil {
			return nil, err
		}
	}
	slices.SortFunc(list, func(a, b Whereabouts) int {
		return cmp.Or(cmp.Compare(a.Depot.Code, b.Depot.Code), cmp.Compare(a.Item.Kind, b.Item.Kind), cmp.Compare(a.Item.Tag, b.Item.Tag), cmp.Compare(a.Item.ID, b.Item.ID))
	})
	return list, nil
}
