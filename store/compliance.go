package store

import (
	"cmp"
	"slices"

	"tripwell/forms"
)

// ComplianceAsk asks what became of the dates that count in a span of days (forms.Obligation.Counts).
type ComplianceAsk struct {
	Site     string    // id or code; "" = all of the scope
	From, To forms.Day // both included
	// Known leaves out what this store received after that day: entries, corrections, registrations, plans, occasions and
	// pauses; dates are judged as they stood at its end. NoDay: all that is known now, as it stands today.
	Known forms.Day
}

// ComplianceRow counts the dates of one task of one kind of device at one site that count in one month.
type ComplianceRow struct {
	Site, Task, Kind string
	Month            int32 // forms.MonthOf
	forms.Count
}

// StandingRow counts the dates of one task of one kind at one site by how they stood at the end of the last day asked for, or
// stand today where that lies ahead.
type StandingRow struct {
	Site, Task, Kind string
	States           map[string]int // by state
}

// Compliance is the answer: rows by site code, task, kind and month.
type Compliance struct {
	Rows     []ComplianceRow
	Standing []StandingRow
}

// Compliance works the dates out from the work rows of the devices asked for; it reads no entry that was not corrected.
// A workbook's sheet of months and sites takes its rows as they are.
func (v *View) Compliance(ask ComplianceAsk) (Compliance, error) {
	sites, err := v.sitesAsked(ask.Site)
	if err != nil {
		return Compliance{}, err
	}
	if ask.From, ask.To = v.scope.within(ask.From, ask.To); ask.From > ask.To {
		return Compliance{Rows: []ComplianceRow{}, Standing: []StandingRow{}}, nil
	}
	sites = slices.Clone(sites)
	slices.SortFunc(sites, func(a, b *siteView) int { return cmp.Or(cmp.Compare(a.Code, b.Code), cmp.Compare(a.ID, b.ID)) })
	out := Compliance{Rows: []ComplianceRow{}, Standing: []StandingRow{}}
	for _, sv := range sites {
		r := complianceReader{v: v, sv: sv, ask: ask, rows: map[ComplianceRow]forms.Count{}, standing: map[standingKey]map[string]int{}}
		r.take = r.count
		if err := r.read(); err != nil {
			return out, err
		}
		r.into(&out)
	}
	return out, nil
}

// standingKey is what a standing row counts by.
type standingKey struct{ Task, Kind string }

type complianceReader struct {
	v        *View
	sv       *siteView
	ask      ComplianceAsk
	on       forms.Day // dates are judged as they stood at its end
	rules    *rules
	whole    *saidOfWholeSite
	rows     map[ComplianceRow]forms.Count // keys carry no count
	standing map[standingKey]map[string]int
	take     func(kind string, o forms.Obligation)
}

func (r *complianceReader) read() error {
	r.on, r.rules = r.sv.today, r.v.rules()
	r.whole = r.rules.wholeSite(r.sv.ord)
	if r.ask.Known != forms.NoDay {
		r.on = min(r.on, r.ask.Known)
		known, err := r.v.rulesKnown(r.sv, r.ask.Known)
		if err != nil {
			return err
		}
		r.rules = known
		if r.whole, err = r.knownOf(r.whole); err != nil {
			return err
		}
	}
	return r.v.scan(bktWork, put32(nil, r.sv.ord), func(key, row []byte) error {
		w, err := unpackWork(row, true)
		if err != nil {
			return err
		}
		return r.device(read32(key[4:]), w)
	})
}

