package forms

import (
	"encoding/json"
	"fmt"
	"maps"
	"slices"
)

// Duties of a plan: what its interval promises.
const (
	NotToExceed    = "not-to-exceed"    // never more than the interval between two tests
	OnceEachPeriod = "once-each-period" // one test in each calendar period
)

// Ways a plan counts.
const (
	Rolling  = "rolling"  // from the day of the last test
	Calendar = "calendar" // by calendar periods
)

// Plan says what is tested how often; data, not code (forms/data/plans).
type Plan struct {
	ID       string   `json:"plan"`
	Name     string   `json:"name,omitempty"` // what its users call it
	Revision int      `json:"revision"`
	Task     string   `json:"task"`
	Kinds    []string `json:"kinds"`
	Every    string   `json:"every"`           // ISO 8601 duration
	Duty     string   `json:"duty"`            // not-to-exceed | once-each-period
	Count    string   `json:"count,omitempty"` // rolling | calendar; follows from the duty when empty
	Grace    string   `json:"grace,omitempty"` // ISO 8601 duration; once-each-period only
	Lead     string   `json:"lead,omitempty"`  // how long before its last day a test counts as due; ISO 8601 duration
	InForce  Day      `json:"in_force"`
	Source   string   `json:"source"`
	Status   string   `json:"status"`

	Start      *Start            `json:"start,omitempty"`
	FirstRound *FirstRound       `json:"first_round,omitempty"`
	Occasions  map[string]string `json:"occasions,omitzero"` // cause → ISO 8601 duration within which its test is due
	Marks      *Marks            `json:"marks,omitempty"`
}

// Start says when a device that comes under test gets its first date: durations from that day, P0D = before use; "" = the
// plan's own interval.
type Start struct {
	New      string `json:"new,omitempty"`
	Replaced string `json:"replaced,omitempty"` // it took another device's place
	Imported string `json:"imported,omitempty"` // it was taken in from a list
}

// FirstRound is the time a first round may take: day one must not show thousands overdue. A first date before From +
// Within, and a date that had passed before From, are due on that day.
type FirstRound struct {
	From   Day    `json:"from"`
	Within string `json:"within"`
}

// ParsePlan reads one plan and checks it. Unknown members are left for newer programs.
func ParsePlan(raw []byte) (*Plan, error) {
	p := &Plan{InForce: NoDay}
	if err := json.Unmarshal(raw, p); err != nil {
		return nil, fmt.Errorf("plan is not readable: %w", err)
	}
	return p, p.Check()
}

// Check says what is wrong with a plan, or nil: an *Error whose field is the member.
func (p *Plan) Check() error {
	fail := func(field, format string, a ...any) error {
		return &Error{Code: "invalid", Field: "plan." + field, Text: fmt.Sprintf(format, a...)}
	}
	switch {
	case p.ID == "" || p.Task == "":
		return fail("plan", "a plan needs an id and a task")
	case p.Revision < 1:
		return fail("revision", "revision is %d; revisions count from 1", p.Revision)
	case p.InForce == NoDay:
		return fail("in_force", "in_force is missing: give the first day it applies")
	}
	every, err := ParseInterval(p.Every)
	if err != nil {
		return fail("every", "%v", err)
	}
	if every.Zero() {
		return fail("every", "every is %s, which is no time at all", p.Every)
	}
	grace, err := p.grace()
	if err != nil {
		return fail("grace", "%v", err)
	}
	switch p.Duty {
	case NotToExceed:
		if p.Count == Calendar {
			return fail("count", "a not-to-exceed interval cannot be counted by calendar periods: a test on 2 January and one on 30 June "+
				"fit two calendar quarters and lie 179 days apart; count it rolling, or make the duty once-each-period")
		}
		if !grace.Zero() {
			return fail("grace", "a not-to-exceed interval has no grace: shorten the interval instead")
		}
	case OnceEachPeriod:
		if p.Count == Rolling {
			return fail("count", "once-each-period is counted by calendar periods; for a rolling date make the duty not-to-exceed")
		}
		if Day(0).Add(grace) >= Day(0).Add(every) && !grace.Zero() {
			return fail("grace", "the grace %s is as long as the interval %s: it would hide a period that was missed; make it shorter", p.Grace, p.Every)
		}
		if !wholePeriods(every) {
			return fail("every", "%s does not divide the calendar: use P1D, P1W, P1M, P2M, P3M, P4M, P6M or whole years", p.Every)
		}
	default:
		return fail("duty", "duty is %q; it must be %s or %s", p.Duty, NotToExceed, OnceEachPeriod)
	}
	if p.Count != "" && p.Count != Rolling && p.Count != Calendar {
		return fail("count", "count is %q; it must be %s or %s", p.Count, Rolling, Calendar)
	}
	if p.Marks != nil {
		if err := p.Marks.check(); err != nil {
			return fail("marks", "%v", err)
		}
	}
	return p.checkStart(fail)
}

