package forms

import "slices"

// Causes that make a test due at once, whatever its interval says.
const (
	Installed      = "installed"  // put in, or put back in use
	Repaired       = "repaired"   // worked on
	Damage         = "damage"     // something happened that may have damaged it
	Storm          = "storm"      // lightning near the site
	OutOfTolerance = "instrument" // what it was measured with was found out of tolerance
)

// Causes lists the causes a plan may answer to.
func Causes() []string { return []string{Installed, Repaired, Damage, Storm, OutOfTolerance} }

// Occasion is something that happened to a device on a day and asks for a test. A test of that day or later meets it.
type Occasion struct {
	Cause string
	On    Day
	Tasks []string // empty: every task whose plan answers to the cause
	// Before are the tasks that were tested on that day before it happened, and not after: a test of the next day or later
	// meets it there.
	Before []string
}

// answers says within how long a plan's task is asked for after an occasion; ok is false where it is not. A plan that says
// nothing of occasions answers to all but the first use, which its start rule covers, and asks for what an instrument
// measured only where something is measured: the TEST button needs none.
func (r *rule) answers(o Occasion) (within Interval, ok bool) {
	w, listed := r.within[o.Cause]
	if len(o.Tasks) > 0 {
		return w, slices.Contains(o.Tasks, r.Task)
	}
	if r.Occasions != nil {
		return w, listed
	}
	return Interval{}, o.Cause != Installed && (o.Cause != OutOfTolerance || r.Task != "button")
}

// Answers says within how long a plan asks for its test after a cause; ok is false where it does not.
func (p *Plan) Answers(cause string) (within Interval, ok bool) {
	r, err := ruleOf(p)
	if err != nil {
		return Interval{}, false
	}
	return r.answers(Occasion{Cause: cause})
}

// Pause is a span of days, both included, on which no test is asked of a device.
type Pause struct {
	From, Until Day
	Reason      string
}

// Holds reports whether a day lies in the pause.
func (p Pause) Holds(d Day) bool { return p.From <= d && d <= p.Until }

// pausedOn gives the pause a day lies in, the one that ends last.
func pausedOn(pauses []Pause, d Day) (p Pause, ok bool) {
	for _, one := range pauses {
		if one.Holds(d) && (!ok || one.Until > p.Until) {
			p, ok = one, true
		}
	}
	return p, ok
}
