package kernel

import "math"

// Events counts what happened at one rounding point: finite numbers that rounded
// beyond the largest finite value, infinities, and NaN.
type Events struct{ Beyond, Infinite, NaN uint64 }

// caring is a rounding with overflow: the largest finite value, what becomes of a
// finite number beyond it, and of an infinite one.
type caring struct {
	max, over, infinite float32
	events              Events
}

// replace returns y, x rounded, or what the policy puts in its place, and counts.
func (c *caring) replace(x, y float32) float32 {
	if y <= c.max && y >= -c.max {
		return y
	}
	size := c.over
	switch {
	case x != x:
		c.events.NaN++
		return x
	case x-x != 0:
		c.events.Infinite++
		size = c.infinite
	default:
		c.events.Beyond++
	}
	return math.Float32frombits(math.Float32bits(size) | math.Float32bits(x)&signBit32)
}

// plusCarefully is s + p to nearest, or to odd.
func (c *numbers[L]) plusCarefully(s, p float32) float32 {
	x := s + p
	if !c.odd || x-x != 0 {
		return x
	}
	return plusOdd32(s, p)
}

// termCarefulFused: s = R(binary32(s + a b)).
func termCarefulFused(c *numbers[float32], s, b []float32, _ []uint32, a float32, _ uint32) {
	for j, v := range b {
		x := fma32(a, v, s[j])
		s[j] = c.sums32.replace(x, near32(x, c.sumLeast, c.sumGrow))
	}
}

// termCarefulProduct: s = R(s + P(binary32(a b))), P only the overflow of products.
func termCarefulProduct(c *numbers[float32], s, b []float32, _ []uint32, a float32, _ uint32) {
	for j, v := range b {
		p := float32(a * v)
		x := c.plusCarefully(s[j], c.terms32.replace(p, p))
		s[j] = c.sums32.replace(x, near32(x, c.sumLeast, c.sumGrow))
	}
}

// termCarefulRounded: s = R(s + P(a b)).
func termCarefulRounded(c *numbers[float32], s, b []float32, _ []uint32, a float32, _ uint32) {
	for j, v := range b {
		p := float32(a * v)
		x := c.plusCarefully(s[j], c.terms32.replace(p, near32(p, c.least, c.grow)))
		s[j] = c.sums32.replace(x, near32(x, c.sumLeast, c.sumGrow))
	}
}
