package store

import (
	"bytes"
	"slices"

	"tripwell/forms"
	"tripwell/store/record"
)

// entryMade takes an entry into its device's row.
func (f *fold) entryMade(r *record.Record, st record.Stamp) error {
	body, err := readEntry(r)
	if err != nil {
		return err
	}
	l, err := f.log(r.Log)
	if err != nil {
		return err
	}
	id, n := parseID(r.ID), f.thing(l, ofDevice, parseID(r.Subject))
	w, err := f.work(l.ord, n)
	if err != nil {
		return err
	}
	o, err := f.outcome(l, r, st, body)
	if err != nil {
		return err
	}
	p := o.past(f.seq)
	f.entries[id] = f.seq
	if len(w.past) >= keepPast {
		pk := packer{}
		pk.pasts(w.past[:spillPast])
		f.on(bktHistory).put(historyKey(l.ord, n, w.past[0].seq), pk.b)
		w.past, w.older = slices.Clone(w.past[spillPast:]), w.older+spillPast
	}
	asBefore, inOrder := w.addsNoDay(p), w.inOrder(p)
	w.past = append(w.past, p)
	before := w.metDays(p)
	numbers := body.figures
	if o.said {
		numbers = figures(o.entry.Readings)
	}
	w.count(p, mark{day: p.day, clock: r.Clock, id: id}, numbers)
	l.entries++
	l.dirty, w.dirty = true, true
	f.tally(l.ord, p, 1)
	switch {
	case asBefore:
	case inOrder:
		f.reckonOn(l, w, p, before)
	default:
		if err := f.reckon(l, n, w); err != nil {
			return err
		}
	}
	return f.flawsTouched(l, n, w, p.result == codeFail)
}

// outcome judges an entry with all that has been said of it so far.
func (f *fold) outcome(l *modelLog, r *record.Record, st record.Stamp, body *entryBody) (outcome, error) {
	zone, err := f.zone(l)
	if err != nil {
		return outcome{}, err
	}
	said, err := f.saidOf(l.ord, r)
	if err != nil {
		return outcome{}, err
	}
	if len(said) == 0 {
		f.rules.known = &body.verdicts
		defer func() { f.rules.known = nil }()
	}
	return f.rules.outcome(l.ord, f.orgOrd(), zone, r, st, body, said), nil
}

// saidOf reads the corrections and withdrawals of an entry that the book holds so far.
func (f *fold) saidOf(site uint32, entry *record.Record) ([]saidRecord, error) {
	return readSaid(f.tx, f.on(bktSaid).get(saidKey(site, parseID(entry.ID))), f.current, entry, f.grants)
}

// entrySaid takes a correction, a withdrawal or a seal into the entry it is about, or keeps it until that comes.
func (f *fold) entrySaid(r *record.Record, st record.Stamp) error {
	if r.Kind == "record.sealed" {
		if done, err := f.sealedSaid(r); done || err != nil {
			return err
		}
	}
	if _, err := readCorrection(r); err != nil {
		return err
	}
	l, err := f.log(r.Log)
	if err != nil {
		return err
	}
	entry := parseID(r.Subject)
	key := saidKey(l.ord, entry)
	p := packer{bytes.Clone(f.on(bktSaid).get(key))}
	p.uint(f.seq)
	f.on(bktSaid).put(key, p.b)

	if r.Kind != "record.sealed" {
		_, received := workTime(r, st)
		f.on(bktChange).put(changeKey(parseID(r.By), received, f.seq), append(put32(make([]byte, 0, 20), l.ord), entry[:]...))
	}
	f.current = &saidRecord{Record: r, stamp: st}
	defer func() { f.current = nil }()
	return f.weighAgain(l, entry)
}

