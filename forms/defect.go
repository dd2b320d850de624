package forms

import (
	"cmp"
	"slices"
	"strings"
)

// What a defect may come to, and what it may mean to whoever uses the outlet.
const (
	DefectOpen     = "open"      // nobody has done anything about it yet
	DefectMadeSafe = "made-safe" // it cannot hurt anybody until it is repaired
	DefectAssigned = "assigned"  // somebody is to repair it
	DefectRepaired = "repaired"  // said to be repaired or replaced; a passing test is still wanted
	DefectClosed   = "closed"

	SeverityUnsafe = "unsafe" // outside a limit that protects people: not to be used
	SeverityRepair = "repair" // to be put right; nobody is at risk meanwhile. Only a person says so
)

// How a defect was closed.
const (
	ClosedByTest     = "test"
	ClosedByRetiring = "retired"
)

// DefectStates lists the states in the order of the work.
func DefectStates() []string {
	return []string{DefectOpen, DefectMadeSafe, DefectAssigned, DefectRepaired, DefectClosed}
}

// DefectSeverities lists the severities, worst first.
func DefectSeverities() []string { return []string{SeverityUnsafe, SeverityRepair, Nuisance} }

// Causes that are no reading: of a defect opened by hand, and of a test of which only the outcome is known.
const (
	CauseByHand = "by-hand"
	causeTask   = "task:"
)

// DefectEvent is something a device's defects follow from: a test of it, or what a person said. Events are ordered by
// (Day, Clock, ID); the order in which they came has no say.
type DefectEvent struct {
	What   string // test | opened | noted | made_safe | assigned | repaired | closed | reopened | retired | replaced
	ID     string // of the record
	Defect string // what a person said it of: a defect's id, or any other id for all that is open at the device
	Day    Day
	Clock  uint64
	At     int64 // ms since 1970

	// Of a test.
	Task   string
	Result string
	Failed []FailedCause // by its findings, in their order
	Passed []string      // causes this test speaks free
	Newer  bool          // a test of the device that took this one's place

	// Of what a person said.
	Cause, Severity, Text, To, With string
	Due                             Day // NoDay where none is said
	Parts                           []string
}

// FailedCause is a cause with how bad it is.
type FailedCause struct{ Cause, Severity string }

// Defect is one fault of one device, from the first failing test or from the hand that opened it.
type Defect struct {
	ID       string     `json:"id"`
	Cause    string     `json:"cause"` // reading code, field, task:TASK, or what a person named
	Task     string     `json:"task,omitempty"`
	Severity string     `json:"severity"`
	ByHand   bool       `json:"by_hand,omitzero"`
	Text     string     `json:"text,omitempty"` // what a person wrote who opened it
	First    string     `json:"first"`          // record it began with: an entry, or defect.opened
	LastFail string     `json:"last_fail,omitempty"`
	Day      Day        `json:"day"`
	Opened   int64      `json:"opened"` // ms since 1970
	Fails    int        `json:"fails,omitzero"`
	State    string     `json:"state"`
	Safe     *DefectAct `json:"safe,omitempty"`
	Assigned *DefectAct `json:"assigned,omitempty"` // Text is the person
	Repaired *DefectAct `json:"repaired,omitempty"`
	Asked    *DefectAct `json:"asked,omitempty"`    // somebody closed it; it waits for its passing test
	Reopened *DefectAct `json:"reopened,omitempty"` // the last time
	Again    *DefectAct `json:"again,omitempty"`    // passed since the last fail, with no repair said: the entry
	Closed   *DefectAct `json:"closed,omitempty"`   // Record is the entry or the record that closed it
	How      string     `json:"how,omitempty"`      // ClosedByTest or ClosedByRetiring
	With     string     `json:"with,omitempty"`     // device that took the failed one's place
	Due      Day        `json:"due"`
	Parts    []string   `json:"parts,omitempty"`
	History  []string   `json:"history"` // records of all that happened to it, in order
}

// DefectAct is one thing that happened to a defect.
type DefectAct struct {
	Record string `json:"record"`
	At     int64  `json:"at"`
	Day    Day    `json:"day"`
	Text   string `json:"text,omitempty"`
}

// InUse reports whether a device that failed unsafely may still be used: it is neither made safe nor put right.
func (d *Defect) InUse() bool {
	return d.Severity == SeverityUnsafe && d.State != DefectClosed && d.Safe == nil && d.With == ""
}

