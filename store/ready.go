package store

import (
	"go.etcd.io/bbolt"

	"tripwell/forms"
	"tripwell/store/record"
)

// What can be worked out about an entry before the one writer sees it is done by the many callers who wait for it anyway:
// its body is read and judged by the rules that stand at that moment. The writer decides everything again but the judging
// itself: it takes the verdict over only where it finds the very same form and limit set, and nothing else said of the
// entry. So the read models stay a function of the book alone.

// makeReady judges the entries among arrivals. What it cannot judge it leaves to the writer, which says why.
func (s *Store) makeReady(arrivals []arrival) error {
	type standing struct {
		body *entryBody
		form *forms.Form
		set  *forms.LimitSet
	}
	list := make([]standing, 0, len(arrivals))
	err := s.view(func(tx *bbolt.Tx) error {
		f := newFold(tx) // to look things up; never flushed
		for _, a := range arrivals {
			if a.fault != nil || a.r.Kind != "entry.made" || record.LogClass(a.r.Log) != "site" {
				continue
			}
			body, ok := a.r.Read.(*entryBody)
			if !ok {
				continue
			}
			l, err := f.log(a.r.Log)
			if err != nil {
				return err
			}
			zone, err := f.zone(l)
			if err != nil {
				return err
			}
			day := forms.DayOf(happened(a.r, a.st.stamp).In(zone))
			if form, set, _ := f.rules.standing(l.ord, f.orgOrd(), &body.Entry, day); form != nil && set != nil {
				list = append(list, standing{body, form, set})
			}
		}
		return nil
	})
	if err != nil {
		return err
	}
	for _, k := range list {
		if _, ok := k.body.verdicts.knows(k.form, k.set); ok {
			continue
		}
		if v, err := forms.Judge(k.form, k.set, k.body.Entry); err == nil {
			k.body.verdicts.note(k.form, k.set, v)
		}
	}
	return nil
}
