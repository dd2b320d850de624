package forms

import (
	"cmp"
	"slices"
)

// States of a date on the day asked.
const (
	Upcoming    = "upcoming"
	DueNow      = "due"
	InGrace     = "in-grace"
	Overdue     = "overdue"
	NeverTested = "never-tested"
)

// leadDays is how long before a not-to-exceed date its test counts as due. Common practice, no source.
const leadDays = 31

// DueDate is the next date of one task of one device. It holds days only: whether it is due or overdue is decided by State
// for the day asked, never stored.
type DueDate struct {
	Task  string
	Plan  string
	Last  Day // the day that moved it last; NoDay: never tested
	Opens Day // first day it is due
	Due   Day // last day in time
	Until Day // last day of the grace; equal to Due without one
}

// State decides the date for a day. A date of a task that was never done is never-tested until its day has passed.
func (d DueDate) State(on Day) string {
	switch {
	case on > d.Until:
		return Overdue
	case on > d.Due:
		return InGrace
	case d.Last == NoDay:
		return NeverTested
	case on >= d.Opens:
		return DueNow
	}
	return Upcoming
}

// Schedule is what is asked of one device kind at one site: for each task the plans that rule it.
type Schedule []scheduled

type scheduled struct {
	task   string
	chains [][]rule // one per plan id; its revisions by day in force
}

// rule is a plan with its durations read once.
type rule struct {
	*Plan
	every, grace Interval
}

// ScheduleOf picks the plans of a kind. A task for which the site has a plan of its own follows the site's plans alone;
// every other task follows the organisation's. The newest revision of a plan says whether the kind is covered at all.
// Order of the arguments' elements does not matter.
func ScheduleOf(kind string, org, site []*Plan) Schedule {
	own, shared := chains(kind, site), chains(kind, org)
	for task, c := range own {
		shared[task] = c
	}
	var s Schedule
	for task, c := range shared {
		s = append(s, scheduled{task, c})
	}
	slices.SortFunc(s, func(a, b scheduled) int { return cmp.Compare(a.task, b.task) })
	return s
}

func chains(kind string, plans []*Plan) map[string][][]rule {
	byID := map[string][]rule{}
	for _, p := range plans {
		every, err := ParseInterval(p.Every)
		grace, err2 := p.grace()
		if err != nil || err2 != nil {
			continue // Check refuses such a plan; one that came in all the same asks nothing
		}
		byID[p.ID] = append(byID[p.ID], rule{p, every, grace})
	}
	out := map[string][][]rule{}
	for _, revs := range byID {
		newest := slices.MaxFunc(revs, func(a, b rule) int { return cmp.Compare(a.Revision, b.Revision) })
		if !newest.Covers(kind) {
			continue
		}
		revs = slices.DeleteFunc(revs, func(p rule) bool { return p.Task != newest.Task || !p.Covers(kind) })
		slices.SortFunc(revs, func(a, b rule) int {
			return cmp.Or(cmp.Compare(a.InForce, b.InForce), cmp.Compare(a.Revision, b.Revision))
		})
		out[newest.Task] = append(out[newest.Task], revs)
	}
	for _, c := range out {
		slices.SortFunc(c, func(a, b []rule) int { return cmp.Compare(a[0].ID, b[0].ID) })
	}
	return out
}

// Dates gives the next date of each task, by task. start is the day the device came under test (the later of installed
// and registered); last gives the newest day that met a task, NoDay for never. Where several plans ask for the same task
// the earliest date stands.
func (s Schedule) Dates(start Day, last func(task string) Day) []DueDate {
	out := make([]DueDate, 0, len(s))
	for _, sc := range s {
		done := last(sc.task)
		best := DueDate{Due: NoDay}
		for _, chain := range sc.chains {
			if d := nextDate(chain, start, done); best.Due == NoDay || d.Due < best.Due {
				best = d
			}
		}
		out = append(out, best)
	}
	return out
}

// nextDate walks the revisions of one plan: the revision in force when the count began sets the date, unless a newer one
// comes into force before that date; then the newer one decides. A revision never asks for a day before it was in force.
func nextDate(chain []rule, start, last Day) DueDate {
	base := start
	if last != NoDay {
		base = last
	}
	at := 0
	for at+1 < len(chain) && chain[at+1].InForce <= base {
		at++
	}
	d := chain[at].next(start, last)
	for at+1 < len(chain) && d.Due >= chain[at+1].InForce {
		at++
		d = chain[at].next(start, last)
	}
	return d
}

// next counts one plan from a last test or from the start.
func (p rule) next(start, last Day) DueDate {
	d := DueDate{Task: p.Task, Plan: p.ID, Last: last}
	if p.Duty == OnceEachPeriod {
		if last == NoDay {
			d.Opens, d.Due = p.every.period(start)
		} else {
			_, end := p.every.period(last)
			d.Opens, d.Due = p.every.period(end + 1)
		}
	} else {
		from := start
		if last != NoDay {
			from = last
		}
		d.Due = from.Add(p.every)
		d.Opens = d.Due - leadDays
	}
	if d.Due < p.InForce {
		d.Due = p.InForce
	}
	d.Until = d.Due.Add(p.grace)
	return d
}

// Meets gives the tasks whose dates an entry of a task with this result moves. A test that was done moves its date
// whatever came out, a fail included; what could not be tested, or was left incomplete, moves none. An instrument test
// in which the TEST button was pressed and RESET also meets the button plan; an injected trip alone does not, because it
// does not exercise the TEST circuit. A button that did not trip leaves nothing to reset: that is a button test too.
func Meets(task, result string, readings map[string]Reading) []string {
	switch result {
	case Pass, ConditionalPass, ConditionalFail, Fail:
	default:
		return nil
	}
	met := []string{task}
	if task == "instrument" {
		trips, resets := answer(readings["button_trips"]), answer(readings["button_resets"])
		if trips == "no" || trips == "yes" && (resets == "yes" || resets == "no") {
			met = append(met, "button")
		}
	}
	return met
}

// answer gives a yes/no answer, "" when none was given.
func answer(r Reading) string {
	switch v := r.Value.(type) {
	case string:
		return v
	case bool:
		if v {
			return "yes"
		}
		return "no"
	}
	return ""
}
