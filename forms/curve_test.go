package forms

import (
	"math"
	"testing"
)

func near(got, want, relative float64) bool { return math.Abs(got-want) <= relative*math.Abs(want) }

// UL 943 Class A, T = (20/I)^1.43 s, computed independently at these currents (mA → s).
func TestClassATripMS_PublishedCurve(t *testing.T) {
	for current, seconds := range map[float64]float64{
		6: 5.593924568, 6.8: 4.677191, 7: 4.487275, 7.5: 4.065699601, 8: 3.707270, 9: 3.132608, 10: 2.694467154, 12: 2.076078,
		15: 1.508906722, 20: 1, 30: 0.560001899, 40: 0.371131, 50: 0.269740, 60: 0.207834005, 75: 0.151055, 100: 0.100108947,
		132: 0.067306, 150: 0.056061200, 200: 0.037153523, 240: 0.028626669, 264: 0.024979243,
	} {
		got, ok := ClassATripMS(current)
		// The table gives at least five figures.
		if !ok || !near(got, 1000*seconds, 1e-5) {
			t.Errorf("at %v mA: %v ms (%v), want %v", current, got, ok, 1000*seconds)
		}
	}
	for _, outside := range []float64{0, 3.9, 5.999999, 264.01, math.Inf(1), math.NaN()} {
		if ms, ok := ClassATripMS(outside); ok {
			t.Errorf("at %v mA no limit is published, got %v ms", outside, ms)
		}
	}
}

// The integral of the curve, computed independently: what the slowest compliant device shows on a ramp.
func TestClassARampMA_SlowestCompliantDevice(t *testing.T) {
	for rate, want := range map[float64]float64{0.1: 6.53, 0.5: 8.19, 1: 9.76} {
		if got := ClassARampMA(rate); math.Abs(got-want) > 0.005 {
			t.Errorf("on %v mA/s: %v mA, want %v", rate, got, want)
		}
	}
}

func TestRound9_NineSignificantDigits(t *testing.T) {
	for x, want := range map[float64]float64{
		0: 0, 1: 1, 4677.1910364719: 4677.19104, 24.97924296: 24.979243, 0.0001220703125: 0.000122070313,
		123456789.5: 123456790, 1234567891: 1234567890, 6: 6, 1666.6666666666667: 1666.66667, 1e21: 1e21, 5e-14: 5e-14,
		99999999.95: 100000000, 1e-13: 1e-13,
	} {
		if got := round9(x); got != want {
			t.Errorf("round9(%v) = %v, want %v", x, got, want)
		}
	}
}

// Common practice, no source: sustained muscle contraction sets in above about 10 mA. The Class A must-trip level
// lies below it, and the shipped band holds the about 5 mA at which such devices act.
func TestShipped_ClassABandLiesBelowLetGo(t *testing.T) {
	set, _ := Shipped().LimitSet("us-class-a")
	for _, l := range set.Limits {
		if l.ID != "trip-current" {
			continue
		}
		if *l.Max >= 10 || *l.Max != classATripMA || *l.Min != classANoTripMA || *l.Min > 5 || *l.Max < 5 {
			t.Errorf("trip current band %v to %v mA", *l.Min, *l.Max)
		}
		return
	}
	t.Error("us-class-a has no trip-current limit")
}

// NECA 169, 5.1 and CPSC: buttons monthly.
func TestShipped_ButtonsMonthly(t *testing.T) {
	for _, p := range Shipped().Plans {
		if p.ID == "button-monthly" {
			if p.Every != "P1M" || p.Duty != "once-each-period" || p.Task != TaskButton {
				t.Errorf("%+v", p)
			}
			return
		}
	}
	t.Error("no monthly button plan is shipped")
}
