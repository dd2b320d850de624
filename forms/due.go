package forms

import (
	"cmp"
	"fmt"
	"iter"
	"slices"
)

// States of a date on the day asked.
const (
	Upcoming    = "upcoming"
	DueNow      = "due"
	InGrace     = "in-grace"
	Overdue     = "overdue"
	NeverTested = "never-tested"
	Paused      = "paused"
)

// leadDays is how long before a not-to-exceed date its test counts as due, where its plan does not say. Common practice,
// no source.
const leadDays = 31

// DueDate is the next date of one task of one device. It holds days only: whether it is due or overdue is decided by State
// for the day asked, never stored.
type DueDate struct {
	Task   string
	Plan   string
	Cause  string   // the occasion that asks for it; "" = its plan's interval
	Last   Day      // the day that moved it last; NoDay: never tested
	Opens  Day      // first day it is due
	Due    Day      // last day in time
	Until  Day      // last day of the grace; equal to Due without one
	Every  Interval // of calendar periods; zero where the date is counted otherwise
	Tried  bool     // since it opened somebody stood before a closed door
	Shut   []Day    // last days of the periods after it in which somebody did
	Pauses []Pause  // of its device
}

// State decides the date for a day. A date of a task that was never done is never-tested until its day has passed.
func (d DueDate) State(on Day) string {
	if _, paused := pausedOn(d.Pauses, on); paused {
		return Paused
	}
	switch {
	case on > d.Until:
		return Overdue
	case on > d.Due:
		return InGrace
	case d.Last == NoDay && d.Cause == "":
		return NeverTested
	case on >= d.Opens:
		return DueNow
	}
	return Upcoming
}

// Pause gives the pause a day lies in; ok is false where it lies in none.
func (d DueDate) Pause(on Day) (p Pause, ok bool) { return pausedOn(d.Pauses, on) }

// following is the next period of a date that was not met in its own; ok is false for a date that is asked once. A period
// that ends within a pause is not asked for.
func (d DueDate) following() (next DueDate, ok bool) {
	if d.Every.Zero() {
		return d, false
	}
	grace := d.Until - d.Due
	_, end := d.Every.period(d.Due)
	d.Opens, d.Due = d.Every.afterPauses(end, d.Pauses)
	d.Until, d.Tried = d.Due+grace, slices.Contains(d.Shut, d.Due)
	return d, true
}

// Unmet gives a date that is still open at the end of a day with those that followed it unmet, oldest first: one for each
// period that went by, and the one that is asked for next.
func (d DueDate) Unmet(on Day) iter.Seq[DueDate] {
	return func(yield func(DueDate) bool) {
		for more := true; more && yield(d) && on > d.Due; {
			if d, more = d.following(); d.Opens > on {
				return
			}
		}
	}
}

// afterPauses gives the first period after a day that does not end within a pause.
func (i Interval) afterPauses(end Day, pauses []Pause) (first, last Day) {
	for {
		first, last = i.period(end + 1)
		p, paused := pausedOn(pauses, last)
		if !paused {
			return first, last
		}
		resumes, _ := i.period(p.Until + 1)
		end = max(last, resumes-1)
	}
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
	every, grace, lead Interval
	within             map[string]Interval // by cause
	first              map[string]Interval // by the way a device came under test
	firstRound         Day                 // its last day
}

