package store

import (
	"bytes"
	"cmp"
	"fmt"
	"iter"
	"slices"
	"strconv"
	"time"

	"tripwell/forms"
	"tripwell/store/record"
)

// Entry is one test with all that was said of it since.
type Entry struct {
	ID, Device, Site string
	Form, Task       string
	Day              forms.Day // test day in the site's zone: of its own time, never later than the first holder had it
	At, Received     time.Time
	By, From         string
	ReadBy, TypedBy  string
	Source           string // phone | office | paper | spreadsheet | instrument-file | imported
	Imported         bool
	Note             string
	Log              string
	Pos              int64
	Body             forms.Entry   // after corrections
	Verdict          forms.Verdict // under the limit revision in force on the test day
	LimitSet         string        // "" where none was in force
	LimitRev         int
	Shown            *Shown
	Flags            []Flag
	Corrections      []Correction // oldest first; the last by (clock, id) is in force
	NotPermitted     []Correction // what people said of it who might not: neither the tester nor then a manager of the site
	Withdrawn        *Correction
	Sealed           *Seal // the owner had its bytes dropped; it never counts as passed
	Original         forms.Entry
	OwnNames         map[string]string // what the form of the entry calls checks an organisation added, by code; nil without any
	Photos           []string          // names of the entry's photos, at most four; of an entry read alone
}

// Shown is what the phone told the tester.
type Shown struct {
	Result   string `json:"result"`
	LimitRev int    `json:"limit_rev"`
	Judge    int    `json:"judge"`
}

// Correction is a later record about an entry.
type Correction struct {
	Record   string
	By       string
	At       time.Time
	Reason   string
	Body     forms.Entry
	InForce  bool
	Withdraw bool // it says that the entry does not count
	Received time.Time
	Sealed   *Seal // its bytes were dropped: it states no readings any more, and is not in force
}

var errNoEntry = &Error{Code: "not_found", Field: "entry", Text: "There is no such entry here, or it is not yours to see."}

// Entry gives one entry.
func (v *View) Entry(id string) (Entry, error) {
	r, st, k, seq, err := v.recordAt(parseID(id))
	if err != nil {
		return Entry{}, err
	}
	if r.Kind != "entry.made" && r.Kind != "entry.imported" {
		return Entry{}, errNoEntry
	}
	sv, err := v.open(r.Log)
	if err != nil {
		return Entry{}, err
	}
	e, err := v.entry(sv, r, st, k, seq)
	if err == nil && e.Sealed == nil {
		e.Photos = photosOf(r)
	}
	return e, err
}

// Entries gives a device's entries, the newest first.
func (v *View) Entries(device string) ([]Entry, error) {
	sv, d, err := v.findDevice(device)
	if err != nil {
		return nil, err
	}
	list, err := v.history(sv, d.n)
	if err != nil {
		return nil, err
	}
	type ordered struct {
		Entry
		clock uint64
	}
	all := make([]ordered, 0, len(list))
	for _, p := range list {
		if !v.scope.Shows(p.day) {
			continue
		}
		r, st, k, err := readBook(v.tx, p.seq)
		if err != nil {
			return nil, err
		}
		e, err := v.entry(sv, r, st, k, p.seq)
		if err != nil {
			return nil, err
		}
		all = append(all, ordered{e, r.Clock})
	}
	slices.SortFunc(all, func(a, b ordered) int {
		return cmp.Or(cmp.Compare(b.Day, a.Day), cmp.Compare(b.clock, a.clock), cmp.Compare(b.ID, a.ID))
	})
	out := make([]Entry, len(all))
	for i := range all {
		out[i] = all[i].Entry
	}
	return out, nil
}

// SiteEntries gives a site's entries by test day, then by their position in its log. NoDay = open end. The days are
// those of the read model; each entry is read from the book when its turn comes.
func (v *View) SiteEntries(site string, from, to forms.Day) iter.Seq2[Entry, error] {
	return func(yield func(Entry, error) bool) {
		sv, list, err := v.siteHistory(site, from, to)
		if err != nil {
			yield(Entry{}, err)
			return
		}
		for _, p := range list {
			r, st, k, err := readBook(v.tx, p.seq)
			if err != nil {
				yield(Entry{}, err)
				return
			}
			e, err := v.entry(sv, r, st, k, p.seq)
			if !yield(e, err) || err != nil {
				return
			}
		}
	}
}

