package forms

import (
	"math"
	"testing"

	"pgregory.net/rapid"
)

// JCGM 106:2012, examples (diode breakdown voltage; container burst pressure) and the coverage factors of its Table 1;
// the sets for 4 to 6 mA with U = 0.30 mA computed independently.
func TestConformity_PublishedExamples(t *testing.T) {
	at := func(v float64) *float64 { return &v }
	for _, c := range []struct {
		name        string
		value       float64
		least, most *float64
		u, want     float64
	}{
		{"breakdown voltage -5.47 V, u 0.05 V, at most -5.40 V", -5.47, nil, at(-5.40), 0.05, 0.919243},
		{"burst pressure 509.7 kPa, u 8.6 kPa, at least 490 kPa", 509.7, at(490), nil, 8.6, 0.989010},
		{"z for 0.80", 0, nil, at(0.841621), 1, 0.80},
		{"z for 0.90", 0, nil, at(1.281552), 1, 0.90},
		{"z for 0.95", 0, nil, at(1.644854), 1, 0.95},
		{"z for 0.99", 0, nil, at(2.326348), 1, 0.99},
		{"z for 0.999", 0, nil, at(3.090232), 1, 0.999},
		{"6 mA at most, 5.5", 5.5, nil, at(6), 0.15, 0.9996},
		{"6 mA at most, 5.7", 5.7, nil, at(6), 0.15, 0.9772},
		{"6 mA at most, 5.85", 5.85, nil, at(6), 0.15, 0.8413},
		{"6 mA at most, 6", 6, nil, at(6), 0.15, 0.5},
		{"6 mA at most, 6.15", 6.15, nil, at(6), 0.15, 0.1587},
		{"6 mA at most, 6.3", 6.3, nil, at(6), 0.15, 0.0228},
		{"4 to 6 mA, 4", 4, at(4), at(6), 0.15, 0.5},
		{"4 to 6 mA, 4.2", 4.2, at(4), at(6), 0.15, 0.9088},
		{"4 to 6 mA, 4.3", 4.3, at(4), at(6), 0.15, 0.9772},
		{"4 to 6 mA, 5", 5, at(4), at(6), 0.15, 1},
		{"4 to 6 mA, 5.9", 5.9, at(4), at(6), 0.15, 0.7475},
	} {
		// The examples are given to four decimals or six.
		if got := Conformity(c.value, c.least, c.most, c.u); math.Abs(got-c.want) > 6e-5 {
			t.Errorf("%s: %v, want %v", c.name, got, c.want)
		}
	}
}

// ILAC-G8:09/2019, 4.2.2: with w = U at k = 2 the risk of a false accept is at most 2.275 %.
func TestConformity_RiskAtTheGuardedLimit(t *testing.T) {
	limit := 6.0
	if risk := 1 - Conformity(limit-0.3, nil, &limit, 0.15); math.Abs(risk-0.02275) > 1e-6 {
		t.Errorf("risk %v, want 0.02275", risk)
	}
	// Simple acceptance: up to 50 % (4.2.1).
	if risk := 1 - Conformity(limit, nil, &limit, 0.15); risk != 0.5 {
		t.Errorf("risk on the limit %v, want 0.5", risk)
	}
}

// The library's error function is an implementation that is not ours.
func TestNormal_AgreesWithErfc(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		z := rapid.Float64Range(-9, 9).Draw(t, "z")
		if got, want := normal(z), math.Erfc(-z/math.Sqrt2)/2; math.Abs(got-want) > 1e-12 {
			t.Fatalf("normal(%v) = %v, want %v", z, got, want)
		}
	})
}

// verdictsOf gives the findings of one reading under each set.
func verdictsOf(t *rapid.T, form *Form, sets [2]*LimitSet, e Entry, reading string) (out [2]Finding) {
	for i, set := range sets {
		v := mustJudge(t, form, set, e)
		for _, f := range v.Findings {
			if f.Reading == reading && f.Verdict != Missing {
				out[i] = f
			}
		}
		if out[i].Verdict == "" {
			t.Fatalf("%s was not judged", reading)
		}
	}
	return out
}

