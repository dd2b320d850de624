package bundle

import (
	"slices"
	"testing"
)

func TestThinned_KeepsTheNewestAndSpreadsTheRest(t *testing.T) {
	list := make([]int, 1000)
	for i := range list {
		list[i] = i
	}
	if got := thinned(list, 1000); !slices.Equal(got, list) {
		t.Error("what fits was thinned")
	}
	got := thinned(list, 100)
	if len(got) != 100 || !slices.IsSorted(got) || len(slices.Compact(slices.Clone(got))) != 100 {
		t.Fatalf("%d of 100: %v", len(got), got)
	}
	if got[0] != 0 || got[50] != 950 || got[99] != 999 {
		t.Errorf("the oldest, and the newest half: %v", got)
	}
	for i := 1; i < 50; i++ {
		if gap := got[i] - got[i-1]; gap < 18 || gap > 20 {
			t.Errorf("a gap of %d among the older", gap)
		}
	}
	for most := 2; most < 9; most++ {
		if got := thinned(list, most); len(got) != most || got[most-1] != 999 {
			t.Errorf("of %d: %v", most, got)
		}
	}
}
