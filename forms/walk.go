package forms

// DefaultMinutes is how long a test with the way to it is reckoned where a site has no history of its own. Our estimate,
// no source; a site's own history replaces it.
func DefaultMinutes(task string) float64 {
	switch task {
	case "button":
		return 2
	case "instrument":
		return 6
	}
	return 5
}

// SplitWalk cuts a walk into the fewest rounds of at most most minutes each, without changing its order, and gives the
// index at which each round begins. A stop that alone takes longer is a round of its own. With the order kept, filling each
// round as far as it goes leaves the fewest: any other cut begins its k-th round no later.
func SplitWalk(minutes []float64, most float64) []int {
	var starts []int
	sum := 0.0
	for i, m := range minutes {
		if i == 0 || sum+m > most {
			starts = append(starts, i)
			sum = 0
		}
		sum += m
	}
	return starts
}
