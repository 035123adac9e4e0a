package kernel

import "math"

// mix combines the random word of a row, its low half odd, with that of a column:
// the sum of the products of their low and of their high halves. Only the low 16
// bits are used, which do not depend on the sign that a half is read with.
func mix(row, column uint32) uint32 { return row*column + (row>>16)*(column>>16) }

// carry32 adds the random bits below the last place of x and cuts what is below it:
// the carry is T + U >= 2^r.
func carry32(c *numbers[float32], x float32, u uint32) float32 {
	n := math.Float32bits(x) + u&uint32(c.randomMask)>>c.randomShift
	return math.Float32frombits(n & uint32(c.keep))
}

// fixed32 rounds x as a fixed-point number of its quantum's fractions.
func fixed32(c *numbers[float32], x float32, u uint32) float32 {
	n := math.Float32bits(x)
	e := n & exponentMask32
	scale := max(e, math.Float32bits(c.sumLeast))
	shift := (scale-e)>>23 + uint32(c.baseShift)
	w := (n&fractionMask32 | min(e, 1<<23)) << c.preShift >> shift
	w += u<<16>>c.randomShift | uint32(c.randomHalf)
	size := float32(float32(w>>c.whole)*c.quantum) * math.Float32frombits(scale)
	return math.Float32frombits(math.Float32bits(size) | n&signBit32)
}

// truncatedSum is s + p, p exact, rounded toward zero to binary64.
func truncatedSum(s, p float64) float64 {
	x := s + p
	z := x - s
	rest := (s - (x - z)) + (p - z)
	b, r := math.Float64bits(x), math.Float64bits(rest)
	inexact := -(r &^ signBit64) >> 63
	return math.Float64frombits(b - inexact&((b^r)>>63))
}

// align moves the random bits below the last place of a binary64 number.
func (c *carrying) align(u uint32) uint64 { return uint64(u)<<c.shift&c.mask | c.half }

// watch keeps the greatest magnitude of column j; a NaN stays in the sum it comes
// from.
func (c *carrying) watch(j int, x float64) float64 {
	size := math.Abs(x)
	if size > c.greatest[j] {
		c.greatest[j] = size
	}
	return size
}

// round rounds the exact or truncated x of column j. Below the least binade it is
// lifted by that binade, which puts its quantum at the last place kept.
func (c *carrying) round(j int, x float64, u uint32) float64 {
	lift := 0.0
	if c.watch(j, x) < c.least {
		lift = math.Copysign(c.least, x)
	}
	y := math.Float64bits(truncatedSum(x, lift)) + c.align(u)
	return math.Float64frombits(y&c.keep) - lift
}

// termStochastic: s = S(binary32(s + R(a b))), no sum subnormal and inexact.
func termStochastic(c *numbers[float32], s, b []float32, words []uint32, a float32, word uint32) {
	words = words[:len(b)]
	for j, v := range b {
		p := near32(float32(a*v), c.least, c.grow)
		s[j] = carry32(c, plusScaled(s[j], p, c.rescale), mix(word, words[j]))
	}
}

// termStochasticFused: s = S(binary32(s + a b)), no sum subnormal and inexact.
func termStochasticFused(c *numbers[float32], s, b []float32, words []uint32, a float32, word uint32) {
	words = words[:len(b)]
	for j, v := range b {
		s[j] = carry32(c, fma32(a, v, s[j]), mix(word, words[j]))
	}
}

// termStochasticCare: s = S(binary32(s + a b)).
func termStochasticCare(c *numbers[float32], s, b []float32, words []uint32, a float32, word uint32) {
	words = words[:len(b)]
	for j, v := range b {
		s[j] = fixed32(c, fma32(a, v, s[j]), mix(word, words[j]))
	}
}

// termStochasticProductCare: s = S(binary32(s + R(a b))).
func termStochasticProductCare(c *numbers[float32], s, b []float32, words []uint32, a float32, word uint32) {
	words = words[:len(b)]
	for j, v := range b {
		p := near32(float32(a*v), c.least, c.grow)
		s[j] = fixed32(c, plusScaled(s[j], p, c.rescale), mix(word, words[j]))
	}
}

// truncated32 is the binary64 x, itself cut, cut to binary32.
func truncated32(x float64) float32 {
	y := float32(x)
	if math.Abs(float64(y)) > math.Abs(x) {
		return math.Float32frombits(math.Float32bits(y) - 1)
	}
	return y
}

// termStochasticTruncated: s = S(s + a b), no sum subnormal and inexact.
func termStochasticTruncated(c *numbers[float32], s, b []float32, words []uint32, a float32, word uint32) {
	words = words[:len(b)]
	mask, half, keep := uint32(c.randomMask), uint32(c.randomHalf), uint32(c.keep)
	for j, v := range b {
		x := truncated32(truncatedSum(float64(s[j]), float64(float64(a)*float64(v))))
		c.sum.watch(j, float64(x))
		u := mix(word, words[j])<<16>>c.randomShift&mask | half
		s[j] = math.Float32frombits((math.Float32bits(x) + u) & keep)
	}
}

// termStochasticWide: s = S(s + a b).
func termStochasticWide(c *numbers[float64], s, b []float64, words []uint32, a float64, word uint32) {
	words = words[:len(b)]
	for j, v := range b {
		s[j] = c.sum.round(j, truncatedSum(s[j], float64(a*v)), mix(word, words[j]))
	}
}

// termStochasticProduct: s = S(s + R(a b)), the sum exact in binary64.
func termStochasticProduct(c *numbers[float64], s, b []float64, words []uint32, a float64, word uint32) {
	words = words[:len(b)]
	for j, v := range b {
		x := s[j] + float64(near64(float64(a*v), c.least, c.grow)*c.rescale)
		c.sum.watch(j, x)
		y := math.Float64bits(x) + c.sum.align(mix(word, words[j]))
		s[j] = math.Float64frombits(y & c.sum.keep)
	}
}

// termStochasticBoth: s = S(s + R(a b)), R and S stochastic.
func termStochasticBoth(c *numbers[float64], s, b []float64, words []uint32, a float64, word uint32) {
	words = words[:len(b)]
	for j, v := range b {
		p := c.term.round(j, float64(a*v), mix(c.termWord, c.termWords[j]))
		s[j] = c.sum.round(j, truncatedSum(s[j], p), mix(word, words[j]))
	}
}
