package store

import (
	"bytes"
	"cmp"
	"encoding/json"
	"slices"
	"strings"

	"tripwell/forms"
	"tripwell/store/record"
)

// Defects follow from a device's tests, from what people said of them (defect.*) and from its end. They are computed anew
// for a device whenever any of that changes, once a group, and only for devices that ever failed or of whose defects
// anything was said: the ordinary passing test touches none of these rows.
//
// What a device's defects are is decided by forms.Defects alone, from the whole set in its own order.

// factSaid keeps a record that the defects of a device follow from.
func (f *fold) factSaid(l *modelLog, n uint32) error {
	if _, err := f.zone(l); err != nil { // the site has its number before the group ends, wherever that is
		return err
	}
	key := workKey(l.ord, n)
	p := packer{bytes.Clone(f.on(bktFact).get(key))}
	p.uint(f.seq)
	f.on(bktFact).put(key, p.b)
	w, err := f.work(l.ord, n)
	if err != nil {
		return err
	}
	w.flawed, w.dirty = true, true
	f.flaws[workID{l.ord, n}] = true
	return nil
}

// defectSaid takes what a person said of a defect.
func (f *fold) defectSaid(r *record.Record) error {
	body, err := readDefect(r)
	if err != nil {
		return err
	}
	l, err := f.log(r.Log)
	if err != nil {
		return err
	}
	return f.factSaid(l, f.thing(l, ofDevice, parseID(body.Device)))
}

// repaired takes a device's repairs into its dates: each asks for its tests at once.
func (f *fold) repaired(l *modelLog, n uint32) error {
	facts := f.on(bktFact).get(workKey(l.ord, n))
	if facts == nil {
		return nil
	}
	w, err := f.work(l.ord, n)
	if err != nil {
		return err
	}
	now, err := f.repairsOf(l, n, w, facts)
	if err != nil || slices.EqualFunc(now, w.repairs, occasion.same) {
		return err
	}
	w.repairs, w.dirty = now, true
	return f.reckon(l, n, w)
}

// repairsOf gives the repairs among what was said of a device's defects as occasions, by record. A task that was tested on the
// day of a repair before it, and not after, still waits for a test.
func (f *fold) repairsOf(l *modelLog, n uint32, w *work, facts []byte) ([]occasion, error) {
	zone, err := f.zone(l)
	if err != nil {
		return nil, err
	}
	all, err := f.allPast(l.ord, n, w)
	if err != nil {
		return nil, err
	}
	var out []occasion
	for u := (unpacker{b: facts}); len(u.b) > 0; {
		seq := u.uint()
		if u.bad {
			return nil, errPacked
		}
		r, st, _, err := readBook(f.tx, seq)
		if err != nil {
			return nil, err
		}
		if r.Kind != "defect.repaired" {
			continue
		}
		o := occasion{parseID(r.ID), forms.Occasion{Cause: forms.Repaired, On: forms.DayOf(happened(r, st).In(zone))}}
		if o.Before, err = f.testedBefore(r, o.On, all); err != nil {
			return nil, err
		}
		out = append(out, o)
	}
	slices.SortFunc(out, func(a, b occasion) int { return slices.Compare(a.record[:], b.record[:]) })
	return out, nil
}

// testedBefore names the tasks met on the day of a record before it and not after.
func (f *fold) testedBefore(r *record.Record, day forms.Day, all []past) ([]string, error) {
	var before, after []string
	for _, p := range all {
		if p.day != day || len(p.met) == 0 {
			continue
		}
		e, _, _, err := readBook(f.tx, p.seq)
		if err != nil {
			return nil, err
		}
		if cmp.Or(cmp.Compare(e.Clock, r.Clock), cmp.Compare(e.ID, r.ID)) < 0 {
			before = append(before, p.met...)
		} else {
			after = append(after, p.met...)
		}
	}
	before = slices.DeleteFunc(before, func(task string) bool { return slices.Contains(after, task) })
	slices.Sort(before)
	return slices.Compact(before), nil
}

// defectBody is the body of every defect.* record; each kind has some of its members.
type defectBody struct {
	Device, Cause, Protector, Severity string
	Text, How, Reason                  string
	To, Crew                           string
	Due                                string
	With, On                           string // of device.replaced and device.retired
	Parts                              []any
}

