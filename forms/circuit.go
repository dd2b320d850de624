package forms

// MinConductor gives the smallest copper conductor, in AWG, that a breaker of the given rating in amperes may protect:
// 15 A wants 14, 20 A wants 12, 30 A wants 10 (NEC 240.4(D), small conductors). ok is false for a rating the clause does
// not name; 240.4(E) and (G) hold exceptions. AWG numbers fall as conductors grow: 12 is larger than 14.
func MinConductor(breakerA float64) (awg int, ok bool) {
	switch {
	case breakerA <= 0 || breakerA > 30:
		return 0, false
	case breakerA <= 15:
		return 14, true
	case breakerA <= 20:
		return 12, true
	}
	return 10, true
}
