package forms

import (
	"cmp"
	"slices"
)

// What became of a date.
const (
	Open     = "open" // its last day has not passed
	InTime   = "in-time"
	Graced   = "in-grace" // done after its day and within the grace
	Late     = "late"     // done after that
	Missed   = "missed"   // not done
	NoAccess = "no-access"
)

// Outcomes lists what becomes of a date once its day has passed or it was met, in the order they are reported.
func Outcomes() []string { return []string{InTime, Graced, Late, Missed, NoAccess} }

// Test is one test as dates see it: whether it met the task, or somebody stood before a closed door.
type Test struct {
	Day    Day
	Meets  bool
	Locked bool
}

// Obligation is one date that was asked for, and the test that met it.
type Obligation struct {
	DueDate
	Met Day // NoDay: not met
}

// Outcome says what had become of the date by the end of a day.
func (o Obligation) Outcome(on Day) string {
	switch met := o.Met != NoDay && o.Met <= on; {
	case met && o.Met <= o.Due:
		return InTime
	case met && o.Met <= o.Until:
		return Graced
	case met:
		return Late
	case on <= o.Until:
		return Open
	case o.Tried:
		return NoAccess
	}
	return Missed
}

// Counts is the day an obligation is counted on: the day it was done, where that was in time, else its last day. So what
// a month has come to does not change when a later test comes before its date.
func (o Obligation) Counts() Day {
	if o.Met != NoDay && o.Met < o.Due {
		return o.Met
	}
	return o.Due
}

// Trace is what the dates of one task come to. It is made by Follow, day after day.
type Trace struct {
	sc   *scheduled
	c    Case
	last Day   // the newest day that met the task
	shut []Day // days of closed doors since
	Done []Obligation
}

// Follow begins a trace for each task of a schedule, in its order. last gives the newest day that met a task so far.
func (s Schedule) Follow(c Case, last func(task string) Day) []Trace {
	out := make([]Trace, len(s))
	for i := range s {
		out[i] = Trace{sc: &s[i], c: c, last: last(s[i].task)}
	}
	return out
}

// Task names the task.
func (t *Trace) Task() string { return t.sc.task }

// Take adds one test. Tests must come in the order of their days.
func (t *Trace) Take(test Test) {
	if t.c.Ended != NoDay && test.Day > t.c.Ended {
		return
	}
	switch {
	case test.Meets:
		if test.Day >= t.c.Start && test.Day != t.last {
			t.meet(test.Day)
		}
		t.last, t.shut = max(t.last, test.Day), nil
	case test.Locked:
		t.shut = append(t.shut, test.Day)
	}
}

// meet closes what a test of a day meets, and what had passed before it unmet.
func (t *Trace) meet(day Day) {
	for _, o := range t.c.Occasions {
		if d, ok := t.sc.occasion(&t.c, o); ok && d.Opens <= day && (t.last == NoDay || d.Opens > t.last) {
			t.close(d, day)
		}
	}
	d := t.sc.planned(&t.c, t.last)
	if d.Every.Zero() {
		t.close(d, day)
		return
	}
	for first, _ := d.Every.period(d.Due); min(d.Opens, first) <= day; first = d.Opens {
		if day <= d.Until {
			t.close(d, day)
		} else {
			t.close(d, NoDay)
		}
		if day <= d.Due {
			return
		}
		d, _ = d.following()
	}
}

func (t *Trace) close(d DueDate, met Day) {
	d.Tried = t.tried(d)
	t.Done = append(t.Done, Obligation{d, met})
}

// tried says whether somebody stood before a closed door while a date was open.
func (t *Trace) tried(d DueDate) bool {
	return slices.ContainsFunc(t.shut, func(day Day) bool { return day >= d.Opens && (d.Every.Zero() || day <= d.Until) })
}

// Next gives the date the task waits for; ok is false where the device was taken out of use, and then what it had missed
// by that day is among Done.
func (t *Trace) Next() (d DueDate, ok bool) {
	return t.knocked(t.sc.next(&t.c, t.last)), t.c.Ended == NoDay
}

// Open gives the dates from which all that is open follows (DueDate.Unmet): each occasion that was not met, and what the
// plans ask for next. next is what Next gave: where nothing happened it is all there is.
func (t *Trace) Open(next DueDate) []DueDate {
	if len(t.c.Occasions) == 0 {
		return []DueDate{next}
	}
	var out []DueDate
	for _, o := range t.c.Occasions {
		if d, ok := t.sc.occasion(&t.c, o); ok && (t.last == NoDay || d.Opens > t.last) {
			out = append(out, t.knocked(d))
		}
	}
	return append(out, t.knocked(t.sc.planned(&t.c, t.last)))
}

// knocked says of a date and the periods after it in which of them somebody stood before a closed door.
func (t *Trace) knocked(d DueDate) DueDate {
	d.Tried = t.tried(d)
	if len(t.shut) == 0 || d.Every.Zero() {
		return d
	}
	newest := slices.Max(t.shut)
	for next, _ := d.following(); next.Opens <= newest; next, _ = next.following() {
		if t.tried(next) {
			d.Shut = append(d.Shut, next.Due)
		}
	}
	return d
}

// End closes what a device taken out of use had missed by then.
func (t *Trace) End() {
	if t.c.Ended == NoDay {
		return
	}
	t.Done = append(t.Done, t.missing(t.c.Ended)...)
}

// missing gives what is open at the end of a day and whose day has passed.
func (t *Trace) missing(on Day) []Obligation {
	var out []Obligation
	for _, o := range t.Waiting(on) {
		if on > o.Until {
			out = append(out, o)
		}
	}
	return out
}

// Waiting gives all that is open at the end of a day, oldest first: one obligation for each period that went by, and the
// one that is asked for next.
func (t *Trace) Waiting(on Day) []Obligation {
	var out []Obligation
	next, _ := t.Next()
	for _, seed := range t.Open(next) {
		for d := range seed.Unmet(on) {
			out = append(out, Obligation{d, NoDay})
		}
	}
	return out
}

// SortTests puts tests in the order of their days; of one day what met a task comes first.
func SortTests(list []Test) {
	slices.SortFunc(list, func(a, b Test) int {
		m := func(t Test) int {
			if t.Meets {
				return 0
			}
			return 1
		}
		return cmp.Or(cmp.Compare(a.Day, b.Day), cmp.Compare(m(a), m(b)))
	})
}
