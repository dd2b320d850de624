package store

import (
	"bytes"
	"fmt"
	"slices"

	"go.etcd.io/bbolt"

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
	w.past = append(w.past, p)
	w.count(p, mark{day: p.day, clock: r.Clock, id: id})
	l.entries++
	l.dirty, w.dirty = true, true
	f.tally(l.ord, p, 1)
	if w.live {
		w.reckon(f.rules.schedule(l.ord, f.orgOrd(), w.kind))
	}
	return nil
}

// outcome judges an entry with all that has been said of it so far.
func (f *fold) outcome(l *modelLog, r *record.Record, st record.Stamp, body *entryBody) (outcome, error) {
	zone, err := f.zone(l)
	if err != nil {
		return outcome{}, err
	}
	said, err := f.saidOf(l.ord, parseID(r.ID))
	if err != nil {
		return outcome{}, err
	}
	return f.rules.outcome(l.ord, f.orgOrd(), zone, r, st, body, said), nil
}

// saidOf reads the corrections and withdrawals of an entry that the book holds so far.
func (f *fold) saidOf(site uint32, entry id16) ([]saidRecord, error) {
	return readSaid(f.tx, f.on(bktSaid).get(saidKey(site, entry)), f.current)
}

// entrySaid takes a correction, a withdrawal or a seal into the entry it is about, or keeps it until that comes.
func (f *fold) entrySaid(r *record.Record) error {
	if r.Kind == "record.sealed" && record.LogClass(r.Log) != "site" {
		return nil
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

	f.current = r
	defer func() { f.current = nil }()
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
	if e.Log != r.Log || e.Kind != "entry.made" && e.Kind != "entry.imported" {
		return nil
	}
	n := f.thing(l, ofDevice, parseID(e.Subject))
	w, err := f.work(l.ord, n)
	if err != nil {
		return err
	}
	return f.change(l, n, w, func(p past) (past, error) {
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
func (f *fold) rework(site, n uint32, what byte) (cost int, err error) {
	l, err := f.logOf(site)
	if err != nil {
		return 0, err
	}
	w, err := f.work(site, n)
	if err != nil {
		return 0, err
	}
	if what == todoDates {
		w.dirty = true
		w.reckon(f.rules.schedule(site, f.orgOrd(), w.kind))
		return 1, nil
	}
	err = f.change(l, n, w, func(p past) (past, error) {
		e, st, _, err := readBook(f.tx, p.seq)
		if err != nil {
			return p, err
		}
		body, err := readEntry(e)
		if err != nil {
			return p, err
		}
		o, err := f.outcome(l, e, st, body)
		return o.past(p.seq), err
	})
	if err != nil {
		return 0, err
	}
	id, err := f.deviceID(site, n)
	if err != nil {
		return 0, err
	}
	_, reg, err := f.register(l, ofDevice, id)
	if err != nil {
		return 0, err
	}
	return 1 + len(w.past) + int(w.older), f.deviceChanged(l, n, reg)
}
