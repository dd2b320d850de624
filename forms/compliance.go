package forms

import "slices"

// Kept is an obligation as tallies count it: the month it counts in and what became of it.
type Kept struct {
	Month   int32 // year * 12 + month, January = 0
	Outcome uint8 // place in Outcomes
}

// MonthOf counts the month of a day from year 0.
func MonthOf(d Day) int32 {
	y, m, _ := d.Civil()
	return int32(y*12 + int(m) - 1)
}

// MonthStart gives the first day of such a month.
func MonthStart(month int32) Day { return firstOf(int(month)) }

// Kept gives what is done with as tallies count it.
func (t *Trace) Kept() []Kept {
	out := make([]Kept, 0, len(t.Done))
	for _, o := range t.Done {
		on := o.Until + 1
		if o.Met != NoDay {
			on = max(on, o.Met)
		}
		out = append(out, Kept{MonthOf(o.Counts()), uint8(slices.Index(Outcomes(), o.Outcome(on)))})
	}
	return out
}

// Count says what became of a number of dates.
type Count struct{ InTime, Graced, Late, Missed, NoAccess, Open int }

// Add counts n dates with an outcome.
func (c *Count) Add(outcome string, n int) {
	switch outcome {
	case InTime:
		c.InTime += n
	case Graced:
		c.Graced += n
	case Late:
		c.Late += n
	case Missed:
		c.Missed += n
	case NoAccess:
		c.NoAccess += n
	case Open:
		c.Open += n
	}
}

// Join adds another count.
func (c *Count) Join(o Count) {
	c.InTime += o.InTime
	c.Graced += o.Graced
	c.Late += o.Late
	c.Missed += o.Missed
	c.NoAccess += o.NoAccess
	c.Open += o.Open
}

// Due is how many dates were asked for.
func (c Count) Due() int { return c.Past() + c.Open }

// Past is how many of them are done with: met, or their day has passed.
func (c Count) Past() int { return c.InTime + c.Graced + c.Late + c.Missed + c.NoAccess }

// Percent is the share of those done with that were met in time or within the grace, rounded down, so that 100 means all;
// ok is false where there are none.
func (c Count) Percent() (percent int, ok bool) {
	past := c.Past()
	if past == 0 {
		return 0, false
	}
	return 100 * (c.InTime + c.Graced) / past, true
}
