package forms

import "math"

// Decision rules of a limit set.
const (
	SimpleRule    = "simple"     // a value on the limit passes; the instrument's doubt is not looked at (ILAC-G8:09/2019, 4.2.1)
	GuardBandRule = "guard-band" // pass and fail only beyond the instrument's doubt U (ILAC-G8:09/2019, 4.2.2 and 4.2.3, w = U)
)

// Rules lists the decision rules.
func Rules() []string { return []string{SimpleRule, GuardBandRule} }

// Expanded gives U, the expanded uncertainty (k = 2), of a value in the reading's own unit.
func (a Accuracy) Expanded(value float64) float64 { return float64(a.Percent*value)/100 + a.Plus }

// curveSlope is the exponent of the trip-time curve: 1 % of doubt about the current is 1.43 % of the limit.
const curveSlope = 1.43

// figureOf gives the figure a reading states, as value or as bound, in the unit its limit is in.
func figureOf(r *Reading, own, unit string) (float64, bool) {
	switch {
	case r.Above != nil:
		return *r.Above, true
	case r.Below != nil:
		return *r.Below, true
	}
	return r.figure(own, unit)
}

// doubt gives the expanded uncertainty (k = 2) of a figure against its limit, in the limit's unit. On the trip-time curve
// the doubt about the test current moves the limit: U^2 = U_time^2 + (1.43 limit U_I / I)^2. ok is false where the entry
// does not say how accurate the instrument is.
func (j *judging) doubt(c *Code, a *Applied, figure float64, unit string) (expanded float64, ok bool) {
	accuracy, ok := j.e.Given.Accuracy[c.Code]
	if !ok {
		return 0, false
	}
	if per, convertible := perUnit(c.Unit, unit); convertible {
		accuracy.Plus /= per
	}
	expanded = accuracy.Expanded(figure)
	if a.current == 0 {
		return expanded, true
	}
	ofCurrent, ok := j.e.Given.Accuracy["test_current_ma"]
	if !ok {
		return 0, false
	}
	moved := curveSlope * *a.Limit.Max * ofCurrent.Expanded(a.current) / a.current
	return math.Sqrt(float64(expanded*expanded) + float64(moved*moved)), true
}

// sure reports whether an outcome of prove holds for every true value within the doubt. A value of exactly limit - U is
// sure to be inside at most the limit; one of exactly limit + U is not yet sure to be outside.
func sure(b *Bounds, r *Reading, figure, expanded float64, outcome int) bool {
	least, most := round9(figure-expanded), round9(figure+expanded)
	switch {
	case r.Above != nil && outcome == high:
		return least >= *b.Max
	case r.Below != nil && outcome == low:
		return most <= *b.Min
	case outcome == high:
		return least > *b.Max
	case outcome == low:
		return most < *b.Min
	case r.Above != nil:
		return b.Min == nil || least >= *b.Min
	case r.Below != nil:
		return b.Max == nil || most <= *b.Max
	}
	return (b.Min == nil || least >= *b.Min) && (b.Max == nil || most <= *b.Max)
}

// guard makes conditional what the instrument's doubt leaves open under a guard band: "" where the outcome stands as it is.
func (j *judging) guard(l *Limit, r *Reading, a *Applied, f *Finding, figure float64, outcome int) (verdict, text string) {
	if j.set.Rule != GuardBandRule || l.Level != Must || outcome != inside && outcome != low && outcome != high {
		return "", ""
	}
	switch {
	case f.Uncertainty == nil && outcome == inside:
		return ConditionalPass, "limit.accuracy_unknown"
	case f.Uncertainty == nil || sure(a.Limit, r, figure, *f.Uncertainty, outcome):
		return "", ""
	case outcome == inside:
		return ConditionalPass, "limit.guard_inside"
	}
	return ConditionalFail, "limit.guard_outside"
}

// weigh states the doubt of a figure against numeric bounds, and of a measured value how probable it is that the true one
// lies inside them.
func (j *judging) weigh(c *Code, r *Reading, a *Applied, figure float64, unit string, f *Finding) {
	expanded, ok := j.doubt(c, a, figure, unit)
	if !ok {
		return
	}
	expanded = round9(expanded)
	f.Uncertainty = &expanded
	if r.Value == nil || expanded == 0 {
		return
	}
	p := Conformity(figure, a.Limit.Min, a.Limit.Max, expanded/2)
	f.Probability = &p
}

// currentInDoubt reports whether the test current may have been below what a Class A device must trip at, so that no trip,
// or a late one, is not conclusive.
func (j *judging) currentInDoubt(a *Applied) bool {
	accuracy, ok := j.e.Given.Accuracy["test_current_ma"]
	return a.current != 0 && ok && round9(a.current-accuracy.Expanded(a.current)) < classATripMA
}
