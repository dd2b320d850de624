package forms

import (
	"fmt"
	"math"
	"slices"
	"testing"

	"pgregory.net/rapid"
)

func TestSampleSize_Hypergeometric(t *testing.T) {
	// Computed from the definition: smallest n with P(0 bad) below 0.05.
	for _, c := range [][3]int{{20, 1, 20}, {20, 2, 16}, {50, 1, 48}, {50, 3, 31}, {50, 5, 22}, {100, 1, 96}, {100, 5, 45}, {100, 10, 25}, {200, 2, 155}, {200, 10, 51}, {200, 20, 27}} {
		if got := SampleSize(c[0], c[1], 0.95); got != c[2] {
			t.Errorf("lot of %d with %d bad: got %d, want %d", c[0], c[1], got, c[2])
		}
	}
	// n = ceil(ln(1 - C) / ln(1 - p)) for a lot without end, from memory: 299, 149, 59 and 29 at 95 %; 230, 114, 45 and 22 at 90 %.
	const lot = 10_000_000
	for share, want := range map[float64][2]int{0.01: {299, 230}, 0.02: {149, 114}, 0.05: {59, 45}, 0.10: {29, 22}} {
		bad := SampleBad(lot, share)
		if got := [2]int{SampleSize(lot, bad, 0.95), SampleSize(lot, bad, 0.90)}; got != want {
			t.Errorf("share %v: got %v, want %v", share, got, want)
		}
	}
	if SampleSize(0, 1, 0.95) != 0 || SampleSize(10, 0, 0.95) != 10 || SampleSize(3, 9, 0.95) != 1 {
		t.Error("the ends of the table")
	}
	if SampleBad(100, 0.05) != 5 || SampleBad(101, 0.05) != 6 || SampleBad(7, 0.01) != 1 {
		t.Error("how many a share stands for")
	}
}

func TestShareBounds_Published(t *testing.T) {
	for _, c := range []struct {
		bad, n      int
		confidence  float64
		least, most float64
	}{
		{4, 20, 0.90, 0.0713538843, 0.4010281173}, // NIST/SEMATECH e-Handbook 7.2.4.1, its example
		{4, 20, 0.95, 0.0573339971, 0.4366140030}, // the rest computed with a general library
		{0, 10, 0.95, 0, 0.3084971078}, {0, 30, 0.95, 0, 0.1157033082}, {0, 59, 0.95, 0, 0.0606089010}, {0, 100, 0.95, 0, 0.0362166927},
		{1, 100, 0.95, 0.000253146, 0.0544593854}, {10, 10, 0.95, 0.6915028922, 1},
	} {
		least, most := ShareBounds(c.bad, c.n, c.confidence)
		if math.Abs(least-c.least) > 5e-9 || math.Abs(most-c.most) > 5e-9 {
			t.Errorf("%d of %d at %v: got %.10f and %.10f, want %.10f and %.10f", c.bad, c.n, c.confidence, least, most, c.least, c.most)
		}
	}
	if a, b := ShareBounds(0, 0, 0.95); a != 0 || b != 1 {
		t.Errorf("nothing checked: got %v and %v", a, b)
	}
}

func TestLotBounds_HoldWhatTheyPromise(t *testing.T) {
	// A clean sample of the size that SampleSize gives leaves fewer bad ones than that size is for, at the one-sided confidence.
	for _, c := range [][2]int{{50, 5}, {100, 10}, {200, 10}, {41, 3}} {
		n := SampleSize(c[0], c[1], 0.95)
		if _, most := LotBounds(c[0], 0, n, 0.90); most >= c[1] {
			t.Errorf("lot of %d, none bad of %d: up to %d bad are not ruled out, want below %d", c[0], n, most, c[1])
		}
	}
	if least, most := LotBounds(10, 2, 10, 0.95); least != 2 || most != 2 {
		t.Errorf("the whole lot was checked: got %d and %d, want 2 and 2", least, most)
	}
	rapid.Check(t, func(t *rapid.T) {
		lot := rapid.IntRange(1, 60).Draw(t, "lot")
		truth := rapid.IntRange(0, lot).Draw(t, "bad in the lot")
		n := rapid.IntRange(0, lot).Draw(t, "checked")
		covered := 0.0 // probability that the bounds hold the truth
		for k := max(0, n-(lot-truth)); k <= min(n, truth); k++ {
			if least, most := LotBounds(lot, k, n, 0.95); least <= truth && truth <= most {
				covered += hypergeometricUpTo(k, lot, truth, n) - hypergeometricUpTo(k-1, lot, truth, n)
			}
		}
		if covered < 0.95-1e-9 {
			t.Fatalf("lot of %d with %d bad, %d checked: the bounds hold the truth with probability %.4f", lot, truth, n, covered)
		}
	})
}

func TestDrawSample_AnybodyDrawsTheSame(t *testing.T) {
	var ids []string
	for i := range 500 {
		ids = append(ids, fmt.Sprintf("device %d", i))
	}
	first := DrawSample("head", "rain", ids, 40)
	turned := slices.Clone(ids)
	slices.Reverse(turned)
	if again := DrawSample("head", "rain", turned, 40); !slices.Equal(first, again) {
		t.Error("the order in which devices are given changes what is drawn")
	}
	if more := DrawSample("head", "rain", ids, 60); !slices.Equal(more[:40], first) {
		t.Error("a larger sample does not begin with the smaller one")
	}
	if other := DrawSample("head", "snow", ids, 40); slices.Equal(other, first) {
		t.Error("another word draws the same")
	}
	if other := DrawSample("another head", "rain", ids, 40); slices.Equal(other, first) {
		t.Error("another head draws the same")
	}
	// Every device has the same chance: of 2,000 draws of 50 out of 500 each is in about 200 (common practice, no source: within 5 standard deviations).
	counts := map[string]int{}
	for i := range 2000 {
		for _, id := range DrawSample("head", fmt.Sprint(i), ids, 50) {
			counts[id]++
		}
	}
	for _, id := range ids {
		if c := counts[id]; math.Abs(float64(c)-200) > 5*math.Sqrt(2000*0.1*0.9) {
			t.Errorf("%s was drawn %d times of 2000, want about 200", id, c)
		}
	}
	if len(DrawSample("h", "w", ids[:3], 10)) != 3 || len(DrawSample("h", "w", nil, 10)) != 0 || len(DrawSample("h", "w", ids, -1)) != 0 {
		t.Error("the ends of a draw")
	}
}
