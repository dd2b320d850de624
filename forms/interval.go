package forms

import (
	"fmt"
	"regexp"
	"strconv"
	"time"
)

// Interval is a calendar distance: whole months and whole days. Hours and smaller parts have no place in a plan.
type Interval struct{ Months, Days int }

var intervalShape = regexp.MustCompile(`^P(?:(\d{1,4})Y)?(?:(\d{1,4})M)?(?:(\d{1,4})W)?(?:(\d{1,5})D)?$`)

// ParseInterval reads an ISO 8601 duration of years, months, weeks and days (P1Y, P12M, P2W, P90D; also P0D). Parts of a
// day, fractions and signs are refused: a test interval is counted in calendar days.
func ParseInterval(s string) (Interval, error) {
	m := intervalShape.FindStringSubmatch(s)
	if m == nil || s == "P" {
		return Interval{}, fmt.Errorf("%q is not an interval: write it as P1M, P12M, P1Y, P2W or P90D (ISO 8601)", s)
	}
	n := func(i int) int { v, _ := strconv.Atoi(m[i]); return v }
	return Interval{Months: 12*n(1) + n(2), Days: 7*n(3) + n(4)}, nil
}

// String gives the ISO 8601 form in months and days.
func (i Interval) String() string {
	switch {
	case i.Months == 0:
		return fmt.Sprintf("P%dD", i.Days)
	case i.Days == 0:
		return fmt.Sprintf("P%dM", i.Months)
	}
	return fmt.Sprintf("P%dM%dD", i.Months, i.Days)
}

// Zero reports whether the interval has no length.
func (i Interval) Zero() bool { return i == Interval{} }

// AddMonths moves by whole months and clamps to the last day of the month reached: 31 January + 1 month is 28 or 29
// February. The stdlib's AddDate would run over into March, past the limit of a not-to-exceed plan.
func (d Day) AddMonths(n int) Day {
	y, m, day := d.Civil()
	month := y*12 + int(m) - 1 + n
	first := firstOf(month)
	return first + Day(min(day, int(firstOf(month+1)-first))-1)
}

// firstOf gives the first day of a month counted from January of year 0.
func firstOf(month int) Day {
	of := floorMod(month, 12)
	return Date((month-of)/12, time.Month(of+1), 1)
}

// Add moves by an interval, months first.
func (d Day) Add(i Interval) Day { return d.AddMonths(i.Months) + Day(i.Days) }

// AddTimes moves k intervals from an anchor day. Each step is counted from the anchor itself, so 31 January goes to
// 28 February and then to 31 March, never to 28 March.
func (d Day) AddTimes(i Interval, k int) Day {
	return d.AddMonths(k*i.Months) + Day(k*i.Days)
}
