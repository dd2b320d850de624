package paper

import (
	"cmp"
	"slices"
	"time"

	"tripwell/forms"
	"tripwell/store"
)

// Statement is what two pages say of one site over a period: what was due and what became of it, what is open, what it was measured
// with, and what all that proves.
type Statement struct {
	Ask      StatementAsk
	Site     store.Site
	From, To forms.Day // the period, both included
	Log      store.LogHead

	Devices, Retired int
	Kinds            []KindCount // of those in service, most first
	Tasks            []TaskCount // in the order of forms.Tasks; those that had dates
	Months           []MonthCount

	Tests                                int            // made in the period and not withdrawn
	Results                              map[string]int // by verdict
	Came, Corrected, Withdrawn, Imported int            // later than seven days; corrected; withdrawn; brought in from older lists
	People                               int            // who made them

	Sums        store.DefectSums
	Defects     []store.Defect // open, those still in use first, then by day
	Gaps        []GapCount
	Instruments []UsedInstrument // that measured here in the period, most tests first
}

// StatementAsk says what a statement is of.
type StatementAsk struct {
	Site         string    // id or code
	From, To     forms.Day // NoDay: a year up to the last day; today
	Now          time.Time
	Organisation string
	Store        string
	Epoch        int
	Demo         bool
	Head, NoHead string // the signed head, or why there is none
	Print        string // fingerprint of the key
}

// KindCount counts devices of a kind.
type KindCount struct {
	Kind string
	N    int
}

// TaskCount counts what became of the dates of a task.
type TaskCount struct {
	Task string
	forms.Count
}

// MonthCount counts what became of the dates of a month.
type MonthCount struct {
	Month forms.Day // its first day
	forms.Count
}

// GapCount counts outlets whose protection somebody should look at, for one reason.
type GapCount struct {
	Why string
	N   int
}

// UsedInstrument is an instrument with the tests it was used for.
type UsedInstrument struct {
	store.Instrument
	Tests int
	Past  int // of those, made after its certificate had ended
}

// lateAfter is from when on a test is said to have arrived late.
const lateAfter = 7 * 24 * time.Hour

// StatementOf reads a statement from a view.
func StatementOf(v *store.View, ask StatementAsk) (Statement, error) {
	s := Statement{Ask: ask, Results: map[string]int{}}
	var err error
	if s.Site, err = v.Site(ask.Site); err != nil {
		return s, err
	}
	today := forms.DayOf(ask.Now.In(s.Site.Location()))
	s.From, s.To = ask.From, ask.To
	if s.To == forms.NoDay || s.To > today {
		s.To = today
	}
	if s.From == forms.NoDay {
		s.From = forms.MonthStart(forms.MonthOf(s.To) - 11)
	}
	if s.From > s.To {
		return s, &store.Error{Code: "invalid", Field: "from", Text: "The period begins after today, so nothing can be said of it yet. Choose an earlier first day."}
	}
	logs, err := v.Logs()
	if err != nil {
		return s, err
	}
	for _, l := range logs {
		if l.Log == s.Site.ID {
			s.Log = l
		}
	}
	for _, part := range []func(*store.View, forms.Day) error{s.devices, s.dates, s.tests, s.open} {
		if err := part(v, today); err != nil {
			return s, err
		}
	}
	return s, nil
}

func (s *Statement) devices(v *store.View, _ forms.Day) error {
	kinds := map[string]int{}
	for d, err := range v.Devices(s.Site.ID) {
		if err != nil {
			return err
		}
		if d.Retired {
			s.Retired++
			continue
		}
		s.Devices++
		kinds[d.Kind]++
	}
	for kind, n := range kinds {
		s.Kinds = append(s.Kinds, KindCount{kind, n})
	}
	slices.SortFunc(s.Kinds, func(a, b KindCount) int { return cmp.Or(cmp.Compare(b.N, a.N), cmp.Compare(a.Kind, b.Kind)) })
	return nil
}