// CausesOf gives what a test failed by and what it speaks free. A reading speaks its cause free only where it was given,
// was held inside every limit that applies, and no doubt was left.
func CausesOf(task string, e *Entry, v Verdict) (failed []FailedCause, passed []string) {
	bad, good := map[string]bool{}, map[string]bool{}
	for _, f := range v.Findings {
		switch f.Verdict {
		case Fail:
			severity := cmp.Or(f.Severity, SeverityUnsafe)
			if i := slices.IndexFunc(failed, func(c FailedCause) bool { return c.Cause == f.Reading }); i < 0 {
				failed = append(failed, FailedCause{f.Reading, severity})
			} else if severity == SeverityUnsafe {
				failed[i].Severity = severity
			}
			bad[f.Reading] = true
		case Pass, Watch, ConditionalPass:
			good[f.Reading] = true
		default:
			bad[f.Reading] = true
		}
	}
	whole := v.Result == Pass || v.Result == ConditionalPass
	given := func(code string, r Reading) {
		if whole && r.Given() {
			good[code] = true
		}
	}
	for code, r := range e.Readings {
		given(code, r)
	}
	for _, s := range e.Series {
		for code, r := range s.Readings {
			given(code, r)
		}
	}
	for code := range good {
		if !bad[code] {
			passed = append(passed, code)
		}
	}
	if v.Result == Fail && len(failed) == 0 {
		failed = append(failed, FailedCause{causeTask + task, SeverityUnsafe})
	}
	if whole {
		passed = append(passed, causeTask+task)
	}
	slices.Sort(passed)
	return failed, passed
}

// TaskOfCause gives the task of a defect of which only the outcome is known, "" of any other.
func TaskOfCause(cause string) string {
	task, ok := strings.CutPrefix(cause, causeTask)
	if !ok {
		return ""
	}
	return task
}

// Defects gives a device's defects, oldest first, and the records of people that belong to none of them: what they were
// about was corrected away. id makes the id of a defect from its cause and its first failing entry. events may come in
// any order.
//
// One defect is open per cause at a time. It is closed by a test that passes what failed, made after the repair, after
// the device was replaced (then a test of the new one), or after the last fail where somebody closes it; or by retiring
// the device. A pass alone closes nothing: a failing value does not disappear behind a retest.
func Defects(events []DefectEvent, id func(cause, entry string) string) (all []*Defect, loose []string) {
	w := &defectWalk{id: id, named: map[string]bool{}, byID: map[string]*Defect{}}
	var tests []DefectEvent
	var end *DefectEvent
	events = slices.Clone(events)
	slices.SortFunc(events, func(a, b DefectEvent) int {
		return cmp.Or(cmp.Compare(a.Day, b.Day), cmp.Compare(a.Clock, b.Clock), cmp.Compare(a.ID, b.ID))
	})
	for i := range events {
		e := &events[i]
		switch {
		case e.Newer:
			tests = append(tests, *e)
		case e.What == "retired" || e.What == "replaced":
			if end == nil || cmp.Or(cmp.Compare(end.Clock, e.Clock), cmp.Compare(end.ID, e.ID)) < 0 {
				end = e // as in the register, whatever the day
			}
		case e.What == "opened":
			w.named[e.Defect] = true
		}
	}
	for i := range events {
		if e := &events[i]; !e.Newer && e.What != "retired" && e.What != "replaced" {
			w.take(e)
		}
	}
	for _, d := range w.all {
		if end != nil && d.Closed == nil {
			d.leaves(end, tests)
		}
		d.settle()
	}
	return w.all, w.loose
}

type defectWalk struct {
	id    func(cause, entry string) string
	all   []*Defect
	byID  map[string]*Defect
	named map[string]bool // ids of defects opened by hand
	loose []string
}

func (w *defectWalk) open(cause string) *Defect {
	for i := len(w.all) - 1; i >= 0; i-- {
		if d := w.all[i]; d.Cause == cause && d.Closed == nil {
			return d
		}
	}
	return nil
}

func (w *defectWalk) take(e *DefectEvent) {
	switch e.What {
	case "test":
		w.test(e)
	case "opened":
		w.opened(e)
	default:
		w.said(e)
	}
}

func (w *defectWalk) test(e *DefectEvent) {
	for _, c := range e.Failed {
		d := w.open(c.Cause)
		if d == nil {
			d = &Defect{ID: w.id(c.Cause, e.ID), Cause: c.Cause, Task: e.Task, Severity: c.Severity, First: e.ID, Day: e.Day, Opened: e.At, Due: NoDay}
			w.all = append(w.all, d)
			w.byID[d.ID] = d
		} else if c.Severity == SeverityUnsafe && d.Severity == Nuisance {
			d.Severity = c.Severity
		}
		// It had power, so it is no longer safe, and what was said to be repaired is not.
		d.LastFail, d.Fails, d.Safe, d.Repaired, d.Asked, d.Again = e.ID, d.Fails+1, nil, nil, nil, nil
		d.History = append(d.History, e.ID)
	}
	for _, d := range w.all {
		if d.Closed != nil || d.LastFail == e.ID || !d.freedBy(e) {
			continue
		}
		d.History = append(d.History, e.ID)
		switch {
		case d.Repaired != nil || d.Asked != nil:
			d.close(e, ClosedByTest)
		case d.Again == nil:
			d.Again = e.act(e.ID)
		}
	}
}