func (r *complianceReader) device(n uint32, w *work) error {
	if w.start == forms.NoDay || w.kind == "" || r.ask.Known != forms.NoDay && (w.start > r.on || w.came > r.ask.Known) {
		return nil
	}
	all, err := r.entries(n, w)
	if err != nil {
		return err
	}
	c, err := r.caseOf(n, w)
	if err != nil {
		return err
	}
	schedule := r.rules.schedule(r.sv.ord, r.v.orgLog(), w.kind)
	never := func(string) forms.Day { return forms.NoDay }
	now := c // as the site's own sums have it, what lies ahead included
	if r.ask.Known != forms.NoDay {
		now = until(c, r.on)
	}
	for _, t := range schedule.Follow(now, never) {
		takeUntil(&t, all, r.on)
		for _, o := range t.Done {
			r.take(w.kind, o)
		}
		if _, inUse := t.Next(); inUse {
			for _, o := range t.Waiting(r.on) {
				r.take(w.kind, o)
			}
		}
	}
	stand := min(r.ask.To, r.on) // of days ahead nobody knows how dates will stand
	if w.start > stand {
		return nil
	}
	for _, t := range schedule.Follow(until(c, stand), never) {
		takeUntil(&t, all, stand)
		if d, inUse := t.Next(); inUse {
			key := standingKey{t.Task(), w.kind}
			if r.standing[key] == nil {
				r.standing[key] = map[string]int{}
			}
			r.standing[key][d.State(stand)]++
		}
	}
	return nil
}

// until leaves out what happens after a day.
func until(c forms.Case, day forms.Day) forms.Case {
	if c.Ended > day {
		c.Ended = forms.NoDay
	}
	c.Occasions = slices.DeleteFunc(slices.Clone(c.Occasions), func(o forms.Occasion) bool { return o.On > day })
	return c
}

func takeUntil(t *forms.Trace, all []past, day forms.Day) {
	for _, test := range testsOf(all, t.Task()) {
		if test.Day > day {
			break
		}
		t.Take(test)
	}
	t.End()
}

func (r *complianceReader) count(kind string, o forms.Obligation) {
	day := o.Counts()
	if day < r.ask.From || day > r.ask.To {
		return
	}
	key := ComplianceRow{Site: r.sv.ID, Task: o.Task, Kind: kind, Month: forms.MonthOf(day)}
	c := r.rows[key]
	c.Add(o.Outcome(r.on), 1)
	r.rows[key] = c
}

// entries gives a device's entries as they were known.
func (r *complianceReader) entries(n uint32, w *work) ([]past, error) {
	all := w.past
	if w.older > 0 {
		var err error
		if all, err = r.v.history(r.sv, n); err != nil {
			return nil, err
		}
	}
	if r.ask.Known == forms.NoDay {
		return all, nil
	}
	known := make([]past, 0, len(all))
	for _, p := range all {
		if p.came > r.ask.Known {
			continue
		}
		if p.said {
			var err error
			if p, err = r.asKnown(p); err != nil {
				return nil, err
			}
		}
		known = append(known, p)
	}
	return known, nil
}

// asKnown weighs an entry with what had been said of it by then.
func (r *complianceReader) asKnown(p past) (past, error) {
	e, st, _, err := readBook(r.v.tx, p.seq)
	if err != nil {
		return p, err
	}
	body, err := readEntry(e)
	if err != nil {
		return p, err
	}
	said, err := readSaid(r.v.tx, r.v.tx.Bucket(bktSaid).Get(saidKey(r.sv.ord, parseID(e.ID))), nil, e, r.v.whoMay())
	if err != nil {
		return p, err
	}
	said = slices.DeleteFunc(said, func(s saidRecord) bool { return forms.DayOf(s.stamp.Received.In(r.sv.zone)) > r.ask.Known })
	o := r.rules.outcome(r.sv.ord, r.v.orgLog(), r.sv.zone, e, st, body, said)
	return o.past(p.seq), nil
}

// caseOf is what a device's dates were counted from, as it was known.
func (r *complianceReader) caseOf(n uint32, w *work) (forms.Case, error) {
	c := w.caseOf(r.whole)
	if r.ask.Known == forms.NoDay {
		return c, nil
	}
	own, err := r.knownOf(&saidOfWholeSite{append(w.occasions, w.repairs...), w.pauses})
	if err != nil {
		return c, err
	}
	w.occasions, w.repairs, w.pauses = own.occasions, nil, own.pauses
	c = w.caseOf(r.whole)
	if c.Ended != forms.NoDay {
		known, err := r.retirementKnown(n)
		if err != nil {
			return c, err
		}
		if !known {
			c.Ended = forms.NoDay
		}
	}
	return c, nil
}

