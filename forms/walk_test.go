package forms

import (
	"slices"
	"testing"

	"pgregory.net/rapid"
)

// fewest tries every cut.
func fewest(minutes []float64, most float64) int {
	if len(minutes) == 0 {
		return 0
	}
	best := len(minutes)
	for cut := range 1 << (len(minutes) - 1) {
		rounds, sum, fits := 1, 0.0, true
		for i, m := range minutes {
			if i > 0 && cut>>(i-1)&1 == 1 {
				rounds, sum = rounds+1, 0
			}
			if sum += m; sum > most && sum != m {
				fits = false
			}
		}
		if fits {
			best = min(best, rounds)
		}
	}
	return best
}

func TestSplitWalk_NoOtherCutMakesFewerRounds(t *testing.T) {
	rapid.Check(t, func(rt *rapid.T) {
		minutes := rapid.SliceOfN(rapid.Float64Range(0.5, 9), 0, 10).Draw(rt, "minutes")
		most := rapid.Float64Range(1, 20).Draw(rt, "most")
		starts := SplitWalk(minutes, most)
		if len(starts) != fewest(minutes, most) {
			rt.Fatalf("got %d rounds from %v, want %d", len(starts), starts, fewest(minutes, most))
		}
		for i, start := range starts {
			end := len(minutes)
			if i+1 < len(starts) {
				end = starts[i+1]
			}
			sum := 0.0
			for _, m := range minutes[start:end] {
				sum += m
			}
			if sum > most && end-start > 1 {
				rt.Errorf("round %d takes %g of %g minutes", i, sum, most)
			}
		}
		if len(minutes) > 0 && (starts[0] != 0 || !slices.IsSorted(starts)) {
			rt.Errorf("got %v", starts)
		}
	})
}

func TestSuitingStart_KeepsEveryStopWithinItsHours(t *testing.T) {
	pump, pantry, night := &Hours{5*60 + 30, 9*60 + 30}, &Hours{6 * 60, 8*60 + 30}, &Hours{22 * 60, 4 * 60}
	for _, c := range []struct {
		name    string
		start   int
		minutes []float64
		hours   []*Hours
		outside []int
		better  int // -1: none suits
	}{
		{"no hours, any start", 10 * 60, []float64{5, 5}, []*Hours{nil, nil}, nil, 10 * 60},
		{"begun in time and ended after it", 9*60 + 28, []float64{5}, []*Hours{pump}, []int{0}, 9*60 + 25},
		{"reached too late on the way", 8 * 60, []float64{100, 5}, []*Hours{nil, pump}, []int{1}, 7*60 + 45},
		{"too early", 5 * 60, []float64{5, 5}, []*Hours{pump, pantry}, []int{0, 1}, 5*60 + 55},
		{"over midnight", 23 * 60, []float64{90, 10}, []*Hours{night, night}, nil, 23 * 60},
		{"by day, what is for the night", 12 * 60, []float64{10}, []*Hours{night}, []int{0}, 3*60 + 50},
		{"no hour suits both", 8 * 60, []float64{240, 5}, []*Hours{pump, pantry}, []int{0, 1}, -1},
	} {
		if got := OutsideHours(c.start, c.minutes, c.hours); !slices.Equal(got, c.outside) {
			t.Errorf("%s: outside are %v, want %v", c.name, got, c.outside)
		}
		got, ok := SuitingStart(c.start, c.minutes, c.hours)
		if want := c.better >= 0; ok != want || ok && got != c.better {
			t.Errorf("%s: start %d (%t), want %d", c.name, got, ok, c.better)
		}
	}
}
