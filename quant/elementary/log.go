package elementary

import "math"

// logOffset is the bit pattern of 11/16: arguments are scaled to [11/16, 11/8), so
// that 1 is a border between two intervals of the table well inside.
const logOffset = 0x3FE6000000000000

// Log returns the natural logarithm of x; the error is below 0.52 ulp. Log(0) is
// -Inf, Log(+Inf) is +Inf, Log of a negative number or NaN is NaN.
//
// Method (after Tang 1990): x = 2^m z; the top bits of z choose c, a short
// number near 1/z, and log x = m log 2 - log c + log(1 + r) with r = z c - 1, exact
// in two parts. On both sides of 1 the table has c = 1, so r = z - 1 and nothing
// cancels.
func Log(x float64) float64 {
	switch {
	case x != x || x < 0:
		return math.NaN()
	case x == 0:
		return math.Inf(-1)
	case x > math.MaxFloat64:
		return x
	}
	m := 0
	if x < 0x1p-1022 { // subnormal: make it normal first
		x = float64(x * 0x1p54)
		m = -54
	}
	u := math.Float64bits(x) - logOffset
	m += int(int64(u) >> 52)
	z := math.Float64frombits(math.Float64bits(x) - u&(0xFFF<<52))
	t := &logTable[u>>45&127]

	product := float64(z * t.c)
	rest := math.FMA(z, t.c, -product)
	r := product - 1 // exact: product lies within 1/64 of 1

	// base is exact: ln2Hi and t.hi are multiples of 2^-42, |m| < 2^11.
	base := float64(float64(m)*ln2Hi) + t.hi
	low := float64(float64(m)*ln2Lo) + t.lo + rest
	sum := base + r
	low += (base - sum) + r // |base| > |r| or base = 0: the exact rest of the sum

	// log(1+r) - r by Taylor: the first omitted term is below 2^-66 |r|.
	p := 1.0/7 - float64(r*(1.0/8-float64(r*(1.0/9-float64(r*(1.0/10))))))
	p = 1.0/4 - float64(r*(1.0/5-float64(r*(1.0/6-float64(r*p)))))
	p = 0.5 - float64(r*(1.0/3-float64(r*p)))
	return sum + (low - float64(float64(r*r)*p) - float64(r*rest))
}
