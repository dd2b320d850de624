package forms

import (
	"math"
	"testing"
)

// NEC 240.4(D): copper 14 AWG 15 A, 12 AWG 20 A, 10 AWG 30 A; aluminum 12 AWG 15 A, 10 AWG 25 A.
func TestConductor_SmallConductorRule(t *testing.T) {
	for _, c := range []struct {
		conductor string
		breaker   float64
		verdict   string
		why       string
	}{
		{"14 AWG", 15, Pass, "inside"}, {"14 AWG", 20, Watch, "outside"}, {"12 AWG", 20, Pass, "inside"}, {"12 AWG", 15, Pass, "inside"},
		{"12 AWG", 25, Watch, "outside"}, {"10 AWG", 30, Pass, "inside"}, {"10 AWG Cu", 35, Watch, "outside"},
		{"12 AWG Al", 15, Pass, "inside"}, {"12 AWG Al", 20, Watch, "outside"}, {"10 AWG aluminum", 25, Pass, "inside"}, {"10 AWG Al", 30, Watch, "outside"},
		{"#12", 20, Pass, "inside"}, {"AWG 12", 30, Watch, "outside"}, {"12awg", 20, Pass, "inside"},
		{"8 AWG", 50, NotJudged, WhyLarger}, {"14 AWG Al", 15, NotJudged, WhyUnknown}, {"1/0 AWG", 150, NotJudged, WhyUnknown},
		{"", 20, NotJudged, WhyUnknown}, {"12 AWG", 0, NotJudged, WhyUnknown}, {"2.5 mm²", 20, NotJudged, WhyMetric}, {"2.5 mm2", 16, NotJudged, WhyMetric},
	} {
		got := CheckConductor(CircuitFacts{Standard: "NEC", Conductor: c.conductor, BreakerA: c.breaker})
		if got.Verdict != c.verdict || got.Why != c.why {
			t.Errorf("%q at %v A: got %s %s, want %s %s", c.conductor, c.breaker, got.Verdict, got.Why, c.verdict, c.why)
		}
	}
	over := CheckConductor(CircuitFacts{Standard: "NEC", Conductor: "12 AWG", BreakerA: 30})
	if over.Figures["over_a"] != 10 || over.Figures["most_a"] != 20 {
		t.Errorf("got %v", over.Figures)
	}
	for _, standard := range []string{"", "IEC"} {
		if got := CheckConductor(CircuitFacts{Standard: standard, Conductor: "14 AWG", BreakerA: 30}); got.Verdict != NotJudged || got.Why != WhyNotNEC {
			t.Errorf("standard %q: got %s %s", standard, got.Verdict, got.Why)
		}
	}
}

// NEC 210.21(B)(1) and Table 210.21(B)(3): 15 A circuit, not over 15; 20: 15 or 20; 30: 30; 40: 40 or 50; 50: 50. A single
// receptacle on an individual circuit is rated no less than the circuit.
func TestReceptacle_RatingAgainstItsCircuit(t *testing.T) {
	several := func(a float64) CircuitFacts { return CircuitFacts{Standard: "NEC", BreakerA: a, Outlets: 4} }
	for circuit, want := range map[float64]map[float64]bool{
		15: {15: true, 20: false}, 20: {15: true, 20: true, 30: false}, 30: {15: false, 20: false, 30: true, 50: false},
		40: {30: false, 40: true, 50: true}, 50: {40: false, 50: true},
	} {
		for rating, inside := range want {
			if got := CheckReceptacle(several(circuit), rating, 2); (got.Verdict == Pass) != inside || (got.Verdict == Watch) == inside {
				t.Errorf("%v A receptacle on %v A: got %s %s, inside %v", rating, circuit, got.Verdict, got.Why, inside)
			}
		}
	}
	one := CircuitFacts{Standard: "NEC", BreakerA: 20, Outlets: 1}
	for _, c := range []struct {
		rating  float64
		faces   int
		verdict string
		why     string
	}{
		{15, 1, Watch, "single"}, {20, 1, Pass, "inside"}, {30, 1, Pass, "inside"}, {15, 0, NotJudged, "unsaid"}, {15, 2, Pass, "inside"}, {0, 1, NotJudged, WhyUnknown},
	} {
		if got := CheckReceptacle(one, c.rating, c.faces); got.Verdict != c.verdict || got.Why != c.why {
			t.Errorf("alone, %v A, %d faces: got %s %s, want %s %s", c.rating, c.faces, got.Verdict, got.Why, c.verdict, c.why)
		}
	}
	if got := CheckReceptacle(several(25), 15, 2); got.Why != WhyNoTable {
		t.Errorf("25 A: got %s", got.Why)
	}
}

// Worked example of trade pages: 3 V lost at 12 A is a loop of 0.25 ohm and 2.5 % of 120 V; 118.5 V between hot and
// neutral with 1.5 V between neutral and ground is 120 V between hot and ground, so 1.5 V per conductor lost of 120 V is 2 × 1.5 / 120
// = 2.5 %, and 2 V is about 3.3 %.
func TestDrop_WorkedExample(t *testing.T) {
	c := CircuitFacts{Standard: "NEC", VoltageV: 120}
	near := func(got, want float64) bool { return math.Abs(got-want) <= 1e-9*math.Abs(want) }
	got := CheckDrop(c, 0, DropPercent(120, 117), 12)
	if got.Verdict != Pass || !near(got.Figures["lost_v"], 3) || !near(got.Figures["loop_ohm"], 0.25) || !near(got.Figures["drop_pct"], 2.5) {
		t.Errorf("got %+v", got)
	}
	if half := 120 * got.Figures["drop_pct"] / 100 / 2; !near(half, 1.5) || !near(118.5+half, 120) {
		t.Errorf("neutral to ground: got %v V, want 1.5", half)
	}
	if got := CheckDrop(c, 0, DropPercent(120, 116), 12); got.Verdict != Watch || math.Abs(got.Figures["drop_pct"]-3.3) > 0.05 {
		t.Errorf("2 V from neutral to ground: got %+v", got)
	}
	// More than 10 % is where one weatherization programme asks for repair; at 15 A that is a loop of 0.8 ohm.
	if got := CheckDrop(c, 0, 10, 15); !near(got.Figures["loop_ohm"], 0.8) || got.Verdict != Watch {
		t.Errorf("got %+v", got)
	}
	for name, got := range map[string]CircuitCheck{"no load": CheckDrop(c, 120, 2, 0), "no voltage": CheckDrop(CircuitFacts{Standard: "NEC"}, 0, 2, 12)} {
		if got.Why != WhyNoLoad || got.Verdict != NotJudged {
			t.Errorf("%s: got %+v", name, got)
		}
	}
	if got := CheckDrop(CircuitFacts{Standard: "IEC", VoltageV: 230}, 230, 2, 10); got.Why != WhyNotNEC {
		t.Errorf("IEC: got %+v", got)
	}
}