func (r *complianceReader) retirementKnown(n uint32) (bool, error) {
	reg, err := unpackRegister(r.v.tx.Bucket(bktRegister).Get(registerKey(r.sv.ord, ofDevice, n)))
	if err != nil {
		return false, err
	}
	i, ok := reg.find("#retired")
	if !ok {
		return true, nil
	}
	return r.v.receivedBy(r.sv, parseID(reg.fields[i].said[0].ID), r.ask.Known)
}

func (r *complianceReader) knownOf(all *saidOfWholeSite) (*saidOfWholeSite, error) {
	out := &saidOfWholeSite{}
	for _, o := range all.occasions {
		known, err := r.v.receivedBy(r.sv, o.record, r.ask.Known)
		if err != nil {
			return nil, err
		}
		if known {
			out.occasions = append(out.occasions, o)
		}
	}
	for _, p := range all.pauses {
		known, err := r.v.receivedBy(r.sv, p.record, r.ask.Known)
		if err != nil {
			return nil, err
		}
		if known {
			out.pauses = append(out.pauses, p)
		}
	}
	return out, nil
}

// receivedBy says whether a record had come by the end of a day in the site's zone.
func (v *View) receivedBy(sv *siteView, id id16, day forms.Day) (bool, error) {
	seq, ok := v.seqOf(id)
	if !ok {
		return false, errPacked
	}
	r, st, _, err := readBook(v.tx, seq)
	if err != nil {
		return false, err
	}
	return r.By == shippedBy || forms.DayOf(st.Received.In(sv.zone)) <= day, nil
}

// rulesKnown gives the rules the store had received by the end of a day.
func (v *View) rulesKnown(sv *siteView, day forms.Day) (*rules, error) {
	o := overlay{bucket: v.tx.Bucket(bktRule)}
	held := map[string]bool{}
	for _, r := range o.list(nil) {
		if len(r.value) < 24 {
			continue
		}
		known, err := v.receivedBy(sv, id16(r.value[8:24]), day)
		if err != nil {
			return nil, err
		}
		held[r.key] = known
	}
	return newRules(func(prefix []byte) []row {
		return slices.DeleteFunc(o.list(prefix), func(r row) bool { return !held[r.key] })
	}), nil
}

func (r *complianceReader) into(out *Compliance) {
	from := len(out.Rows)
	for key, c := range r.rows {
		key.Count = c
		out.Rows = append(out.Rows, key)
	}
	slices.SortFunc(out.Rows[from:], func(a, b ComplianceRow) int {
		return cmp.Or(cmp.Compare(a.Task, b.Task), cmp.Compare(a.Kind, b.Kind), cmp.Compare(a.Month, b.Month))
	})
	from = len(out.Standing)
	for key, states := range r.standing {
		out.Standing = append(out.Standing, StandingRow{r.sv.ID, key.Task, key.Kind, states})
	}
	slices.SortFunc(out.Standing[from:], func(a, b StandingRow) int {
		return cmp.Or(cmp.Compare(a.Task, b.Task), cmp.Compare(a.Kind, b.Kind))
	})
}

// DayRow counts the dates of one day: those met on it, and those whose last day it was or is.
type DayRow struct {
	Day    forms.Day
	InTime int // met on it, in time or within the grace
	Late   int // met on it, too late
	Missed int // its last day, and not met since
	Open   int // its last day, still ahead
}

// Days counts a site's dates by day, from one day to another, as known now.
func (v *View) Days(site string, from, to forms.Day) ([]DayRow, error) {
	sv, err := v.siteNamed(site)
	if err != nil {
		return nil, err
	}
	out := make([]DayRow, max(0, to-from+1))
	for i := range out {
		out[i].Day = from + forms.Day(i)
	}
	at := func(d forms.Day) *DayRow {
		if d < from || d > to || !v.scope.Shows(d) {
			return new(DayRow)
		}
		return &out[d-from]
	}
	r := complianceReader{v: v, sv: sv, ask: ComplianceAsk{From: from, To: to, Known: forms.NoDay}, standing: map[standingKey]map[string]int{}}
	r.take = func(_ string, o forms.Obligation) {
		switch o.Outcome(r.on) {
		case forms.InTime, forms.Graced:
			at(o.Met).InTime++
		case forms.Late:
			at(o.Met).Late++
		case forms.Open:
			at(o.Due).Open++
		default:
			at(o.Due).Missed++
		}
	}
	return out, r.read()
}
