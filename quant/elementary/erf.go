package elementary

import "math"

// The table of the error function has a centre every 1/16 from erfFirst on.
const (
	erfFirst   = 0.5
	erfStep    = 1.0 / 16
	erfPerUnit = 16
	rootPiHi   = twoOverRootPiHi / 2 // 1/sqrt(pi)
	rootPiLo   = twoOverRootPiLo / 2
)

// Erf returns the error function 2/sqrt(pi) times the integral of exp(-t^2) from 0
// to x; the error is below 0.7 ulp. Erf(-0) is -0.
//
// Method: below 1/2 the Taylor series at 0; above, the Taylor series at the
// nearest centre of a table, whose derivatives are those of a Gaussian.
func Erf(x float64) float64 {
	a := math.Abs(x)
	switch {
	case x != x:
		return math.NaN()
	case x == 0:
		return x
	case a < erfFirst:
		lead, rest := erfSmall(x)
		return lead + rest
	case a >= 6: // 1 - erf 6 < 2^-55
		return math.Copysign(1, x)
	}
	t, lead, rest := erfNear(a)
	return math.Copysign(joined(t.erfHi, lead, t.erfLo+rest), x)
}

// Erfc returns 1 - Erf(x) without its cancellation; the error is below 0.9 ulp
// where the result is normal, so that tails keep their leading figures. Erfc(-Inf)
// is 2, Erfc(+Inf) is 0.
//
// Method: the table of Erf up to 7, beyond it the asymptotic series.
func Erfc(x float64) float64 {
	switch {
	case x != x:
		return math.NaN()
	case x > 28: // e^(-28^2) < 2^-1075
		return 0
	case x >= 7:
		return erfcTail(x)
	case x >= erfFirst:
		t, lead, rest := erfNear(x)
		return joined(t.erfcHi, -lead, t.erfcLo-rest)
	case x > -erfFirst:
		lead, rest := erfSmall(x)
		return joined(1, -lead, -rest)
	case x <= -6:
		return 2
	}
	t, lead, rest := erfNear(-x)
	whole, left := twoSum(1, t.erfHi)
	return joined(whole, lead, left+t.erfLo+rest)
}

// joined returns a + b + rest, rest far below the two.
func joined(a, b, rest float64) float64 {
	s, left := twoSum(a, b)
	return s + (left + rest)
}

// erfSmall sums the Taylor series, its first term apart, for |x| < 1/2; the first omitted term is below
// 2^-64 of x.
func erfSmall(x float64) (lead, rest float64) {
	z := float64(x * x)
	// (sum of (-z)^k / (k! (2k+1)) - 1)/z, k from 1 to 14.
	p := 1.0 / 2528170444800
	p = -1.0/168129561600 + float64(z*p)
	p = 1.0/11975040000 + float64(z*p)
	p = -1.0/918086400 + float64(z*p)
	p = 1.0/76204800 + float64(z*p)
	p = -1.0/6894720 + float64(z*p)
	p = 1.0/685440 + float64(z*p)
	p = -1.0/75600 + float64(z*p)
	p = 1.0/9360 + float64(z*p)
	p = -1.0/1320 + float64(z*p)
	p = 1.0/216 + float64(z*p)
	p = -1.0/42 + float64(z*p)
	p = 1.0/10 + float64(z*p)
	p = -1.0/3 + float64(z*p)
	lead = float64(x * twoOverRootPiHi)
	rest = math.FMA(x, twoOverRootPiHi, -lead) + float64(x*twoOverRootPiLo)
	return lead, rest + float64(lead*float64(z*p))
}

// erfNear returns the table's centre c next to a, for 1/2 <= a < 7, and erf(a) -
// erf(c) = erf'(c) times the sum of g_k h^(k+1)/(k+1), h = a - c, as its first term and a rest, where the g_k are
// the Taylor coefficients of exp(-2 c h - h^2): g_0 = 1, g_1 = -2 c, (k+1) g_(k+1) =
// -2 (c g_k + g_(k-1)). |h| is at most 1/32; the first omitted term is below
// 2^-60 of what it is added to, for c = 7 as well.
func erfNear(a float64) (t *erfRow, lead, rest float64) {
	i := int(math.Floor(float64((a-erfFirst)*erfPerUnit) + 0.5))
	t = &erfTable[i]
	c := erfFirst + float64(float64(i)*erfStep) // exact
	h := a - c                                  // exact
	before, g, power := 1.0, float64(-2*c), float64(h*h)
	sum := float64(0.5 * float64(g*power)) // from the second term on
	for k := 1; k < 17; k++ {
		before, g = g, float64(float64(-2*(float64(c*g)+before))*reciprocals[k+1])
		power = float64(power * h)
		sum += float64(float64(g*power) * reciprocals[k+2])
	}
	lead = float64(t.slope * h)
	rest = math.FMA(t.slope, h, -lead) + float64(t.slopeRest*h)
	return t, lead, rest + float64(t.slope*sum)
}

// erfRow is the error function at a centre, its complement, each in two parts,
// and its derivative in two parts.
type erfRow struct{ erfHi, erfLo, erfcHi, erfcLo, slope, slopeRest float64 }

// reciprocals of whole numbers; the first stands for none.
var reciprocals = [19]float64{
	0, 1, 1.0 / 2, 1.0 / 3, 1.0 / 4, 1.0 / 5, 1.0 / 6, 1.0 / 7, 1.0 / 8, 1.0 / 9, 1.0 / 10,
	1.0 / 11, 1.0 / 12, 1.0 / 13, 1.0 / 14, 1.0 / 15, 1.0 / 16, 1.0 / 17, 1.0 / 18,
}

// erfcTail sums exp(-x^2)/(x sqrt(pi)) (1 - 1/(2 x^2) + 1 3/(2 x^2)^2 - ...) for x >=
// 7: the terms fall below 2^-60 before they grow (at the 49th).
func erfcTail(x float64) float64 {
	square := float64(x * x)
	rest := math.FMA(x, x, -square)
	t := float64(0.5 / square)
	term, sum := 1.0, 0.0
	for k := 1.0; math.Abs(term) > 0x1p-60; k += 2 {
		term = float64(-term * float64(k*t))
		sum += term
	}
	hi, lo, m := expParts(max(-square, expUnderflow))
	// exp(-rest) = 1 - rest within 2^-88; residue: what the quotient left over.
	hi, lo = twoSum(hi, lo)
	factor := rootPiHi / x
	whole := float64(hi * factor)
	tail := math.FMA(hi, factor, -whole) + float64(factor*lo) + float64(whole*(sum-rest-float64(sum*rest)))
	residue := float64(-math.FMA(factor, x, -rootPiHi)) + rootPiLo
	tail += float64(hi*residue) / x
	half := m >> 1
	return float64(float64((whole+tail)*power2(half)) * power2(m-half))
}
