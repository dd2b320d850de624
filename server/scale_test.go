package server

import (
	"math"
	"strconv"
	"testing"

	"tripwell/forms"
)

func TestScale_TripTimeLimitOnTheLogarithmicLine(t *testing.T) {
	k := pageServer(t).ink()
	// UL 943 Class A: T = (20 / I)^1.43 s; at 6.8 mA that is 4.677 s.
	limit := 1000 * math.Pow(20/6.8, 1.43)
	span := []scaleSpan{{log: true, from: 10, to: 10000}}
	f := forms.Finding{Reading: "trip_time_ms", Verdict: forms.Pass, Limit: &forms.Bounds{Max: &limit}, Level: "must"}
	d := k.scale("trip_time_ms", forms.Reading{Value: 100.0}, f, span, nil)
	// Three decades over 360: 100 ms stands at a third.
	if d == nil || d.Mark != "120" || len(d.Ticks) != 4 {
		t.Fatalf("got %+v, want the mark at 120 and four ticks", d)
	}
	if at, err := strconv.ParseFloat(d.Limits[0], 64); err != nil || math.Abs(at-120*math.Log10(467.7)) > 0.1 {
		t.Errorf("got the limit at %s, want %.2f", d.Limits[0], 120*math.Log10(467.7))
	}
	if got, want := k.limit("trip_time_ms", f.Limit, "must"), "at most 4"+thin+"677"+thin+"ms"; got != want {
		t.Errorf("got %q, want %q", got, want)
	}
	above := 2000.0
	if d = k.scale("trip_time_ms", forms.Reading{Above: &above}, f, span, nil); d == nil || !d.Open {
		t.Error("a device that did not trip is drawn as if it had a figure")
	}
	if d = k.scale("trip_time_ms", forms.Reading{Missing: "unsafe"}, f, span, nil); d != nil {
		t.Error("a reading that was not taken is drawn")
	}
}

func TestNumber_Written(t *testing.T) {
	for v, want := range map[float64]string{0: "0", 0.31: "0.31", 999: "999", 4677: "4" + thin + "677", 1234567: "1" + thin + "234" + thin + "567", -5.5: "−5.5", math.Inf(1): dash} {
		if got := number(v); got != want {
			t.Errorf("number(%v): got %q, want %q", v, got, want)
		}
	}
}
