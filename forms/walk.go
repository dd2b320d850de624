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

// Hours are when a test may be made, in minutes from midnight, both included; from later than until goes over midnight.
type Hours struct{ From, Until int }

// dayMinutes are the minutes of a day by the clock on the wall.
const dayMinutes = 24 * 60

// holds reports whether a test that begins at a minute and takes so many is made within the hours.
func (h Hours) holds(at, takes float64) bool {
	until := float64(h.Until)
	if h.Until < h.From {
		until += dayMinutes
	}
	for ; at >= dayMinutes; at -= dayMinutes {
	}
	if at < float64(h.From) {
		at += dayMinutes
	}
	return at >= float64(h.From) && at+takes <= until
}

// Reached gives the minute of the day at which each stop of a walk begins that starts at a minute.
func Reached(start int, minutes []float64) []float64 {
	out, at := make([]float64, len(minutes)), float64(start)
	for i, m := range minutes {
		out[i] = at
		at += m
	}
	return out
}

// OutsideHours gives the stops of a walk that are not made within their hours where it starts at a minute; hours[i] nil is
// any hour.
func OutsideHours(start int, minutes []float64, hours []*Hours) []int {
	var out []int
	for i, at := range Reached(start, minutes) {
		if hours[i] != nil && !hours[i].holds(at, minutes[i]) {
			out = append(out, i)
		}
	}
	return out
}

// startStep is how exactly people keep an hour they were given.
const startStep = 5

// SuitingStart finds the minute nearest to a wanted one at which a walk may start so that every stop is made within its
// hours; ok is false where no hour of the day suits them all.
func SuitingStart(wanted int, minutes []float64, hours []*Hours) (start int, ok bool) {
	for away := 0; away < dayMinutes; away += startStep {
		for _, start := range []int{wanted - away, wanted + away} {
			start -= floorMod(start, startStep)
			if start >= 0 && start < dayMinutes && len(OutsideHours(start, minutes, hours)) == 0 {
				return start, true
			}
		}
	}
	return 0, false
}
