package forms

import (
	"bytes"
	"crypto/sha256"
	"math"
	"slices"
)

// SampleSize gives the smallest number of devices to check so that, if bad or more of the lot were bad, a sample without a
// single bad one would come up with a probability below 1 − confidence (hypergeometric, zero acceptance). With a lot
// of none it is 0; with bad 0 nothing can be shown short of the whole lot.
func SampleSize(lot, bad int, confidence float64) int {
	if lot <= 0 {
		return 0
	}
	if bad <= 0 {
		return lot
	}
	missed := 1.0 // probability that none of the bad ones is among n
	for n := 1; n <= lot; n++ {
		left := lot - n + 1
		missed *= float64(max(left-bad, 0)) / float64(left)
		if missed < 1-confidence-1e-12 {
			return n
		}
	}
	return lot
}

// SampleBad is how many bad devices of a lot a tolerable share stands for: the least number that reaches it, at least 1.
func SampleBad(lot int, share float64) int {
	return max(1, int(math.Ceil(float64(lot)*share-1e-9)))
}

// ShareBounds gives the exact two-sided bounds of the share of bad ones, 0 to 1, where bad of n checked were bad
// (Clopper and Pearson 1934; NIST/SEMATECH e-Handbook 7.2.4.1). n of 0 says nothing: 0 and 1.
func ShareBounds(bad, n int, confidence float64) (least, most float64) {
	tail := (1 - confidence) / 2
	least, most = 0, 1
	if bad > 0 {
		least = root(func(p float64) bool { return 1-binomialUpTo(bad-1, n, p) < tail })
	}
	if bad < n {
		most = root(func(p float64) bool { return binomialUpTo(bad, n, p) > tail })
	}
	return least, most
}

// root finds where below stops being true between 0 and 1.
func root(below func(p float64) bool) float64 {
	lo, hi := 0.0, 1.0
	for range 100 {
		if mid := (lo + hi) / 2; below(mid) {
			lo = mid
		} else {
			hi = mid
		}
	}
	return (lo + hi) / 2
}

// binomialUpTo is the probability of at most k bad ones of n at a share p.
func binomialUpTo(k, n int, p float64) float64 {
	sum := 0.0
	for i := 0; i <= k; i++ {
		sum += math.Exp(choose(n, i) + float64(i)*math.Log(p) + float64(n-i)*math.Log1p(-p))
	}
	return min(sum, 1)
}

// choose is the logarithm of a binomial coefficient.
func choose(n, k int) float64 {
	a, _ := math.Lgamma(float64(n) + 1)
	b, _ := math.Lgamma(float64(k) + 1)
	c, _ := math.Lgamma(float64(n-k) + 1)
	return a - b - c
}

// LotBounds gives the exact two-sided bounds of the number of bad ones in a whole lot, of which n were checked and bad were
// bad: the numbers that the hypergeometric distribution does not rule out at the confidence.
func LotBounds(lot, bad, n int, confidence float64) (least, most int) {
	tail := (1 - confidence) / 2
	least, most = bad, lot-(n-bad)
	for least < most && 1-hypergeometricUpTo(bad-1, lot, least, n) <= tail {
		least++
	}
	for most > least && hypergeometricUpTo(bad, lot, most, n) <= tail {
		most--
	}
	return least, most
}

// hypergeometricUpTo is the probability of at most k bad ones among n drawn from a lot that holds so many.
func hypergeometricUpTo(k, lot, bad, n int) float64 {
	sum := 0.0
	for i := max(0, n-(lot-bad)); i <= min(k, bad, n); i++ {
		sum += math.Exp(choose(bad, i) + choose(lot-bad, n-i) - choose(lot, n))
	}
	return min(sum, 1)
}

// DrawSample draws n of the ids. What is drawn is fixed by the head, which the organisation signed before, and the word, which the
// auditor chooses after she holds it: neither of the two could choose the sample alone, and anybody can draw it again. The ids are
// put in the order of SHA-256(head | 0x0A | word | 0x0A | id) and the first n are taken.
func DrawSample(head, word string, ids []string, n int) []string {
	type drawn struct {
		id  string
		key [sha256.Size]byte
	}
	all := make([]drawn, len(ids))
	for i, id := range ids {
		all[i] = drawn{id, sha256.Sum256([]byte(head + "\n" + word + "\n" + id))}
	}
	slices.SortFunc(all, func(a, b drawn) int { return bytes.Compare(a.key[:], b.key[:]) })
	out := make([]string, min(max(n, 0), len(all)))
	for i := range out {
		out[i] = all[i].id
	}
	return out
}