func ruleOf(p *Plan) (r rule, err error) {
	r = rule{Plan: p, within: map[string]Interval{}, first: map[string]Interval{}, firstRound: NoDay}
	read := func(text string) (i Interval) {
		if err == nil {
			i, err = optional(text)
		}
		return i
	}
	r.every, r.grace, r.lead = read(p.Every), read(p.Grace), read(p.Lead)
	for cause, text := range p.Occasions {
		r.within[cause] = read(text)
	}
	for way, text := range map[string]string{New: p.start().New, Replaced: p.start().Replaced, Imported: p.start().Imported} {
		if text != "" {
			r.first[way] = read(text)
		}
	}
	if p.FirstRound != nil {
		r.firstRound = p.FirstRound.From.Add(read(p.FirstRound.Within))
	}
	if err == nil && r.every.Zero() {
		err = fmt.Errorf("every is no time at all")
	}
	return r, err
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
		r, err := ruleOf(p)
		if err != nil {
			continue // Check refuses such a plan; one that came in all the same asks nothing
		}
		byID[p.ID] = append(byID[p.ID], r)
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

// Case is what the dates of one device are counted from.
type Case struct {
	Start     Day        // the day it came under test: the later of installed and registered
	Way       string     // New | Replaced | Imported; "" = New
	Occasions []Occasion // by day
	Pauses    []Pause    // by first day
	Ended     Day        // the day it was taken out of use; NoDay: it is in use
}

// Dates gives the next date of each task, by task. last gives the newest day that met a task, NoDay for never. Where
// several plans ask for the same task, or an occasion does, the earliest date stands.
func (s Schedule) Dates(c Case, last func(task string) Day) []DueDate {
	out := make([]DueDate, 0, len(s))
	for i := range s {
		out = append(out, s[i].next(&c, last(s[i].task)))
	}
	return out
}

// next gives the date that follows a last test: of the plans and of the occasions since.
func (sc *scheduled) next(c *Case, last Day) DueDate {
	best := sc.planned(c, last)
	for _, o := range c.Occasions {
		if d, ok := sc.occasion(c, o); ok && (last == NoDay || d.Opens > last) && d.Due < best.Due {
			d.Last, d.Every, best = last, best.Every, d
		}
	}
	return best
}

// planned gives the date the plans alone set.
func (sc *scheduled) planned(c *Case, last Day) DueDate {
	best := DueDate{Due: NoDay}
	for _, chain := range sc.chains {
		if d := nextDate(chain, c, last); best.Due == NoDay || d.Due < best.Due {
			best = d
		}
	}
	best.Pauses = c.Pauses
	return best
}

// occasion gives the date an occasion sets, by the plan revision in force that day; of several plans the earliest. A test of the
// day it opens, or of a later one, meets it.
func (sc *scheduled) occasion(c *Case, o Occasion) (best DueDate, ok bool) {
	if o.On < c.Start {
		return best, false
	}
	for _, chain := range sc.chains {
		r := &chain[0]
		for i := range chain {
			if chain[i].InForce <= o.On {
				r = &chain[i]
			}
		}
		within, asked := r.answers(o)
		opens := o.On
		if slices.Contains(o.Before, r.Task) {
			opens++
		}
		if due := opens.Add(within); asked && (!ok || due < best.Due) {
			best, ok = DueDate{Task: r.Task, Plan: r.ID, Cause: o.Cause, Last: NoDay, Opens: opens, Due: due, Pauses: c.Pauses}, true
		}
	}
	best.Due = resumed(best.Due, c.Pauses)
	best.Until = best.Due
	return best, ok
}

// resumed moves a day that lies in a pause to the first day after it.
func resumed(d Day, pauses []Pause) Day {
	for p, paused := pausedOn(pauses, d); paused; p, paused = pausedOn(pauses, d) {
		d = p.Until + 1
	}
	return d
}

// nextDate walks the revisions of one plan: the revision in force when the count began sets the date, unless a newer one
// comes into force before that date; then the newer one decides. A revision never asks for a day before it was in force.
func nextDate(chain []rule, c *Case, last Day) DueDate {
	base := c.Start
	if last != NoDay {
		base = last
	}
	at := 0
	for at+1 < len(chain) && chain[at+1].InForce <= base {
		at++
	}
	d := chain[at].next(c, last)
	for at+1 < len(chain) && d.Due >= chain[at+1].InForce {
		at++
		d = chain[at].next(c, last)
	}
	return d
}

// next counts one plan from a last test or from the start.
func (r *rule) next(c *Case, last Day) DueDate {
	d := DueDate{Task: r.Task, Plan: r.ID, Last: last}
	way := c.Way
	if way == "" {
		way = New
	}
	first, own := r.first[way]
	switch {
	case last == NoDay && own:
		d.Opens, d.Due = c.Start, c.Start.Add(first)
	case r.Duty == OnceEachPeriod && last == NoDay:
		d.Opens, d.Due = r.every.period(c.Start)
	case r.Duty == OnceEachPeriod:
		_, end := r.every.period(last)
		d.Opens, d.Due = r.every.period(end + 1)
	case last == NoDay:
		d.Opens, d.Due = c.Start, c.Start.Add(r.every)
	default:
		d.Opens, d.Due = last, last.Add(r.every)
	}
	if d.Due < r.InForce {
		if d.Due = r.InForce; r.Duty == OnceEachPeriod {
			d.Opens, d.Due = r.every.period(r.InForce)
		}
	}
	own = own && last == NoDay
	if r.firstRound != NoDay && d.Due < r.firstRound && r.takesFirstRound(c, d, own) {
		d.Due = r.firstRound
	}
	if r.Duty == OnceEachPeriod {
		d.Every = r.every
		if _, paused := pausedOn(c.Pauses, d.Due); paused && !own {
			_, before := r.every.period(d.Due)
			d.Opens, d.Due = r.every.afterPauses(before-1, c.Pauses)
		}
	}
	d.Due = resumed(d.Due, c.Pauses)
	switch {
	case r.Lead != "":
		d.Opens = max(d.Opens, d.Due.AddMonths(-r.lead.Months)-Day(r.lead.Days))
	case r.Duty == NotToExceed:
		d.Opens = d.Due - leadDays
	}
	d.Until = d.Due.Add(r.grace)
	return d
}

// takesFirstRound says whether a date that lies before the end of the first round may wait for it. A not-to-exceed date
// that had not passed when the round began may not, once the device was tested.
func (r *rule) takesFirstRound(c *Case, d DueDate, own bool) bool {
	if d.Last == NoDay {
		return !own && c.Start <= r.firstRound
	}
	return d.Last < r.FirstRound.From && (r.Duty == OnceEachPeriod || d.Due < r.FirstRound.From)
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

// Locked says whether a test was not made because nobody came near enough: a reading is missing for want of access.
func Locked(readings map[string]Reading) bool {
	for _, r := range readings {
		if r.Missing == "no-access" {
			return true
		}
	}
	return false
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
