package store

import (
	"cmp"
	"slices"

	"tripwell/forms"
)

// RoundProved is a tester tried on an outlet known to be live, before the first test of a walk or after its last.
type RoundProved struct {
	Round, Site string // id of the round; name of the site
	Proof
	Last bool
}

// RoundProofs gives the trials of an instrument on walks of the sites of the scope, the newest first. They are said on closing a
// walk, in its site's log: crews may not write in the organisation's.
func (v *View) RoundProofs(instrument string) (list []RoundProved, err error) {
	sites, err := v.Sites()
	if err != nil {
		return nil, err
	}
	for _, site := range sites {
		sv, err := v.open(site.ID)
		if err != nil {
			return nil, err
		}
		err = v.each(sv, ofRound, func(n uint32, t *thing) error {
			r := Round{}
			if err := v.roundSaid(sv, n, &r); err != nil {
				return err
			}
			for _, c := range r.Closings {
				if c.Instrument != instrument {
					continue
				}
				for last, p := range []*RoundProof{c.ProvedFirst, c.ProvedLast} {
					if p != nil {
						list = append(list, RoundProved{Round: t.id.String(), Site: site.Name, Last: last == 1,
							Proof: Proof{Record: c.Record, By: c.By, On: forms.DayOf(p.At.In(sv.zone)), Works: p.Works, At: p.At}})
					}
				}
			}
			return nil
		})
		if err != nil {
			return nil, err
		}
	}
	slices.SortStableFunc(list, func(a, b RoundProved) int {
		return cmp.Or(b.At.Compare(a.At), cmp.Compare(a.Record, b.Record))
	})
	return list, nil
}
