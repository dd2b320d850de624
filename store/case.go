package store

import (
	"cmp"
	"encoding/json"
	"slices"
	"time"

	"tripwell/forms"
)

// OccasionRow is something that made tests due at once.
type OccasionRow struct {
	ID string
	forms.Occasion
	Devices []string // none: the whole site
	By      string
	At      time.Time
	Text    string
}

// PauseRow is a span of days on which no tests are asked for.
type PauseRow struct {
	ID string // of the pause: said again under it, it is replaced
	forms.Pause
	Devices []string // none: the whole site
	By      string
	At      time.Time
}

// Occasions gives what made tests due at once at a site, the newest day first.
func (v *View) Occasions(site string) ([]OccasionRow, error) {
	sv, err := v.siteNamed(site)
	if err != nil {
		return nil, err
	}
	out := []OccasionRow{}
	err = v.scan(bktOccasion, put32(nil, sv.ord), func(_, row []byte) error {
		u := unpacker{b: row}
		o := u.occasion()
		one := OccasionRow{ID: o.record.String(), Occasion: o.Occasion}
		if u.bad {
			return errPacked
		}
		r, _, _, _, err := v.recordAt(o.record)
		if err != nil {
			return err
		}
		var body struct {
			Text    string
			Devices []string
		}
		_ = json.Unmarshal(r.Body, &body) // what is no text was refused
		one.By, one.At, one.Text, one.Devices = r.By, r.At, body.Text, body.Devices
		out = append(out, one)
		return nil
	})
	slices.SortFunc(out, func(a, b OccasionRow) int { return cmp.Or(cmp.Compare(b.On, a.On), cmp.Compare(b.ID, a.ID)) })
	return out, err
}

// Pauses gives a site's pauses, the one that ends last first; what was taken back is left out.
func (v *View) Pauses(site string) ([]PauseRow, error) {
	sv, err := v.siteNamed(site)
	if err != nil {
		return nil, err
	}
	out := []PauseRow{}
	err = v.scan(bktPause, put32(nil, sv.ord), func(key, row []byte) error {
		p, err := unpackPause(key, row)
		if err != nil || p.Until < p.From {
			return err
		}
		r, _, _, _, err := v.recordAt(p.record)
		if err != nil {
			return err
		}
		one := PauseRow{ID: p.subject.String(), Pause: p.Pause, By: r.By, At: r.At}
		for _, id := range p.devices {
			one.Devices = append(one.Devices, id.String())
		}
		out = append(out, one)
		return nil
	})
	slices.SortFunc(out, func(a, b PauseRow) int { return cmp.Or(cmp.Compare(b.Until, a.Until), cmp.Compare(b.ID, a.ID)) })
	return out, err
}