// checkStart holds lead, start, first round and occasions against what an interval may be.
func (p *Plan) checkStart(fail func(string, string, ...any) error) error {
	every, _ := ParseInterval(p.Every)
	if _, err := optional(p.Lead); err != nil {
		return fail("lead", "%v", err)
	}
	for _, one := range []struct{ name, text string }{{New, p.start().New}, {Replaced, p.start().Replaced}, {Imported, p.start().Imported}} {
		i, err := optional(one.text)
		if err != nil {
			return fail("start", "%s: %v", one.name, err)
		}
		if p.Duty == NotToExceed && Day(0).Add(i) > Day(0).Add(every) {
			return fail("start", "%s: %s is longer than the interval %s, which is not to be exceeded", one.name, one.text, p.Every)
		}
	}
	for _, cause := range slices.Sorted(maps.Keys(p.Occasions)) {
		if !slices.Contains(Causes(), cause) {
			return fail("occasions", "%q is no cause; it is one of %v", cause, Causes())
		}
		if _, err := ParseInterval(p.Occasions[cause]); err != nil {
			return fail("occasions", "%s: %v", cause, err)
		}
	}
	if f := p.FirstRound; f != nil {
		if _, err := ParseInterval(f.Within); err != nil {
			return fail("first_round", "%v", err)
		}
		if f.From == NoDay || f.From == 0 {
			return fail("first_round", "from is missing: give the day the first round begins")
		}
	}
	return nil
}

// Ways a device comes under test.
const (
	New      = "new"
	Replaced = "replaced" // it took the place of another
	Imported = "imported" // it was taken in from a list
)

func (p *Plan) start() Start {
	if p.Start == nil {
		return Start{}
	}
	return *p.Start
}

// optional reads a duration that may be left out.
func optional(s string) (Interval, error) {
	if s == "" {
		return Interval{}, nil
	}
	return ParseInterval(s)
}

func (p *Plan) grace() (Interval, error) { return optional(p.Grace) }

// Covers reports whether the plan asks its task of a device kind. A kind that does not have the task is never covered,
// whatever the plan lists: a receptacle without a TEST button has no button date.
func (p *Plan) Covers(kind string) bool {
	return slices.Contains(p.Kinds, kind) && HasTask(kind, p.Task)
}

func wholePeriods(i Interval) bool {
	switch {
	case i.Months == 0:
		return i.Days == 1 || i.Days == 7
	case i.Days != 0:
		return false
	}
	return 12%i.Months == 0 || i.Months%12 == 0
}

// period gives the first and last day of the calendar period that holds d. Months are counted from January of year 0,
// so that quarters and half-years start in January and periods of n years start in years divisible by n; weeks run from
// Monday to Sunday (ISO 8601).
func (i Interval) period(d Day) (first, last Day) {
	if i.Months == 0 {
		if i.Days == 7 {
			// 1970-01-01 was a Thursday: day -3 was a Monday.
			first = d - Day(floorMod(int(d)+3, 7))
			return first, first + 6
		}
		return d, d
	}
	y, m, _ := d.Civil()
	index := y*12 + int(m) - 1
	index -= floorMod(index, i.Months)
	return firstOf(index), firstOf(index+i.Months) - 1
}

func floorMod(a, n int) int { return ((a % n) + n) % n }

// tasksOf lists the tasks each device kind has: a TEST button to press, something to measure with an instrument, contacts
// to check. Kinds not listed have none.
var tasksOf = map[string][]string{
	"gfci-receptacle":      {"button", "instrument", "receptacle"},
	"gfci-breaker":         {"button", "instrument"},
	"portable-gfci":        {"button", "instrument"},
	"protected-receptacle": {"receptacle"},
	"receptacle":           {"receptacle"},
	"hospital-receptacle":  {"receptacle"},
	"cord-set":             {"instrument", "receptacle"},
	"plug-in-equipment":    {"instrument", "receptacle"},
	"rcd":                  {"button", "instrument"},
	"rcbo":                 {"button", "instrument"},
}

// HasTask reports whether a device kind has a task at all.
func HasTask(kind, task string) bool { return slices.Contains(tasksOf[kind], task) }