// dayOf names an entry of a site by its test day and its place in the book.
type dayOf struct {
	day forms.Day
	seq uint64
}

func (v *View) siteHistory(site string, from, to forms.Day) (*siteView, []dayOf, error) {
	sv, err := v.siteNamed(site)
	if err != nil {
		return nil, nil, err
	}
	var list []dayOf
	from, to = v.scope.within(from, to)
	take := func(past []past) {
		for _, p := range past {
			if (from == forms.NoDay || p.day >= from) && (to == forms.NoDay || p.day <= to) {
				list = append(list, dayOf{p.day, p.seq})
			}
		}
	}
	prefix := put32(nil, sv.ord)
	for _, bucket := range [][]byte{bktWork, bktHistory} {
		err := v.scan(bucket, prefix, func(_, row []byte) error {
			if string(bucket) == string(bktHistory) {
				u := unpacker{b: row}
				take(u.pasts())
				return u.err()
			}
			w, err := unpackWork(row, true)
			if err == nil {
				take(w.past)
			}
			return err
		})
		if err != nil {
			return nil, nil, err
		}
	}
	slices.SortFunc(list, func(a, b dayOf) int { return cmp.Or(cmp.Compare(a.day, b.day), cmp.Compare(a.seq, b.seq)) })
	return sv, list, nil
}

// history gives the entries of a device in order of arrival.
func (v *View) history(sv *siteView, n uint32) ([]past, error) {
	w, err := v.work(sv, n, true)
	if err != nil || w == nil {
		return nil, err
	}
	var all []past
	if w.older > 0 {
		err := v.scan(bktHistory, workKey(sv.ord, n), func(_, row []byte) error {
			u := unpacker{b: row}
			all = append(all, u.pasts()...)
			return u.err()
		})
		if err != nil {
			return nil, err
		}
	}
	return append(all, w.past...), nil
}

// entry weighs an entry and everything said of it.
func (v *View) entry(sv *siteView, r *record.Record, st record.Stamp, k kept, seq uint64) (Entry, error) {
	body, err := readEntry(r)
	if err != nil {
		return Entry{}, fmt.Errorf("entry %s: %w", r.ID, err)
	}
	said, err := readSaid(v.tx, v.tx.Bucket(bktSaid).Get(saidKey(sv.ord, parseID(r.ID))), nil, r, v.whoMay())
	if err != nil {
		return Entry{}, fmt.Errorf("entry %s: %w", r.ID, err)
	}
	o := v.rules().outcome(sv.ord, v.orgLog(), sv.zone, r, st, body, said)
	e := Entry{
		ID: r.ID, Device: r.Subject, Site: sv.ID, Form: body.Form, Task: o.task, Day: o.day, At: r.At, Received: st.Received,
		By: r.By, From: r.From, ReadBy: body.ReadBy, TypedBy: body.TypedBy, Source: body.Source, Imported: r.Kind == "entry.imported",
		Note: body.Note, Log: r.Log, Pos: k.pos, Body: o.entry, Verdict: o.judged.Verdict, LimitSet: o.judged.set, LimitRev: o.judged.rev,
		Shown: body.Shown, Original: body.Entry,
	}
	if o.sealed {
		if e.Sealed, err = v.sealOf(sv.ord, parseID(r.ID)); err != nil {
			return e, err
		}
	}
	if e.Imported && e.Source == "" {
		e.Source = "imported"
	}
	e.OwnNames = v.ownNames(&e)
	if err := e.say(v, sv, said, o); err != nil {
		return e, err
	}
	if e.Flags, err = v.flags(sv, r, st, k, body, o, len(e.Corrections) > 0); err != nil {
		return e, err
	}
	for _, c := range e.NotPermitted {
		code := "correction-idle"
		if c.Withdraw {
			code = "withdrawal-idle"
		}
		e.Flags = append(e.Flags, Flag{code, cmp.Or(v.PersonName(c.By), c.By)})
	}
	return e, nil
}

