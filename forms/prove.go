package forms

import (
	"slices"
	"strings"
)

// What a reading proves about bounds.
const (
	inside   = iota
	low      // proven below the minimum
	high     // proven above the maximum
	other    // an answer that is none of those allowed
	unproven // a bound that decides nothing
)

// prove holds a reading against bounds. A bound is judged by what it proves: above 310 is outside at most 300; above
// 2000 against at most 4677 proves nothing.
func prove(b *Bounds, r *Reading, own, unit string) int {
	if s, ok := r.Text(); ok {
		if slices.Contains(b.OneOf, s) {
			return inside
		}
		return other
	}
	switch {
	case r.NoTrip:
		return unproven
	case r.Above != nil:
		switch {
		case b.Max != nil && *r.Above >= *b.Max:
			return high
		case b.Max == nil && (b.Min == nil || *r.Above >= *b.Min):
			return inside
		}
		return unproven
	case r.Below != nil:
		switch {
		case b.Min != nil && *r.Below <= *b.Min:
			return low
		case (b.Min == nil || *b.Min <= 0) && (b.Max == nil || *r.Below <= *b.Max):
			return inside
		}
		return unproven
	}
	v, _ := r.figure(own, unit)
	switch {
	case b.Min != nil && v < *b.Min:
		return low
	case b.Max != nil && v > *b.Max:
		return high
	}
	return inside
}

// proveNoTrip holds a trip reading against "must not trip".
func proveNoTrip(r *Reading) int {
	if r.NoTrip || r.Above != nil {
		return inside
	}
	return low
}

// gauge gives the mass of the go/no-go gauge that was used, "" where nobody says. Entries of earlier versions say it where
// the register keeps a cord's conductor size.
func (j *judging) gauge() string {
	g := &j.e.Given
	if g.RetentionGauge != "" {
		return g.RetentionGauge
	}
	return g.Gauge
}

// GaugeMass writes the mass of a go/no-go gauge as entries carry it, "4 oz" or "115 g"; ok is false where it says none.
// Nothing typed is no gauge.
func GaugeMass(typed string) (mass string, ok bool) {
	typed = strings.TrimSpace(typed)
	if typed == "" {
		return "", true
	}
	for _, unit := range []string{"oz", "g"} {
		if figure, is := strings.CutSuffix(strings.ToLower(typed), unit); is {
			figure = strings.Replace(strings.TrimSpace(figure), ",", ".", 1)
			n, isNumber := typedNumber(figure)
			return figure + " " + unit, isNumber && n > 0
		}
	}
	return "", false
}

// gaugeProof weighs a go/no-go answer by the mass of the gauge: a gauge lighter than the limit cannot prove that it
// holds, a heavier one cannot prove that it does not. Where the mass is not known the answer is taken at its word.
func gaugeProof(l *Limit, gauge string, outcome int) (int, string) {
	figure, unit, ok := strings.Cut(strings.TrimSpace(gauge), " ")
	need, known := l.Gauge[strings.TrimSpace(unit)]
	mass, isNumber := typedNumber(figure)
	switch {
	case !ok || !known || !isNumber:
	case outcome == inside && mass < need:
		return unproven, "limit.gauge_too_light"
	case outcome != inside && mass > need:
		return unproven, "limit.gauge_too_heavy"
	}
	return outcome, ""
}