func (s *Statement) dates(v *store.View, _ forms.Day) error {
	c, err := v.Compliance(store.ComplianceAsk{Site: s.Site.ID, From: s.From, To: s.To, Known: forms.NoDay})
	if err != nil {
		return err
	}
	tasks, months := map[string]*forms.Count{}, map[int32]*forms.Count{}
	for _, r := range c.Rows {
		if tasks[r.Task] == nil {
			tasks[r.Task] = &forms.Count{}
		}
		if months[r.Month] == nil {
			months[r.Month] = &forms.Count{}
		}
		for _, sum := range []*forms.Count{tasks[r.Task], months[r.Month]} {
			sum.InTime += r.InTime
			sum.Graced += r.Graced
			sum.Late += r.Late
			sum.Missed += r.Missed
			sum.NoAccess += r.NoAccess
			sum.Open += r.Open
		}
	}
	for _, task := range forms.Tasks() {
		if sum := tasks[task]; sum != nil {
			s.Tasks = append(s.Tasks, TaskCount{task, *sum})
		}
	}
	for m := forms.MonthOf(s.From); m <= forms.MonthOf(s.To); m++ {
		sum := months[m]
		if sum == nil {
			sum = &forms.Count{}
		}
		s.Months = append(s.Months, MonthCount{forms.MonthStart(m), *sum})
	}
	return nil
}

func (s *Statement) tests(v *store.View, _ forms.Day) error {
	instruments, err := v.Instruments()
	if err != nil {
		return err
	}
	known := map[string]store.Instrument{}
	for _, i := range instruments {
		known[i.ID] = i
	}
	used, people := map[string]*UsedInstrument{}, map[string]bool{}
	for e, err := range v.SiteEntries(s.Site.ID, s.From, s.To) {
		if err != nil {
			return err
		}
		if e.Withdrawn != nil {
			s.Withdrawn++
			continue
		}
		s.Tests++
		s.Results[e.Verdict.Result]++
		people[cmp.Or(e.ReadBy, e.By)] = true
		if e.Imported {
			s.Imported++
		} else if e.Received.Sub(e.At) > lateAfter {
			s.Came++
		}
		if len(e.Corrections) > 0 {
			s.Corrected++
		}
		if id := e.Body.Given.Instrument; id != "" {
			if used[id] == nil {
				i, ok := known[id]
				if !ok {
					i = store.Instrument{ID: id, Name: id, CalibrationDue: forms.NoDay}
				}
				used[id] = &UsedInstrument{Instrument: i}
			}
			used[id].Tests++
			if due := e.Body.Given.CalibrationDue; due != nil && e.Day > *due {
				used[id].Past++
			}
		}
	}
	s.People = len(people)
	for _, i := range used {
		s.Instruments = append(s.Instruments, *i)
	}
	slices.SortFunc(s.Instruments, func(a, b UsedInstrument) int {
		return cmp.Or(cmp.Compare(b.Tests, a.Tests), cmp.Compare(a.Name, b.Name), cmp.Compare(a.ID, b.ID))
	})
	return nil
}

func (s *Statement) open(v *store.View, today forms.Day) (err error) {
	if s.Sums, err = v.DefectSums(s.Site.ID); err != nil {
		return err
	}
	if s.Defects, err = v.Defects(store.DefectAsk{Site: s.Site.ID, On: today}); err != nil {
		return err
	}
	worst := func(d store.Defect) int { return slices.Index([]string{"unsafe", "repair", "nuisance"}, d.Severity) }
	slices.SortStableFunc(s.Defects, func(a, b store.Defect) int {
		return cmp.Or(cmp.Compare(worst(a), worst(b)), cmp.Compare(a.Opened, b.Opened), cmp.Compare(a.ID, b.ID))
	})
	gaps, _, err := v.ProtectionGaps(s.Site.ID, today)
	if err != nil {
		return err
	}
	for _, g := range gaps { // worst first
		at := slices.IndexFunc(s.Gaps, func(c GapCount) bool { return c.Why == g.Why })
		if at < 0 {
			at = len(s.Gaps)
			s.Gaps = append(s.Gaps, GapCount{g.Why, 0})
		}
		s.Gaps[at].N++
	}
	return nil
}