func readDefect(r *record.Record) (*defectBody, error) {
	b := new(defectBody)
	if err := json.Unmarshal(r.Body, b); err != nil {
		return nil, badBody("", "What is said of the defect cannot be read: %v.", err)
	}
	return b, nil
}

func (b *defectBody) parts() []string {
	var out []string
	for _, p := range b.Parts {
		if s, ok := p.(string); ok && strings.TrimSpace(s) != "" && len(out) < 50 {
			out = append(out, strings.TrimSpace(s))
		}
	}
	return out
}

// flawsTouched marks a device's defects for computing, where it has any or this result may make one; and those of the
// devices whose place it took.
func (f *fold) flawsTouched(l *modelLog, n uint32, w *work, failed bool) error {
	if failed && !w.flawed {
		w.flawed, w.dirty = true, true
	}
	if w.flawed {
		f.flaws[workID{l.ord, n}] = true
	}
	met := map[uint32]bool{n: true}
	for w.follows {
		id, err := f.deviceID(l.ord, n)
		if err != nil {
			return err
		}
		_, reg, err := f.register(l, ofDevice, id)
		if err != nil {
			return err
		}
		before := reg.idOf("#replaces")
		if before == (id16{}) {
			return nil
		}
		if n = f.thing(l, ofDevice, before); met[n] { // its row was made when the replacement was folded
			return nil
		}
		met[n] = true
		if w, err = f.work(l.ord, n); err != nil {
			return err
		}
		if w.flawed {
			f.flaws[workID{l.ord, n}] = true
		}
	}
	return nil
}

// packDefects computes the defects of the devices that were marked and keeps their indexes.
func (f *fold) packDefects() error {
	for key := range f.flaws {
		l, err := f.logOf(key.site)
		if err != nil {
			return err
		}
		if err := f.repaired(l, key.n); err != nil {
			return err
		}
		if err := f.packFlaws(l, key.n); err != nil {
			return err
		}
	}
	clear(f.flaws)
	return nil
}

func (f *fold) packFlaws(l *modelLog, n uint32) error {
	key := workKey(l.ord, n)
	old, err := unpackDefects(f.on(bktDefect).get(key))
	if err != nil {
		return err
	}
	now, err := f.defectsOf(l, n)
	if err != nil {
		return err
	}
	for _, d := range old.Defects {
		f.on(bktFlaw).delete(flawKey(parseID(d.ID), l.ord))
		f.on(bktOpen).delete(openKey(l.ord, d))
	}
	for _, d := range now.Defects {
		f.on(bktFlaw).put(flawKey(parseID(d.ID), l.ord), put32(nil, n))
		if d.Closed == nil {
			f.on(bktOpen).put(openKey(l.ord, d), openRow(n, d))
		}
	}
	if len(now.Defects)+len(now.Loose) == 0 {
		f.on(bktDefect).delete(key)
		return nil
	}
	row, err := json.Marshal(now)
	if err != nil {
		return err
	}
	f.on(bktDefect).put(key, row)
	return nil
}

// flaws are a device's defects as a row keeps them.
type flaws struct {
	Device  string          `json:"device"`
	Defects []*forms.Defect `json:"defects"`
	Loose   []string        `json:"loose,omitempty"` // records about defects that are no more
}

func unpackDefects(row []byte) (*flaws, error) {
	fl := new(flaws)
	if row == nil {
		return fl, nil
	}
	if err := json.Unmarshal(row, fl); err != nil {
		return nil, errPacked
	}
	return fl, nil
}

func (f *fold) defectsOf(l *modelLog, n uint32) (*flaws, error) {
	facts, device, err := f.factsOf(l, n)
	if err != nil {
		return nil, err
	}
	said := slices.ContainsFunc(facts, func(e forms.DefectEvent) bool { return e.What != "retired" && e.What != "replaced" })
	tests, tested, err := f.testsOf(l, n, said)
	if err != nil {
		return nil, err
	}
	fl := &flaws{Device: device}
	if fl.Device == "" {
		fl.Device = tested
	}
	if !said && len(tests) == 0 {
		return fl, nil
	}
	newer, err := f.newerTests(l, n)
	if err != nil {
		return nil, err
	}
	events := slices.Concat(facts, tests, newer)
	fl.Defects, fl.Loose = forms.Defects(events, func(cause, entry string) string {
		return record.NamedID("defect", fl.Device, cause, entry)
	})
	return fl, nil
}