// sealedSaid notes which record lost its bytes; done where nothing else follows from that. What the office log says of its own
// refusals concerns no page.
func (f *fold) sealedSaid(r *record.Record) (done bool, err error) {
	class := record.LogClass(r.Log)
	if class == record.Office {
		return true, nil
	}
	l, err := f.log(r.Log)
	if err != nil {
		return true, err
	}
	key := sealKey(parseID(r.Subject), l.ord)
	p := packer{bytes.Clone(f.on(bktSeal).get(key))}
	p.uint(f.seq)
	f.on(bktSeal).put(key, p.b)
	return class == record.Org, nil
}

// weighAgain takes everything said of an entry into its device's row, where the entry has come.
func (f *fold) weighAgain(l *modelLog, entry id16) error {
	seq, known := f.entries[entry]
	if !known {
		v := f.tx.Bucket(bktID).Get(entry[:])
		if seq = readKey64(v); v == nil || seq >= f.seq {
			return nil
		}
	}
	e, st, _, err := readBook(f.tx, seq)
	if err != nil {
		return err
	}
	if id := parseID(e.Log); id != l.id || e.Kind != "entry.made" && e.Kind != "entry.imported" {
		return nil
	}
	n := f.thing(l, ofDevice, parseID(e.Subject))
	w, err := f.work(l.ord, n)
	if err != nil {
		return err
	}
	return f.change(l, n, w, true, func(p past) (past, error) {
		if p.seq != seq {
			return p, nil
		}
		body, err := readEntry(e)
		if err != nil {
			return p, err
		}
		o, err := f.outcome(l, e, st, body)
		return o.past(seq), err
	})
}

// rework judges a device's entries again, or only sets its dates again; it gives what that cost.
func (f *fold) rework(site, n uint32, t todoItem) (cost int, err error) {
	l, err := f.logOf(site)
	if err != nil {
		return 0, err
	}
	w, err := f.work(site, n)
	if err != nil {
		return 0, err
	}
	if t.what == todoDates {
		w.dirty = true
		return 1, f.reckon(l, n, w)
	}
	cost = 1
	err = f.change(l, n, w, false, func(p past) (past, error) {
		if p.day < t.from {
			return p, nil
		}
		cost++
		e, st, body, err := f.entryAt(p.seq)
		if err != nil {
			return p, err
		}
		o, err := f.outcome(l, e, st, body)
		return o.past(p.seq), err
	})
	if err != nil {
		return 0, err
	}
	if t.from != forms.NoDay {
		return cost, nil // a limit decides results; when a device came under test it does not
	}
	id, err := f.deviceID(site, n)
	if err != nil || id == (id16{}) {
		return cost, err
	}
	_, reg, err := f.register(l, ofDevice, id)
	if err != nil {
		return 0, err
	}
	return cost, f.deviceChanged(l, n, reg)
}

// change passes every entry of a device through fn and counts them anew where one came back different, or by force: a
// correction may leave the result and change the figures.
func (f *fold) change(l *modelLog, n uint32, w *work, force bool, fn func(past) (past, error)) error {
	differs, failed := force, false
	pass := func(list []past) (changed bool, err error) {
		for i, old := range list {
			p, err := fn(old)
			if err != nil {
				return changed, err
			}
			failed = failed || p.result == codeFail || old.result == codeFail
			if p.same(old) {
				continue
			}
			f.tally(l.ord, old, -1)
			f.tally(l.ord, p, 1)
			list[i], changed, differs = p, true, true
		}
		return changed, nil
	}
	older, err := f.older(l.ord, n, w)
	if err != nil {
		return err
	}
	for _, chunk := range older {
		changed, err := pass(chunk.past)
		if err != nil {
			return err
		}
		if changed {
			p := packer{}
			p.pasts(chunk.past)
			f.on(bktHistory).put([]byte(chunk.key), p.b)
		}
	}
	if _, err := pass(w.past); err != nil {
		return err
	}
	if err := f.flawsTouched(l, n, w, failed); err != nil {
		return err
	}
	if !differs {
		return nil
	}
	w.dirty = true
	all := w.past
	for _, chunk := range older {
		all = append(slices.Clone(chunk.past), all...)
	}
	if err := f.recount(l, w, all); err != nil {
		return err
	}
	return f.reckon(l, n, w)
}