func classASets(t testing.TB) (form *Form, sets [2]*LimitSet) {
	form, _ = Shipped().Form("gfci-receptacle/instrument")
	sets[0], _ = Shipped().LimitSet("us-class-a")
	var ok bool
	if sets[1], ok = Shipped().LimitSet("us-class-a-guarded"); !ok {
		t.Fatal("no guarded set")
	}
	return form, sets
}

func drawAccuracy(t *rapid.T) map[string]Accuracy {
	a := map[string]Accuracy{}
	for _, code := range []string{"trip_current_ma", "trip_time_ms", "test_current_ma"} {
		if rapid.IntRange(0, 4).Draw(t, code+" known") > 0 {
			a[code] = Accuracy{Percent: rapid.Float64Range(0, 20).Draw(t, code+" percent"), Plus: rapid.Float64Range(0, 1).Draw(t, code+" plus")}
		}
	}
	return a
}

// Whatever the accuracy, what a guard band passes simple acceptance passes, and what it fails simple acceptance does not
// pass.
func TestGuardBand_NeverWidensAcceptance(t *testing.T) {
	form, sets := classASets(t)
	rapid.Check(t, func(t *rapid.T) {
		e := Entry{Given: Given{Accuracy: drawAccuracy(t)}, Readings: map[string]Reading{"test_current_ma": Number(rapid.SampledFrom([]float64{6, 6.2, 8, 20, 264}).Draw(t, "current"))}}
		for _, code := range []string{"trip_current_ma", "trip_time_ms"} {
			i := codeAt[code]
			e.Readings[code] = drawReading(t, codes[i])
		}
		for _, code := range []string{"trip_current_ma", "trip_time_ms"} {
			if e.Readings[code].Missing != "" || e.Readings[code].Value != nil && !fitsNumber(e.Readings[code]) {
				continue
			}
			f := verdictsOf(t, form, sets, e, code)
			if worse(f[1].Verdict) < worse(f[0].Verdict) && !(f[0].Verdict == Fail && f[1].Verdict == ConditionalFail) {
				t.Fatalf("%s %s: simple %q, guarded %q", code, f[0].Value, f[0].Verdict, f[1].Verdict)
			}
			if f[1].Verdict == Fail && f[0].Verdict == Pass {
				t.Fatalf("%s %s: guarded fails what lies inside", code, f[0].Value)
			}
		}
	})
}

func fitsNumber(r Reading) bool { _, ok := r.Float(); return ok }

// Beyond a one-sided limit a larger figure is never judged better, whatever the accuracy.
func TestGuardBand_OneSidedLimitsAreMonotone(t *testing.T) {
	form, sets := classASets(t)
	rapid.Check(t, func(t *rapid.T) {
		current := rapid.Float64Range(6, 264).Draw(t, "current")
		limit, _ := ClassATripMS(current)
		accuracy := drawAccuracy(t)
		a := rapid.OneOf(rapid.Float64Range(0, 9000), rapid.Float64Range(limit*0.8, limit*1.2)).Draw(t, "a")
		b := rapid.OneOf(rapid.Float64Range(a, 9000), rapid.Float64Range(a, a*1.0001)).Draw(t, "b")
		rank := func(ms float64) [2]Finding {
			return verdictsOf(t, form, sets, Entry{Given: Given{Accuracy: accuracy}, Readings: map[string]Reading{"test_current_ma": Number(current), "trip_time_ms": Number(ms)}}, "trip_time_ms")
		}
		less, more := rank(min(a, b)), rank(max(a, b))
		for i := range less {
			if worse(less[i].Verdict) > worse(more[i].Verdict) {
				t.Fatalf("%s: at %v mA %v ms gives %q, %v ms %q", sets[i].ID, current, a, less[i].Verdict, b, more[i].Verdict)
			}
		}
	})
}

// Rounding for the eye never decides: the verdict of a figure that shows as the limit is that of its own value.
func TestJudge_ShownRoundingDecidesNothing(t *testing.T) {
	form, sets := classASets(t)
	for v, want := range map[float64]string{6: Pass, 6.0004: Fail, 5.9996: Pass, 4: Pass, 3.9996: Fail} {
		got, err := Judge(form, sets[0], Entry{Readings: map[string]Reading{"trip_current_ma": Number(v)}})
		if err != nil || got.Result != want {
			t.Errorf("%v mA: %q (%v), want %q", v, got.Result, err, want)
		}
	}
}
