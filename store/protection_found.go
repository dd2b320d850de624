package store

import (
	"cmp"
	"slices"
	"time"

	"tripwell/forms"
)

// Found is what somebody last found an outlet to be while power ahead of it was off, and whether the map can be right.
type Found struct {
	What    string // forms.FoundDead, forms.FoundLive or forms.FoundOff
	At      time.Time
	Day     forms.Day
	By      string // who saw it: a person's id
	Entry   string // the test that says so, "" where a defect does
	Defect  string // the open defect that says an outlet stayed live
	Differs bool   // the map says otherwise
}

// foundLooked bounds how many of an outlet's newest tests are looked through for an answer.
const foundLooked = 12

// FoundOn tells of the devices in service on a map what they were last found to be, by id; those of which nothing is known are
// not among them. It reads the tests of the devices it is given, so it is for a circuit, not for a site.
func (v *View) FoundOn(p *Protection, ids []string, on forms.Day) (map[string]Found, error) {
	out := map[string]Found{}
	for _, id := range ids {
		d, ok := p.devices[id]
		if !ok || d.Retired || !forms.IsOutlet(d.Kind) {
			continue
		}
		f, err := v.found(d, on)
		if err != nil {
			return nil, err
		}
		if f.What != "" {
			f.Differs = p.Contradicts(id, f.What)
			out[id] = f
		}
	}
	return out, nil
}

func (v *View) found(d OnMap, on forms.Day) (f Found, err error) {
	sv, t, err := v.findDevice(d.ID)
	if err != nil {
		return f, err
	}
	list, err := v.history(sv, t.n)
	if err != nil {
		return f, err
	}
	slices.SortFunc(list, func(a, b past) int { return cmp.Or(cmp.Compare(b.day, a.day), cmp.Compare(b.seq, a.seq)) })
	for _, p := range list[:min(len(list), foundLooked)] {
		if f.What != "" && p.day < f.Day {
			break // what follows is older
		}
		if !v.scope.Shows(p.day) {
			continue
		}
		r, st, k, err := readBook(v.tx, p.seq)
		if err != nil {
			return f, err
		}
		e, err := v.entry(sv, r, st, k, p.seq)
		if err != nil {
			return f, err
		}
		at := happened(r, st)
		if what := forms.FoundBy(d.Kind, e.Body.Readings); what != "" && e.Withdrawn == nil && e.Sealed == nil && !at.Before(f.At) {
			f = Found{What: what, At: at, Day: e.Day, By: cmp.Or(e.ReadBy, e.By), Entry: e.ID}
		}
	}
	defects, err := v.defectsAt(sv, t.n, on)
	if err != nil {
		return f, err
	}
	for _, one := range defects {
		if one.Cause != "protection-lost" || one.Closed != nil || one.First == "" || one.OpenedAt().Before(f.At) {
			continue
		}
		step, err := v.defectStep(one.First)
		if err != nil {
			return f, err
		}
		f = Found{What: forms.FoundLive, At: one.OpenedAt(), Day: one.Day, By: step.By, Defect: one.ID}
	}
	return f, nil
}
