package store

import (
	"slices"
	"strings"
	"time"

	"tripwell/forms"
	"tripwell/store/record"
)

// A scope with a period shows what was done within it: tests by their test day, what was said of a test by the day of that
// test, defects and rounds by their own days. How things stand (register, rules, dates, the result and day of a last
// test) is shown whatever the day, without the id of an entry outside. Everything below decides that, and nothing else does.

// whole is the same view without the period, to work out how things stand. What it gives must pass through the scope again.
func (v *View) whole() *View {
	if v.scope.Period == nil {
		return v
	}
	w := *v
	w.scope.Period = nil
	return &w
}

// within narrows a span of days to the scope's period. NoDay at either end is open.
func (sc Scope) within(from, to forms.Day) (forms.Day, forms.Day) {
	if sc.Period == nil {
		return from, to
	}
	if from == forms.NoDay || from < sc.Period.From {
		from = sc.Period.From
	}
	if to == forms.NoDay || to > sc.Period.To {
		to = sc.Period.To
	}
	return from, to
}

// mayReadWhole reports whether the scope may have every record of a log: never a part of one, which would prove nothing.
func (sc Scope) mayReadWhole(log string) bool {
	return sc.mayRead(log) && (sc.Period == nil || log == record.Org)
}

// shows decides whether a record is of a day the scope shows. What says how things stand has no day.
func (v *View) shows(r *record.Record, st record.Stamp) (bool, error) {
	if v.scope.Period == nil || !isSiteLog(r.Log) {
		return true, nil
	}
	sv, err := v.open(r.Log)
	if err != nil {
		return false, err
	}
	day, dated, err := v.dayOf(sv.zone, r, st)
	return !dated || v.scope.Shows(day), err
}

// dayOf gives the day by which a record is judged; dated is false for what says how things stand.
func (v *View) dayOf(zone *time.Location, r *record.Record, st record.Stamp) (day forms.Day, dated bool, err error) {
	area, _, _ := strings.Cut(r.Kind, ".")
	switch {
	case r.Kind == "entry.made" || r.Kind == "entry.imported":
		body, err := readEntry(r)
		if err != nil {
			return forms.NoDay, true, err
		}
		return testDay(r, st, body, zone), true, nil
	case area == "entry":
		if seq, ok := v.seqOf(parseID(r.Subject)); ok && r.Subject != r.ID {
			entry, its, _, err := readBook(v.tx, seq)
			if err != nil {
				return forms.NoDay, true, err
			}
			if entry.Kind == "entry.made" || entry.Kind == "entry.imported" {
				return v.dayOf(zone, entry, its)
			}
		}
	case area != "defect" && area != "round" && area != "record":
		return forms.NoDay, false, nil
	}
	return forms.DayOf(happened(r, st).In(zone)), true, nil
}

// showsID is shows for a record by its id; what is not here is not shown.
func (v *View) showsID(id string) (bool, error) {
	if v.scope.Period == nil {
		return true, nil
	}
	seq, ok := v.seqOf(parseID(id))
	if !ok {
		return false, nil
	}
	r, st, _, err := readBook(v.tx, seq)
	if err != nil {
		return false, err
	}
	return v.shows(r, st)
}

// shownDefect leaves of a defect what the scope shows; ok is false for one that began after the period or was over before it.
func (v *View) shownDefect(d *forms.Defect) (shown *forms.Defect, ok bool, err error) {
	p := v.scope.Period
	if p == nil {
		return d, true, nil
	}
	if d.Day > p.To || d.Closed != nil && d.Closed.Day < p.From {
		return nil, false, nil
	}
	one := *d
	blank := func(id *string) {
		if err != nil || *id == "" {
			return
		}
		var is bool
		if is, err = v.showsID(*id); !is {
			*id = ""
		}
	}
	blank(&one.First)
	blank(&one.LastFail)
	for _, act := range []**forms.DefectAct{&one.Safe, &one.Assigned, &one.Repaired, &one.Asked, &one.Reopened, &one.Again, &one.Closed} {
		if *act != nil {
			own := **act
			if blank(&own.Record); own.Record == "" {
				own.Text = ""
			}
			*act = &own
		}
	}
	one.History = slices.Clone(d.History)
	for i := range one.History {
		blank(&one.History[i])
	}
	one.History = slices.DeleteFunc(one.History, func(id string) bool { return id == "" })
	return &one, true, err
}

// shownStop leaves of a round's stop that it was done, where the test that did it is outside the period.
func (v *View) shownStop(s *RoundStop) {
	if s.Day != forms.NoDay && !v.scope.Shows(s.Day) {
		s.Entry, s.By, s.Result, s.Day = "", "", "", forms.NoDay
	}
}

// showsRound decides whether a round is of a day the scope shows: of the day it is for, else the day it was made.
func (v *View) showsRound(zone *time.Location, r *Round) bool {
	day := r.Day
	if day == forms.NoDay {
		day = forms.DayOf(r.Made.In(zone))
	}
	return v.scope.Shows(day)
}

// showsRefusal decides by the day of what was refused, where that can be read, else by the day it came.
func (v *View) showsRefusal(ref *Refusal) (bool, error) {
	if v.scope.Period == nil || !isSiteLog(ref.Log) {
		return true, nil
	}
	sv, err := v.open(ref.Log)
	if err != nil {
		return false, err
	}
	day := forms.DayOf(ref.Received.In(sv.zone))
	if r, f := record.Parse(slices.Clone(ref.Bytes)); f == nil && r != nil {
		if at, dated, err := v.dayOf(sv.zone, r, record.Stamp{Received: ref.Received}); err == nil && dated {
			day = at
		}
	}
	return v.scope.Shows(day), nil
}
