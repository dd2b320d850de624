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