// freedBy reports whether a test passes what the defect is about.
func (d *Defect) freedBy(e *DefectEvent) bool {
	whole := e.Result == Pass || e.Result == ConditionalPass
	switch {
	case d.ByHand:
		return whole
	case e.Newer && whole && e.Task != "button": // the full test of a new device, of whatever kind it is
		return true
	}
	return slices.Contains(e.Passed, d.Cause)
}

func (w *defectWalk) opened(e *DefectEvent) {
	cause := cmp.Or(e.Cause, CauseByHand)
	if cause != CauseByHand {
		if d := w.open(cause); d != nil { // the same sweep a month later finds the same
			w.byID[e.Defect] = d
			d.Fails++
			d.Safe, d.Repaired, d.Asked, d.Again = nil, nil, nil, nil
			d.History = append(d.History, e.ID)
			return
		}
	}
	if w.byID[e.Defect] != nil {
		return // posted twice
	}
	severity := SeverityUnsafe
	if slices.Contains(DefectSeverities(), e.Severity) {
		severity = e.Severity
	}
	d := &Defect{ID: e.Defect, Cause: cause, Severity: severity, ByHand: true, Text: e.Text, First: e.ID, Day: e.Day, Opened: e.At,
		Due: e.Due, Parts: e.Parts, History: []string{e.ID}}
	w.all = append(w.all, d)
	w.byID[d.ID] = d
}

// said takes what a person said into the defect it is about, or into all that are open.
func (w *defectWalk) said(e *DefectEvent) {
	if d := w.byID[e.Defect]; d != nil {
		d.said(e)
		return
	}
	met := false
	if !w.named[e.Defect] && !isNamed(e.Defect) {
		for _, d := range w.all {
			if d.Closed == nil {
				d.said(e)
				met = true
			}
		}
	}
	if !met {
		w.loose = append(w.loose, e.ID)
	}
}

// isNamed reports an id made from what it names (version 8), as those of defects that follow from a test are.
func isNamed(id string) bool { return len(id) == 36 && id[14] == '8' }

func (d *Defect) said(e *DefectEvent) {
	d.History = append(d.History, e.ID)
	if len(e.Parts) > 0 {
		d.Parts = e.Parts
	}
	if e.Due != NoDay {
		d.Due = e.Due
	}
	if slices.Contains(DefectSeverities(), e.Severity) {
		d.Severity = e.Severity
	}
	if e.What == "reopened" {
		d.Closed, d.How, d.Repaired, d.Asked, d.Again, d.Safe = nil, "", nil, nil, nil, nil
		d.Reopened = e.act(e.Text)
		return
	}
	if d.Closed != nil {
		return
	}
	switch e.What {
	case "made_safe":
		d.Safe = e.act(e.Text)
	case "assigned":
		d.Assigned = e.act(e.To)
	case "repaired":
		d.Repaired, d.Again = e.act(e.Text), nil
	case "closed":
		d.Asked = e.act(e.Text)
		if d.Again != nil {
			d.Closed, d.How = &DefectAct{Record: d.Again.Record, At: e.At, Day: e.Day}, ClosedByTest
		}
	}
}

// leaves ends a defect with its device: retired it is closed; replaced it waits for the new device's passing test.
func (d *Defect) leaves(end *DefectEvent, tests []DefectEvent) {
	d.History = append(d.History, end.ID)
	if end.What == "retired" {
		d.close(end, ClosedByRetiring)
		return
	}
	d.Repaired, d.With = end.act(end.Text), end.With
	for i := range tests {
		if d.freedBy(&tests[i]) {
			d.History = append(d.History, tests[i].ID)
			d.close(&tests[i], ClosedByTest)
			return
		}
	}
}

func (d *Defect) close(e *DefectEvent, how string) { d.Closed, d.How = e.act(""), how }

func (d *Defect) settle() {
	switch {
	case d.Closed != nil:
		d.State = DefectClosed
	case d.Repaired != nil:
		d.State = DefectRepaired
	case d.Assigned != nil:
		d.State = DefectAssigned
	case d.Safe != nil:
		d.State = DefectMadeSafe
	default:
		d.State = DefectOpen
	}
}

func (e *DefectEvent) act(text string) *DefectAct {
	return &DefectAct{Record: e.ID, At: e.At, Day: e.Day, Text: text}
}
