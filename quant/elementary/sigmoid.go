package elementary

import "math"

// Sigmoid returns 1/(1 + e^(-x)); the error is below 0.6 ulp where the result is
// normal. Sigmoid(-Inf) is 0.
//
// With E = e^(-|x|) in two parts it is 1/(1 + E) or, for a negative x, E/(1 + E).
func Sigmoid(x float64) float64 {
	switch {
	case x != x:
		return math.NaN()
	case x < -40: // 1 + E is 1 within 2^-57
		return Exp(x)
	case x > 40:
		return 1
	}
	hi, lo, m := expParts(-math.Abs(x))
	hi, lo = twoSum(hi, lo)
	scale := power2(m)
	hi, lo = float64(hi*scale), float64(lo*scale)

	bottom, rest := twoSum(1, hi)
	rest += lo
	top, topRest := 1.0, 0.0
	if x < 0 {
		top, topRest = hi, lo
	}
	q := top / bottom
	residue := math.FMA(-q, bottom, top) // exact
	return q + (residue+topRest-float64(q*rest))/bottom
}