// ownNames gives what the form of an entry calls the checks an organisation added, where the entry may hold any.
func (v *View) ownNames(e *Entry) map[string]string {
	own := false
	for code := range e.Body.Readings {
		own = own || forms.IsOwn(code)
	}
	for i := range e.Verdict.Findings { // one that is missing
		own = own || forms.IsOwn(e.Verdict.Findings[i].Reading)
	}
	if !own {
		return nil
	}
	form := v.rules().form(v.orgLog(), e.Form, e.Body.Given.FormRev, e.Day)
	if form == nil {
		return nil
	}
	return forms.OwnNames(form)
}

// say lists corrections and the withdrawal; each correction shows the entry as it stood after it.
func (e *Entry) say(v *View, sv *siteView, said []saidRecord, o outcome) (err error) {
	stands := e.Original
	for i := range said {
		s := &said[i]
		c := Correction{Record: s.ID, By: s.By, At: s.At, Reason: s.body.Reason, Received: s.stamp.Received}
		if s.Sealed != "" {
			if c.Sealed, err = v.sealOf(sv.ord, parseID(s.ID)); err != nil {
				return err
			}
		}
		if s.idle {
			c.Body = corrected(stands, []saidRecord{{Record: s.Record, body: s.body}})
			c.Withdraw = s.Kind == "entry.withdrawn"
			e.NotPermitted = append(e.NotPermitted, c)
			continue
		}
		switch {
		case s.Kind == "entry.corrected" && s.Sealed != "":
			c.Body = stands
			e.Corrections = append(e.Corrections, c)
		case s.Kind == "entry.corrected":
			stands.Readings, stands.Series = s.body.Readings, s.body.Series
			if s.body.Given != nil {
				stands.Given = *s.body.Given
			}
			for j := range e.Corrections {
				e.Corrections[j].InForce = false
			}
			c.Body, c.InForce = stands, true
			e.Corrections = append(e.Corrections, c)
		case s.Kind == "entry.withdrawn" && o.withdrawn == s:
			c.Body, c.InForce, c.Withdraw = stands, true, true
			e.Withdrawn = &c
		}
	}
	return nil
}

// Flag is something to look at that is no verdict: code names a word "flag.CODE", Detail fills it in.
// Codes: clock (device clock off), late (received long after), differs-shown, differs-register, calibration-expired,
// no-instrument, instrument-unknown (nobody registered it), instrument-out (found out of tolerance later), access-ended (between the test and its arrival), n-reused (two records carry its number), n-gap (the
// numbers before it never came), correction-idle and withdrawal-idle (by somebody who might not),
// not-qualified (by somebody who is stated to do other tests).
type Flag struct{ Code, Detail string }

const (
	clockOff = 2 * time.Minute    // common practice, no source
	lateFrom = 7 * 24 * time.Hour // owner's rule
)

