package store

import (
	"cmp"
	"slices"

	"tripwell/forms"
)

// occasion is one record that asks for tests.
type occasion struct {
	record id16
	forms.Occasion
}

// pause is what the record in force says of one pause.
type pause struct {
	subject id16
	clock   uint64
	record  id16
	forms.Pause
	devices []id16 // none: the whole site; rows of devices do not hold them
}

func (o occasion) same(p occasion) bool {
	return o.record == p.record && o.Cause == p.Cause && o.On == p.On && slices.Equal(o.Tasks, p.Tasks) && slices.Equal(o.Before, p.Before)
}

func (p *packer) occasion(o occasion) {
	p.id(o.record)
	p.text(o.Cause)
	p.day(o.On)
	for _, tasks := range [][]string{o.Tasks, o.Before} {
		p.uint(uint64(len(tasks)))
		for _, t := range tasks {
			p.task(t)
		}
	}
}

func (u *unpacker) occasion() (o occasion) {
	o.record, o.Cause, o.On = u.id(), u.text(), u.day()
	for _, tasks := range []*[]string{&o.Tasks, &o.Before} {
		for n := u.uint(); n > 0 && !u.bad; n-- {
			*tasks = append(*tasks, u.task())
		}
	}
	return o
}

func (p *packer) pause(s pause) {
	p.fixed(s.clock)
	p.id(s.record)
	p.spans([]forms.Pause{s.Pause})
}

func (u *unpacker) pause(subject id16) pause {
	s := pause{subject: subject, clock: u.fixed(), record: u.id()}
	if one := u.spans(); len(one) == 1 {
		s.Pause = one[0]
	}
	return s
}

func (p *packer) spans(list []forms.Pause) {
	p.uint(uint64(len(list)))
	for _, s := range list {
		p.day(s.From)
		p.day(s.Until)
		p.text(s.Reason)
	}
}

func (u *unpacker) spans() (list []forms.Pause) {
	for n := u.uint(); n > 0 && !u.bad; n-- {
		list = append(list, forms.Pause{From: u.day(), Until: u.day(), Reason: u.text()})
	}
	return list
}

// saidOfDevice packs the occasions and pauses that name a device.
func (p *packer) saidOfDevice(w *work) {
	p.uint(uint64(len(w.pauses)))
	for _, s := range w.pauses {
		p.id(s.subject)
		p.pause(s)
	}
	for _, list := range [][]occasion{w.occasions, w.repairs} {
		p.uint(uint64(len(list)))
		for _, o := range list {
			p.occasion(o)
		}
	}
}

func (u *unpacker) saidOfDevice(w *work) {
	for n := u.uint(); n > 0 && !u.bad; n-- {
		w.pauses = append(w.pauses, u.pause(u.id()))
	}
	for _, list := range []*[]occasion{&w.occasions, &w.repairs} {
		for n := u.uint(); n > 0 && !u.bad; n-- {
			*list = append(*list, u.occasion())
		}
	}
}

func (p *packer) kept(list []forms.Kept) {
	p.uint(uint64(len(list)))
	month := int32(0)
	for _, k := range list {
		by := int64(k.Month - month)
		p.uint((uint64(by)<<1^uint64(by>>63))<<3 | uint64(k.Outcome))
		month = k.Month
	}
}

func (u *unpacker) kept(wanted bool) []forms.Kept {
	n := u.uint()
	if n == 0 || n > uint64(len(u.b)) {
		return nil
	}
	if !wanted {
		for ; n > 0; n-- {
			u.uint()
		}
		return nil
	}
	list, month := make([]forms.Kept, 0, n), int32(0)
	for ; n > 0 && !u.bad; n-- {
		v := u.uint()
		by := v >> 3
		month += int32(int64(by>>1) ^ -int64(by&1))
		list = append(list, forms.Kept{Month: month, Outcome: uint8(v & 7)})
	}
	return list
}

// wayName spares the making of the same names.
func wayName(b []byte) string {
	switch string(b) {
	case "":
		return ""
	case forms.New:
		return forms.New
	case forms.Replaced:
		return forms.Replaced
	case forms.Imported:
		return forms.Imported
	}
	return string(b)
}

// caseOf is what a device's dates are counted from: what names it, and what is said of its whole site.
func (w *work) caseOf(site *saidOfWholeSite) forms.Case {
	c := forms.Case{Start: w.start, Way: w.way, Ended: w.ended}
	if len(w.occasions)+len(w.repairs)+len(site.occasions) > 0 {
		c.Occasions = occasionsOf(w.occasions, w.repairs, site.occasions)
	}
	if len(w.pauses)+len(site.pauses) > 0 {
		c.Pauses = pausesOf(w.pauses, site.pauses)
	}
	return c
}

// occasionsOf puts occasions in their order; what two people noted of the same counts once.
func occasionsOf(lists ...[]occasion) (out []forms.Occasion) {
	for _, list := range lists {
		for _, o := range list {
			out = append(out, o.Occasion)
		}
	}
	order := func(a, b forms.Occasion) int {
		return cmp.Or(cmp.Compare(a.On, b.On), cmp.Compare(a.Cause, b.Cause), slices.Compare(a.Tasks, b.Tasks), slices.Compare(a.Before, b.Before))
	}
	slices.SortFunc(out, order)
	return slices.CompactFunc(out, func(a, b forms.Occasion) bool { return order(a, b) == 0 })
}

func pausesOf(lists ...[]pause) (out []forms.Pause) {
	for _, list := range lists {
		for _, p := range list {
			if p.From <= p.Until {
				out = append(out, p.Pause)
			}
		}
	}
	slices.SortFunc(out, func(a, b forms.Pause) int {
		return cmp.Or(cmp.Compare(a.From, b.From), cmp.Compare(a.Until, b.Until), cmp.Compare(a.Reason, b.Reason))
	})
	return out
}
