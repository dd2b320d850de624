package proof

import (
	"fmt"
	"slices"
	"testing"
)

func TestCompareLeaves_NamesWhatWasDone(t *testing.T) {
	leaf := func(names ...int) (list []Hash) {
		for _, n := range names {
			list = append(list, LeafHash(fmt.Appendf(nil, "leaf %d", n)))
		}
		return list
	}
	want := leaf(1, 2, 3, 4, 5)
	for name, c := range map[string]struct {
		got  []Hash
		want []Difference
	}{
		"nothing":          {leaf(1, 2, 3, 4, 5), nil},
		"one is changed":   {leaf(1, 2, 9, 4, 5), []Difference{{Changed, 3, 3}}},
		"one is dropped":   {leaf(1, 2, 4, 5), []Difference{{Missing, 3, 0}}},
		"the end is cut":   {leaf(1, 2, 3), []Difference{{Missing, 4, 0}, {Missing, 5, 0}}},
		"one is added":     {leaf(1, 2, 9, 3, 4, 5), []Difference{{Foreign, 0, 3}}},
		"one is put after": {leaf(1, 2, 3, 4, 5, 9), []Difference{{Foreign, 0, 6}}},
		"one stands twice": {leaf(1, 2, 2, 3, 4, 5), []Difference{{Foreign, 0, 3}}},
		"one is moved":     {leaf(1, 3, 4, 2, 5), []Difference{{Moved, 2, 4}}},
		"first is changed": {leaf(9, 2, 3, 4, 5), []Difference{{Changed, 1, 1}}},
		"two are changed":  {leaf(1, 8, 9, 4, 5), []Difference{{Changed, 2, 2}, {Changed, 3, 3}}},
		"all are gone":     {nil, []Difference{{Missing, 1, 0}, {Missing, 2, 0}, {Missing, 3, 0}, {Missing, 4, 0}, {Missing, 5, 0}}},
	} {
		if got := CompareLeaves(want, c.got); !slices.Equal(got, c.want) {
			t.Errorf("%s: got %v, want %v", name, got, c.want)
		}
	}
	swapped := CompareLeaves(want, leaf(1, 3, 2, 4, 5))
	if len(swapped) != 1 || swapped[0].What != Moved {
		t.Errorf("two neighbours in each other's place: got %v, want one of them moved", swapped)
	}
}
