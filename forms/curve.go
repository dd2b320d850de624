package forms

import "math"

// Ends of the published trip-time curve, mA (UL 943 Class A: must trip from 6 mA; 264 mA is 110 % of 120 V into 500 ohm),
// and the current below which a Class A device must not trip.
const (
	classANoTripMA = 4.0
	classATripMA   = 6.0
	classALastMA   = 264.0
)

// ClassATripMS gives the longest trip time in ms at a test current in mA: T = (20/I)^1.43 s, UL 943 Class A, rounded to
// 9 significant digits. ok is false outside 6 to 264 mA, where no limit is published.
func ClassATripMS(currentMA float64) (ms float64, ok bool) {
	if !(currentMA >= classATripMA && currentMA <= classALastMA) {
		return 0, false
	}
	return round9(1000 * math.Pow(20/currentMA, 1.43)), true
}

// ClassARampMA gives the current in mA that the slowest compliant Class A device shows on a ramp of r mA/s from below
// 6 mA: I^2.43 = 6^2.43 + 2.43 * 20^1.43 * r, the integral of the trip-time curve; rounded to 9 significant digits.
func ClassARampMA(r float64) float64 { return RampMA(classATripMA, r) }

// RampMA gives the current in mA that the slowest device still inside a most of the set shows on a ramp of r mA/s. A set
// may hold devices to less than 6 mA; such a device must trip as soon after its own most as a Class A device after 6 mA,
// so the time it may take runs from there: I^2.43 = most^2.43 + 2.43 * 20^1.43 * r. Were it counted from 6 mA, a ramp would
// explain figures that are outside the set's own most by any current. A most above 6 mA is what devices are held to by their
// owner; the curve itself begins at 6 mA, and beyond it the same integral runs on.
func RampMA(most, r float64) float64 {
	return round9(math.Pow(math.Pow(most, 2.43)+2.43*math.Pow(20, 1.43)*r, 1/2.43))
}

// round9 rounds to 9 significant digits, halves up, by the same few exact operations as static/limit.mjs, so that both
// judges hold a value against the very same figure. Figures below 1e-13 are left as they are.
func round9(x float64) float64 {
	if !(x >= 1e-13 && x < 1e22) {
		return x
	}
	k := 8
	for p := 1.0; x >= p*10; p *= 10 {
		k--
	}
	for y := x; y < 1; y *= 10 {
		k++
	}
	// The conversions keep a compiler from fusing the multiplication with the addition.
	if k >= 0 {
		p := pow10(k)
		return math.Floor(float64(x*p)+0.5) / p
	}
	p := pow10(-k)
	return float64(math.Floor(float64(x/p)+0.5) * p)
}

func pow10(k int) float64 {
	p := 1.0
	for ; k > 0; k-- {
		p *= 10
	}
	return p
}
