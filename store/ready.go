package store

import (
	"go.etcd.io/bbolt"

	"tripwell/forms"
	"tripwell/store/record"
)

// ready is what is worked out about an entry before the one writer sees it, by the many callers who wait for it anyway:
// its body is read and judged by the rules that stand at that moment. The writer decides everything again but the
// judging itself: it takes the verdict over only where it finds the very same form and limit set, and nothing else said
// of the entry. So the read models stay a function of the book alone.
type ready struct {
	r       *record.Record
	body    *entryBody
	form    *forms.Form
	set     *forms.LimitSet
	verdict forms.Verdict
	judged  bool
}

// makeReady reads and judges the entries among arrivals. What it cannot read or judge it leaves to the writer, which
// says why.
func (s *Store) makeReady(arrivals []arrival) error {
	var list []*ready
	for i := range arrivals {
		a := &arrivals[i]
		if a.fault != nil || a.r.Kind != "entry.made" || record.LogClass(a.r.Log) != "site" {
			continue
		}
		body, err := readEntry(a.r)
		if err != nil {
			continue
		}
		a.ready = &ready{r: a.r, body: body}
		list = append(list, a.ready)
	}
	if len(list) == 0 {
		return nil
	}
	err := s.view(func(tx *bbolt.Tx) error {
		f := newFold(tx) // to look things up; never flushed
		for i := range arrivals {
			a := &arrivals[i]
			if a.ready == nil {
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
			a.ready.form, a.ready.set, _ = f.rules.standing(l.ord, f.orgOrd(), &a.ready.body.Entry, day)
		}
		return nil
	})
	if err != nil {
		return err
	}
	for _, k := range list {
		if k.form == nil || k.set == nil {
			continue
		}
		if v, err := forms.Judge(k.form, k.set, k.body.Entry); err == nil {
			k.verdict, k.judged = v, true
		}
	}
	return nil
}

// readyFor gives what was worked out about a record, nil for any other.
func (f *fold) readyFor(r *record.Record) *ready {
	if f.ready != nil && f.ready.r == r {
		return f.ready
	}
	return nil
}

// knows gives the verdict that was worked out, where it was given by this form and this limit set.
func (k *ready) knows(form *forms.Form, set *forms.LimitSet) (forms.Verdict, bool) {
	if k == nil || !k.judged || k.form != form || k.set != set {
		return forms.Verdict{}, false
	}
	return k.verdict, true
}

// note keeps a verdict for the next entry that says the same.
func (k *ready) note(form *forms.Form, set *forms.LimitSet, v forms.Verdict) {
	if k != nil {
		k.form, k.set, k.verdict, k.judged = form, set, v, true
	}
}
