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

// align64 moves the random bits below the last place of a binary64 number.
func align64(c *numbers[float64], u uint32) uint64 {
	return uint64(u)<<c.randomShift&c.randomMask | c.randomHalf
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

// termStochasticWide: s = S(s + a b). Below the least binade the truncated sum is
// lifted by that binade, which puts its quantum at the last place kept.
func termStochasticWide(c *numbers[float64], s, b []float64, words []uint32, a float64, word uint32) {
	words = words[:len(b)]
	for j, v := range b {
		x := truncatedSum(s[j], float64(a*v))
		size := math.Abs(x)
		c.greatest[j] = greater(c.greatest[j], size)
		lift := 0.0
		if size < c.sumLeast {
			lift = math.Copysign(c.sumLeast, x)
		}
		y := math.Float64bits(truncatedSum(x, lift)) + align64(c, mix(word, words[j]))
		s[j] = math.Float64frombits(y&c.keep) - lift
	}
}

// termStochasticProduct: s = S(s + R(a b)), the sum exact in binary64.
func termStochasticProduct(c *numbers[float64], s, b []float64, words []uint32, a float64, word uint32) {
	words = words[:len(b)]
	for j, v := range b {
		x := s[j] + float64(near64(float64(a*v), c.least, c.grow)*c.rescale)
		c.greatest[j] = greater(c.greatest[j], math.Abs(x))
		y := math.Float64bits(x) + align64(c, mix(word, words[j]))
		s[j] = math.Float64frombits(y & c.keep)
	}
}

// greater is the larger of two magnitudes; a NaN stays in the sum it comes from.
func greater(x, y float64) float64 {
	if y > x {
		return y
	}
	return x
}