// factsOf reads what people said of a device's defects, and its end.
func (f *fold) factsOf(l *modelLog, n uint32) (events []forms.DefectEvent, device string, err error) {
	zone, err := f.zone(l)
	if err != nil {
		return nil, "", err
	}
	for u := (unpacker{b: f.on(bktFact).get(workKey(l.ord, n))}); len(u.b) > 0; {
		seq := u.uint()
		if u.bad {
			return nil, "", errPacked
		}
		r, st, _, err := readBook(f.tx, seq)
		if err != nil {
			return nil, "", err
		}
		body, err := readDefect(r)
		if err != nil {
			return nil, "", err
		}
		at := happened(r, st)
		e := forms.DefectEvent{ID: r.ID, Defect: r.Subject, Day: forms.DayOf(at.In(zone)), Clock: r.Clock, At: at.UnixMilli(),
			Cause: body.Cause, Severity: body.Severity, To: body.To, With: body.With, Due: forms.NoDay, Parts: body.parts()}
		e.Text = body.Text + body.How + body.Reason // each kind has one of them
		if e.To == "" {
			e.To = body.Crew
		}
		if day, err := forms.ParseDay(body.Due); err == nil {
			e.Due = day
		}
		class, what, _ := strings.Cut(r.Kind, ".")
		e.What, device = what, body.Device
		if class == "device" {
			device = r.Subject
		}
		events = append(events, e)
	}
	return events, device, nil
}

// testsOf reads all of a device's tests, or those from the first that failed on.
func (f *fold) testsOf(l *modelLog, n uint32, whole bool) (events []forms.DefectEvent, device string, err error) {
	w, err := f.work(l.ord, n)
	if err != nil {
		return nil, "", err
	}
	older, err := f.older(l.ord, n, w)
	if err != nil {
		return nil, "", err
	}
	var all []past
	for _, c := range older {
		all = append(all, c.past...)
	}
	all = append(all, w.past...)
	from := forms.NoDay
	if !whole {
		for _, p := range all {
			if p.result == codeFail && (from == forms.NoDay || p.day < from) {
				from = p.day
			}
		}
		if from == forms.NoDay {
			return nil, "", nil
		}
	}
	for _, p := range all {
		if p.day < from || !conclusive(p.result) && p.result != codeIncomplete && p.result != codeConditionalFail {
			continue
		}
		e, r, err := f.testEvent(l, p)
		if err != nil {
			return nil, "", err
		}
		device = r
		events = append(events, e)
	}
	return events, device, nil
}

func (f *fold) testEvent(l *modelLog, p past) (e forms.DefectEvent, device string, err error) {
	r, st, _, err := readBook(f.tx, p.seq)
	if err != nil {
		return e, "", err
	}
	body, err := readEntry(r)
	if err != nil {
		return e, "", err
	}
	o, err := f.outcome(l, r, st, body)
	if err != nil {
		return e, "", err
	}
	return testEvent(r, st, &o), r.Subject, nil
}

// testEvent is an entry as defects see it. A sealed one says nothing; of an incomplete one the readings that were taken
// count.
func testEvent(r *record.Record, st record.Stamp, o *outcome) forms.DefectEvent {
	e := forms.DefectEvent{What: "test", ID: r.ID, Day: o.day, Clock: r.Clock, At: happened(r, st).UnixMilli(), Task: o.task, Due: forms.NoDay, Result: o.judged.Result}
	if !o.sealed && o.withdrawn == nil {
		e.Failed, e.Passed = forms.CausesOf(o.task, &o.entry, o.judged.Verdict)
	}
	return e
}

// newerTests reads the tests of the devices that took a replaced one's place.
func (f *fold) newerTests(l *modelLog, n uint32) ([]forms.DefectEvent, error) {
	id, err := f.deviceID(l.ord, n)
	if err != nil || id == (id16{}) {
		return nil, err
	}
	var out []forms.DefectEvent
	for met := map[id16]bool{}; !met[id]; {
		met[id] = true
		_, reg, err := f.register(l, ofDevice, id)
		if err != nil {
			return nil, err
		}
		if id = reg.idOf("#with"); id == (id16{}) {
			break
		}
		tests, _, err := f.testsOf(l, f.thing(l, ofDevice, id), true)
		if err != nil {
			return nil, err
		}
		for i := range tests {
			tests[i].Newer = true
		}
		out = append(out, tests...)
	}
	return out, nil
}
