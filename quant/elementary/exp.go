package elementary

import "math"

// Where e^x leaves binary64 for certain; the scaling decides in between.
const (
	expOverflow  = 710.0  // e^709.79 > 2^1024
	expUnderflow = -746.0 // e^-745.14 < 2^-1075
)

// Exp returns e^x; the error is below 0.52 ulp, below 0.77 ulp where the result
// is subnormal. Exp(-Inf) is 0, Exp(NaN) is NaN.
func Exp(x float64) float64 {
	switch {
	case x != x:
		return math.NaN()
	case x > expOverflow:
		return math.Inf(1)
	case x < expUnderflow:
		return 0
	}
	hi, lo, m := expParts(x)
	// Two steps, since 2^m itself may be no normal number. The first is exact.
	half := m >> 1
	return float64(float64((hi+lo)*power2(half)) * power2(m-half))
}

// expParts returns hi + lo and m with e^x = (hi + lo) 2^m, relative error below
// 2^-59, hi between 0.98 and 2. It needs expUnderflow <= x <= expOverflow.
//
// Method (Tang 1989): x = (32 m + j) ln2/32 + r with |r| <= ln2/64, so that e^x =
// 2^m 2^(j/32) e^r, the second factor from a table in two parts, the third a
// polynomial.
func expParts(x float64) (hi, lo float64, m int) {
	k := math.Floor(float64(x*expPerStep) + 0.5)
	// k has 16 bits and expStepHi 36, so their product and the difference are exact.
	rh := x - float64(k*expStepHi)
	rl := float64(k * expStepLo)
	r := rh - rl
	rl = (rh - r) - rl

	n := int(k)
	t := &expTable[n&31]
	// e^r - 1 by Taylor: the first omitted term is below 2^-71.
	p := 1.0/120 + float64(r*(1.0/720+float64(r*(1.0/5040))))
	p = 0.5 + float64(r*(1.0/6+float64(r*(1.0/24+float64(r*p)))))
	p = r + (rl + float64(float64(r*r)*p))
	return t[0], t[1] + float64(t[0]*p), n >> 5
}

// power2 returns 2^n for -1022 <= n <= 1023.
func power2(n int) float64 { return math.Float64frombits(uint64(n+1023) << 52) }
