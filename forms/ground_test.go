package forms

import (
	"strings"
	"testing"
)

// The ground path of an outlet against what is published of it: below 1.0 ohm from outlet to panel bond (ANSI/ESD S6.1, 6.2.1),
// and no figure at all in the NEC, so that no shipped set fails an existing outlet by its ohms (its 25 ohm are about a single rod
// electrode). New construction of health care has stricter figures of its own.
func TestGround_OhmsOfAnOutletAreWatched(t *testing.T) {
	for _, set := range Shipped().LimitSets {
		for _, l := range set.Limits {
			if l.Reading != "ground_ohm" || l.Max == nil || !strings.Contains(l.Source, "S6.1") {
				continue
			}
			if l.Level != "watch" || *l.Max != 1 {
				t.Errorf("%s: %s at %v", set.ID, l.Level, *l.Max)
			}
		}
	}
	for ohm, want := range map[float64]string{0.25: "pass", 0.99: "pass", 1.01: "watch", 26: "watch"} {
		e := Entry{Form: "receptacle/receptacle", Given: Given{Kind: PlainReceptacle}, Readings: map[string]Reading{"condition": {Value: "sound"}, "found": {Value: "on"}, "wiring": {Value: "correct"}, "ground_continuous": {Value: "yes"}, "ground_ohm": {Value: ohm}}}
		form, _ := Shipped().Form(e.Form)
		set, _ := Shipped().LimitSet("us-receptacle")
		v, err := Judge(form, set, e)
		if err != nil {
			t.Fatal(err)
		}
		got := ""
		for _, f := range v.Findings {
			if f.Reading == "ground_ohm" {
				got = f.Verdict
			}
		}
		if got != want || v.Result == Fail {
			t.Errorf("%v ohm: got %s, result %s, want %s and no fail", ohm, got, v.Result, want)
		}
	}
}

// 12 AWG copper has less than 2 ohm in 1000 ft (304.8 m), and less than 0.25 ohm is expected at 100 ft: the ohms per length of the
// cord set's limit stay below both. Twice the length is twice the ohms, and a thinner conductor has more.
func TestGround_OhmsPerLength(t *testing.T) {
	set, ok := Shipped().LimitSet("us-cord-set")
	if !ok {
		t.Fatal("no such set")
	}
	for _, l := range set.Limits {
		if l.PerLength == nil {
			continue
		}
		perM := l.PerLength.OhmPerM
		if at := perM["12"] * 304.8; at >= 2 || at < 1.5 {
			t.Errorf("12 AWG: %v ohm in 1000 ft, want just below 2", at)
		}
		if at := perM["12"] * 30.48; at >= 0.25 {
			t.Errorf("12 AWG: %v ohm in 100 ft, want below 0.25", at)
		}
		for thin, thick := range map[string]string{"18": "16", "16": "14", "14": "12", "12": "10", "10": "8"} {
			if r := perM[thin] / perM[thick]; r < 1.5 || r > 1.7 { // two sizes of the American gauge: 1.26 squared
				t.Errorf("%s AWG has %v times the ohms of %s AWG", thin, r, thick)
			}
		}
		return
	}
	t.Error("no limit by length")
}