// chunk is one row of m_hist.
type chunk struct {
	key  string
	past []past
}

func (f *fold) older(site, n uint32, w *work) ([]chunk, error) {
	if w.older == 0 {
		return nil, nil
	}
	var out []chunk
	for _, r := range f.on(bktHistory).list(workKey(site, n)) {
		u := unpacker{b: r.value}
		c := chunk{r.key, u.pasts()}
		if u.bad {
			return nil, errPacked
		}
		out = append(out, c)
	}
	return out, nil
}

// recount sets what the entries say together. An entry's clock and id are read from the book where two of one day need
// them to be told apart, and for the marks that remain.
func (f *fold) recount(l *modelLog, w *work, all []past) error {
	w.tasks = nil
	type best struct{ last, conclusive past }
	bests := map[string]*best{}
	newer := func(a, b past) (bool, error) { // b is newer than a
		if a.seq == 0 || a.day != b.day {
			return a.seq == 0 || a.day < b.day, nil
		}
		ma, err := f.markOf(a)
		if err != nil {
			return false, err
		}
		mb, err := f.markOf(b)
		return ma.before(mb), err
	}
	for _, p := range all {
		if p.result == 0 {
			continue
		}
		for _, met := range p.met {
			if t := w.task(met); p.day > t.met {
				t.met = p.day
			}
		}
		b := bests[p.task]
		if b == nil {
			b = &best{}
			bests[p.task] = b
			w.task(p.task)
		}
		if yes, err := newer(b.last, p); err != nil {
			return err
		} else if yes {
			b.last = p
		}
		if !conclusive(p.result) {
			continue
		}
		if yes, err := newer(b.conclusive, p); err != nil {
			return err
		} else if yes {
			b.conclusive = p
		}
	}
	for task, b := range bests {
		t := w.task(task)
		var err error
		if t.last, err = f.markOf(b.last); err != nil {
			return err
		}
		if t.conclusive, err = f.markOf(b.conclusive); err != nil {
			return err
		}
		if t.numbers, err = f.figuresAt(l, b.last.seq); err != nil {
			return err
		}
	}
	return nil
}

// figuresAt reads the measured values of an entry, after corrections, from the book.
func (f *fold) figuresAt(l *modelLog, seq uint64) ([]figure, error) {
	if seq == 0 {
		return nil, nil
	}
	r, _, _, err := readBook(f.tx, seq)
	if err != nil {
		return nil, err
	}
	body, err := readEntry(r)
	if err != nil {
		return nil, err
	}
	said, err := f.saidOf(l.ord, r)
	if err != nil {
		return nil, err
	}
	return figures(corrected(body.Entry, said).Readings), nil
}

// markOf reads what orders an entry from the book.
func (f *fold) markOf(p past) (mark, error) {
	if p.seq == 0 {
		return mark{}, nil
	}
	r, _, _, err := readBook(f.tx, p.seq)
	if err != nil {
		return mark{}, err
	}
	return mark{day: p.day, clock: r.Clock, id: parseID(r.ID), result: p.result}, nil
}

// deviceID gives the id of a device that was spoken of in the register; zero where only entries name it.
func (f *fold) deviceID(site, n uint32) (id16, error) {
	if r := f.registers[registerID{site, ofDevice, n}]; r != nil {
		return r.id, nil
	}
	v := f.on(bktRegister).get(registerKey(site, ofDevice, n))
	if v == nil {
		return id16{}, nil
	}
	t, err := unpackThing(v)
	return t.id, err
}

// tally counts the results of a month by their codes.
type tally [7]int64

// tally counts an entry in (by = 1) or out (-1).
func (f *fold) tally(site uint32, p past, by int64) {
	if p.result == 0 {
		return
	}
	y, m, _ := p.day.Civil()
	key := string(tallyKey(site, int32(y*12+int(m)-1), p.task))
	t := f.tallies[key]
	if t == nil {
		t = new(tally)
		f.tallies[key] = t
	}
	t[p.result] += by
}
