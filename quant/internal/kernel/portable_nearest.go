package kernel

import "math"

// near32 rounds x to nearest-even with the quantum of its binade, at least that of
// the binade least: with e the larger of the two, x + 1.5 2^s e is rounded at the
// quantum by the addition itself.
func near32(x, least, grow float32) float32 {
	e := max(math.Float32bits(x)&exponentMask32, math.Float32bits(least))
	c := float32(math.Float32frombits(e) * grow)
	return (x + c) - c
}

// split32 rounds x to nearest-even in its binade: Dekker's splitting.
func split32(x, split float32) float32 {
	c := float32(x * split)
	return c - (c - x)
}

// near64 is near32 in binary64.
func near64(x, least, grow float64) float64 {
	e := max(math.Float64bits(x)&exponentMask64, math.Float64bits(least))
	c := float64(math.Float64frombits(e) * grow)
	return (x + c) - c
}

// split64 is split32 in binary64.
func split64(x, split float64) float64 {
	c := float64(x * split)
	return c - (c - x)
}

const (
	signBit64      = 1 << 63
	exponentMask64 = 0x7ff << 52
)

// fma32 is a b + s rounded once to binary32: the product is exact in binary64, the
// sum is rounded to odd there, and the last rounding then decides as one would.
func fma32(a, b, s float32) float32 {
	p, t := float64(float64(a)*float64(b)), float64(s)
	x := p + t
	if x-x != 0 {
		return float32(x)
	}
	z := x - p
	rest := (p - (x - z)) + (t - z)
	return float32(oddNeighbour64(x, rest))
}

// oddNeighbour64 returns x where the rest is zero or x odd, else the neighbour of x
// on the side of the rest, without branches.
func oddNeighbour64(x, rest float64) float64 {
	b, r := math.Float64bits(x), math.Float64bits(rest)
	inexact := -(r &^ signBit64) >> 63 // 1 where rest != 0
	even := ^b & inexact & 1           // 1 where x moves
	opposite := (b ^ r) >> 63          // 1 where it moves toward zero
	return math.Float64frombits(b + even - 2*(even&opposite))
}

// plusScaled is s + p scale rounded once to binary32, scale a power of two: p scale
// may lie beyond binary32, and binary64 is wide enough for its second rounding to
// change nothing.
func plusScaled(s, p, scale float32) float32 {
	return float32(float64(s) + float64(float64(p)*float64(scale)))
}

// plusOdd32 is s + p rounded to odd in binary32.
func plusOdd32(s, p float32) float32 {
	x := s + p
	z := x - s
	rest := (s - (x - z)) + (p - z)
	b, r := math.Float32bits(x), math.Float32bits(rest)
	inexact := -(r &^ signBit32) >> 31
	even := ^b & inexact & 1
	opposite := (b ^ r) >> 31
	return math.Float32frombits(b + even - 2*(even&opposite))
}

// termBaseline: s = L(s + L(a b)).
func termBaseline[L lanes](_ *numbers[L], s, b []L, _ []uint32, a L, _ uint32) {
	for j, v := range b {
		s[j] += L(a * v)
	}
}

// termFmaChain: s = binary32(s + a b).
func termFmaChain(_ *numbers[float32], s, b []float32, _ []uint32, a float32, _ uint32) {
	for j, v := range b {
		s[j] = fma32(a, v, s[j])
	}
}

// termFmaChain64: s = binary64(s + a b).
func termFmaChain64(_ *numbers[float64], s, b []float64, _ []uint32, a float64, _ uint32) {
	for j, v := range b {
		s[j] = math.FMA(a, v, s[j])
	}
}

// termRounded: s = binary32(s + R(a b)).
func termRounded(c *numbers[float32], s, b []float32, _ []uint32, a float32, _ uint32) {
	least, grow := c.least, c.grow
	for j, v := range b {
		s[j] += near32(float32(a*v), least, grow)
	}
}

// termBoth: s = R(s + R(a b)).
func termBoth(c *numbers[float32], s, b []float32, _ []uint32, a float32, _ uint32) {
	least, grow, split := c.least, c.grow, c.sumSplit
	for j, v := range b {
		s[j] = split32(s[j]+near32(float32(a*v), least, grow), split)
	}
}

// termBothScaled: s = S(s + R(a b)).
func termBothScaled(c *numbers[float32], s, b []float32, _ []uint32, a float32, _ uint32) {
	least, grow, split, rescale := c.least, c.grow, c.sumSplit, c.rescale
	for j, v := range b {
		p := near32(float32(a*v), least, grow)
		s[j] = split32(plusScaled(s[j], p, rescale), split)
	}
}

// termBothCare: s = S(binary32(s + R(a b))).
func termBothCare(c *numbers[float32], s, b []float32, _ []uint32, a float32, _ uint32) {
	for j, v := range b {
		p := near32(float32(a*v), c.least, c.grow)
		s[j] = near32(plusScaled(s[j], p, c.rescale), c.sumLeast, c.sumGrow)
	}
}

// termThrough: s = R(binary32(s + a b)).
func termThrough(c *numbers[float32], s, b []float32, _ []uint32, a float32, _ uint32) {
	least, grow := c.sumLeast, c.sumGrow
	for j, v := range b {
		s[j] = near32(fma32(a, v, s[j]), least, grow)
	}
}

// termThroughFree: s = R(binary32(s + a b)) without inexact subnormals.
func termThroughFree(c *numbers[float32], s, b []float32, _ []uint32, a float32, _ uint32) {
	split := c.sumSplit
	for j, v := range b {
		s[j] = split32(fma32(a, v, s[j]), split)
	}
}

// termProductThrough: s = R(binary32(s + binary32(a b))).
func termProductThrough(c *numbers[float32], s, b []float32, _ []uint32, a float32, _ uint32) {
	least, grow := c.sumLeast, c.sumGrow
	for j, v := range b {
		s[j] = near32(s[j]+float32(a*v), least, grow)
	}
}

// termOdd: s = R(s + binary32(a b)), one rounding of the sum.
func termOdd(c *numbers[float32], s, b []float32, _ []uint32, a float32, _ uint32) {
	for j, v := range b {
		s[j] = near32(plusOdd32(s[j], float32(a*v)), c.sumLeast, c.sumGrow)
	}
}

// termOddRounded: s = S(s + R(a b)), one rounding of the sum.
func termOddRounded(c *numbers[float32], s, b []float32, _ []uint32, a float32, _ uint32) {
	for j, v := range b {
		p := float32(near32(float32(a*v), c.least, c.grow) * c.rescale)
		s[j] = near32(plusOdd32(s[j], p), c.sumLeast, c.sumGrow)
	}
}

// termFused: s = R(s + a b), exact in binary64, as a b is, of two binary32 numbers.
func termFused(c *numbers[float64], s, b []float64, _ []uint32, a float64, _ uint32) {
	least, grow := c.sumLeast, c.sumGrow
	for j, v := range b {
		s[j] = near64(s[j]+float64(a*v), least, grow)
	}
}

// termFusedFree: s = R(s + a b), exact in binary64, without inexact subnormals.
func termFusedFree(c *numbers[float64], s, b []float64, _ []uint32, a float64, _ uint32) {
	split := c.sumSplit
	for j, v := range b {
		s[j] = split64(s[j]+float64(a*v), split)
	}
}
