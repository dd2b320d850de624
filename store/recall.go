package store

import (
	"context"

	"tripwell/forms"
	"tripwell/store/record"
)

// RecallRow is one entry an instrument's certificate puts in doubt.
type RecallRow struct {
	Entry  string
	Day    forms.Day
	Task   string
	Result string // as it stands
	Site   Site
	Device DeviceRow
	Again  LastTest // a later test of the same task that is not in doubt itself; Entry "" while there is none
	forms.Recall
}

// Recall lists every entry made with an instrument since its last good certificate, the one most in doubt first: judged
// again with the error that was found taken off. Withdrawn entries are left out.
func (v *View) Recall(ctx context.Context, instrument string, d Doubted) ([]RecallRow, error) {
	sites, err := v.Sites()
	if err != nil {
		return nil, err
	}
	var out []RecallRow
	for _, site := range sites {
		if err := v.recallSite(ctx, site, instrument, d, &out); err != nil {
			return nil, err
		}
	}
	doubted := map[string]bool{}
	for i := range out {
		doubted[out[i].Entry] = true
	}
	for i := range out {
		r := &out[i]
		if last := r.Device.Last[r.Task]; !doubted[last.Entry] && last.Day >= r.Day && last.Result != "" && last.Result != forms.NotTested && last.Result != forms.Incomplete {
			r.Again = last
		}
	}
	forms.RankRecalls(out, func(r RecallRow) forms.Recall { return r.Recall })
	return out, nil
}

func (v *View) recallSite(ctx context.Context, site Site, instrument string, d Doubted, out *[]RecallRow) error {
	sv, list, err := v.siteHistory(site.ID, d.From, d.To)
	if err != nil {
		return err
	}
	for i, one := range list {
		if i%256 == 0 && ctx.Err() != nil {
			return ctx.Err()
		}
		if !d.Holds(one.day) {
			continue
		}
		r, st, k, err := readBook(v.tx, one.seq)
		if err != nil {
			return err
		}
		body, err := readEntry(r)
		if err != nil {
			return err
		}
		if body.Given.Instrument != instrument {
			continue // the cheap question first: most entries are button tests
		}
		e, err := v.entry(sv, r, st, k, one.seq)
		if err != nil {
			return err
		}
		if e.Withdrawn != nil || e.Body.Given.Instrument != instrument {
			continue
		}
		row := RecallRow{Entry: e.ID, Day: e.Day, Task: e.Task, Result: e.Verdict.Result, Site: site}
		if row.Recall, err = v.recalled(sv, &e, d.Certificate.Errors); err != nil {
			return err
		}
		if n, ok := v.number(sv, ofDevice, parseID(e.Device)); ok {
			if row.Device, _, err = v.rowAt(sv, n, sv.today); err != nil {
				return err
			}
		}
		row.Device.ID = e.Device
		*out = append(*out, row)
	}
	return nil
}

func (v *View) recalled(sv *siteView, e *Entry, found map[string]forms.FoundError) (forms.Recall, error) {
	form, set, _ := v.rules().standing(sv.ord, v.orgLog(), &e.Body, e.Day)
	if form == nil || set == nil {
		return forms.Recall{}, nil
	}
	return forms.Recalled(form, set, e.Body, found)
}

// flagInstrument flags what an entry's instrument makes doubtful: one nobody registered, or one later found out of
// tolerance.
func (v *View) flagInstrument(instrument string, day forms.Day, flag func(code, detail string)) error {
	known, ok := v.tested[instrument]
	if !ok && v.scope.mayRead(record.Org) {
		all, err := v.Instruments()
		if err != nil {
			return err
		}
		for _, i := range all {
			known.registered = known.registered || i.ID == instrument
		}
		past, err := v.InstrumentPast(instrument)
		if err != nil {
			return err
		}
		known.doubted = past.Doubted()
		if v.tested == nil {
			v.tested = map[string]testedWith{}
		}
		v.tested[instrument] = known
	}
	if !known.registered && v.scope.mayRead(record.Org) {
		flag("instrument-unknown", "")
	}
	for i := range known.doubted {
		if known.doubted[i].Holds(day) {
			flag("instrument-out", known.doubted[i].To.String())
			break
		}
	}
	return nil
}

// testedWith is what entries made with an instrument are flagged for.
type testedWith struct {
	registered bool
	doubted    []Doubted
}
