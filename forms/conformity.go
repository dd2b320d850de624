package forms

import "math"

// Conformity gives the probability in 0 to 1 that the true value lies inside [least, most], either of which may be nil,
// where value was measured with the standard uncertainty u: JCGM 106:2012, 7.3 and 7.4, normal distribution. It is rounded
// to 6 decimals. u must be above 0.
func Conformity(value float64, least, most *float64, u float64) float64 {
	p := 1.0
	if most != nil {
		p = normal((*most - value) / u)
	}
	if least != nil {
		p -= normal((*least - value) / u)
	}
	return math.Floor(float64(max(p, 0)*1e6)+0.5) / 1e6
}

// normal is the standard normal distribution function, to about 1e-14: 1/2 + phi(z) (z + z^3/3 + z^5/(3*5) + ...), the
// series by parts of its integral. It uses only operations that IEEE 754 rounds exactly, in the order static/limit.mjs
// has them, so that both languages give the same bits; the conversions keep a compiler from fusing them.
func normal(z float64) float64 {
	if z > 8 {
		return 1
	}
	if z < -8 {
		return 0
	}
	q := float64(z * z)
	sum, term := z, z
	for k := 3.0; ; k += 2 {
		term = float64(term*q) / k
		next := sum + term
		if next == sum {
			break
		}
		sum = next
	}
	// 1/sqrt(2 pi)
	return 0.5 + float64(float64(0.3989422804014327*sum)*decay(q/2))
}

// decay is e^-x for x from 0 to 32, by the series of e^(-x/64) and six squarings.
func decay(x float64) float64 {
	y := x / 64
	sum, term := 1.0, 1.0
	for k := 1.0; k <= 20; k++ {
		term = float64(-term*y) / k
		sum += term
	}
	for range 6 {
		sum = float64(sum * sum)
	}
	return sum
}