func (v *View) flags(sv *siteView, r *record.Record, st record.Stamp, k kept, body *entryBody, o outcome, corrected bool) ([]Flag, error) {
	var out []Flag
	flag := func(code, detail string) { out = append(out, Flag{code, detail}) }
	off := time.Duration(st.OffsetMS) * time.Millisecond
	if ahead := r.At.Sub(st.Earliest()); ahead > clockOff {
		off = -ahead
	}
	if off.Abs() > clockOff {
		flag("clock", roughly(off.Abs()))
	}
	if late := st.Received.Sub(r.At); late > lateFrom && r.Kind == "entry.made" {
		flag("late", strconv.Itoa(int(late.Hours()/24)))
	}
	if body.Shown != nil && body.Shown.Result != "" {
		result := o.judged.Result
		if corrected {
			result = v.rules().judge(sv.ord, v.orgLog(), &body.Entry, o.day).Result
		}
		if result != body.Shown.Result {
			flag("differs-shown", body.Shown.Result)
		}
	}
	given := &o.entry.Given
	if given.CalibrationDue != nil && *given.CalibrationDue != forms.NoDay && *given.CalibrationDue < o.day {
		flag("calibration-expired", given.CalibrationDue.String())
	}
	if o.task == forms.TaskInstrument && given.Instrument == "" && r.Kind == "entry.made" {
		flag("no-instrument", "")
	}
	if given.Instrument != "" {
		if err := v.flagInstrument(given.Instrument, o.day, flag); err != nil {
			return nil, err
		}
	}
	if err := v.flagNumber(r, k, flag); err != nil {
		return nil, err
	}
	if at, ended, err := v.whoMay().accessEnded(r, st); err != nil {
		return nil, err
	} else if ended {
		flag("access-ended", forms.DayOf(time.UnixMilli(at).In(sv.zone)).String())
	}
	if err := v.flagQualified(r, st, body, o.task, flag); err != nil {
		return nil, err
	}
	return out, v.differsRegister(sv, r, given, flag)
}

// flagQualified flags a test by somebody whose grant of that time says what they may do, and not this: a button test needs any
// of it, everything else an instrument at live parts. Where nobody said, nothing is flagged.
func (v *View) flagQualified(r *record.Record, st record.Stamp, body *entryBody, task string, flag func(code, detail string)) error {
	tester := r.By
	if record.IsID(body.ReadBy) {
		tester = body.ReadBy
	}
	facts, err := v.whoMay().of(tester)
	if err != nil {
		return err
	}
	at := happened(r, st).UnixMilli()
	var may []string
	for _, f := range facts {
		if f.At <= at {
			may = f.May
		}
	}
	if len(may) > 0 && task != forms.TaskButton && !slices.Contains(may, MayMeasure) {
		flag("not-qualified", cmp.Or(v.PersonName(tester), tester))
	}
	return nil
}

// flagNumber flags a number that several records of the installation carry in this log, and numbers missing before it.
func (v *View) flagNumber(r *record.Record, k kept, flag func(code, detail string)) error {
	key := reusedKey(r.From, k.ord, r.N, "")
	if again, _ := v.tx.Bucket(bktReused).Cursor().Seek(key); bytes.HasPrefix(again, key) {
		flag("n-reused", strconv.FormatInt(r.N, 10))
	}
	gap, err := v.gapBefore(r.From, k.ord, r.N)
	if gap != (numbers{}) {
		flag("n-gap", gap.String())
	}
	return err
}

// differsRegister flags what an entry says of its device and the register says otherwise.
func (v *View) differsRegister(sv *siteView, r *record.Record, given *forms.Given, flag func(code, detail string)) error {
	d, err := v.deviceThing(sv, parseID(r.Subject))
	if err != nil || d == nil {
		return err
	}
	c, err := v.circuit(sv, parseID(d.text("circuit")))
	if err != nil {
		return err
	}
	for _, f := range []struct{ name, said, register string }{
		{"kind", given.Kind, d.text("kind")},
		{"equipment_ground", given.EquipmentGround, d.text("equipment_ground")},
		{"supply", given.Supply, c.supply},
		{"rated_residual_ma", number(given.RatedResidualMA), number(d.number("rated_residual_ma"))},
	} {
		if f.said != "" && f.register != "" && f.said != f.register {
			flag("differs-register", f.name+": "+f.said+" / "+f.register)
		}
	}
	return nil
}

func number(f float64) string {
	if f == 0 {
		return ""
	}
	return strconv.FormatFloat(f, 'g', -1, 64)
}

// roughly gives a duration in its largest whole unit.
func roughly(d time.Duration) string {
	switch {
	case d >= 48*time.Hour:
		return strconv.Itoa(int(d.Hours()/24)) + " d"
	case d >= 2*time.Hour:
		return strconv.Itoa(int(d.Hours())) + " h"
	}
	return strconv.Itoa(int(d.Round(time.Minute).Minutes())) + " min"
}
