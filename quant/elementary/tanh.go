package elementary

import "math"

// Tanh returns the hyperbolic tangent of x; the error is below 0.55 ulp.
// Tanh(-0) is -0.
func Tanh(x float64) float64 {
	a := math.Abs(x)
	switch {
	case x != x:
		return math.NaN()
	case a < 0x1p-27: // x^3/3 is below half a unit; keeps -0
		return x
	case a < 0.125:
		return tanhSmall(x)
	case a > 20: // 1 - tanh 20 < 2^-56
		return math.Copysign(1, x)
	}
	return math.Copysign(tanhLarge(a), x)
}

// tanhSmall sums the Taylor series, for |x| < 1/8: the first omitted term is
// below 2^-60 of x.
func tanhSmall(x float64) float64 {
	z := float64(x * x)
	p := -1382.0/155925 + float64(z*(21844.0/6081075-float64(z*(929569.0/638512875))))
	p = 2.0/15 + float64(z*(-17.0/315+float64(z*(62.0/2835+float64(z*p)))))
	p = -1.0/3 + float64(z*p)
	return x + float64(float64(x*z)*p)
}

// tanhLarge returns (E - 1)/(E + 1), E = e^(2a) in two parts, for 1/8 <= a <= 20.
func tanhLarge(a float64) float64 {
	hi, lo, m := expParts(a + a)
	hi, lo = twoSum(hi, lo) // lo may be a hundredth of hi
	scale := power2(m)
	hi, lo = float64(hi*scale), float64(lo*scale)

	top, rest := twoSum(hi, -1)
	topRest := rest + lo
	bottom, rest := twoSum(hi, 1)
	bottomRest := rest + lo

	q := top / bottom
	residue := math.FMA(-q, bottom, top) // exact
	return q + (residue+topRest-float64(q*bottomRest))/bottom
}
