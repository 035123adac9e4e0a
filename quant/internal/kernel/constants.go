package kernel

import "math"

// bits returns x in every lane.
func (l lane) bits(x float64) vector {
	if l == single {
		return bits32(math.Float32bits(float32(x)))
	}
	return bits64(math.Float64bits(x))
}

// power returns factor 2^e in every lane.
func (l lane) power(factor float64, e int) vector { return l.bits(math.Ldexp(factor, e)) }

// word returns the integer b in every lane.
func (l lane) word(b uint64) vector {
	if l == single {
		return bits32(uint32(b))
	}
	return bits64(b)
}

// masks returns constants without any grid: sums of the lane's own format.
func (l lane) masks() Constants {
	sign, exponent := uint64(1)<<63, uint64(0x7ff)<<52
	if l == single {
		sign, exponent = 1<<31, exponentMask32
	}
	return Constants{
		ExponentMask: l.word(exponent), SignMask: l.word(sign), MagnitudeMask: l.word(sign - 1),
		Scale: l.bits(1), Unscale: l.bits(1), Ones: l.word(1), Limit: l.bits(math.Inf(1)),
		TermLimit: l.bits(math.Inf(1)),
	}
}

// product sets the constants of products rounded to nearest-even to g, and the
// factor from their scale to that of the sums.
func (c *Constants) product(l lane, g Grid, scale, sumScale int) {
	c.Least = l.power(1, g.MinExponent+scale)
	c.Grow = l.power(1.5, l.fraction-g.Fraction)
	c.Rescale = l.power(1, sumScale-scale)
}

// nearest sets the constants of sums rounded to nearest-even to g.
func (c *Constants) nearest(l lane, g Grid, scale int) {
	spare := l.fraction - g.Fraction
	c.SumLeast = l.power(1, g.MinExponent+scale)
	c.SumGrow = l.power(1.5, spare)
	c.SumSplit = l.bits(math.Ldexp(1, spare) + 1)
	c.Scale, c.Unscale = l.power(1, scale), l.power(1, -scale)
}

// carry sets the constants of sums rounded stochastically by a carry into the last
// place: the random bits moved there, and the bits kept.
func (c *Constants) carry(l lane, s Sum, scale int) {
	spare := l.fraction - s.Grid.Fraction
	c.SumLeast = l.power(1, s.Grid.MinExponent+scale)
	c.Scale, c.Unscale = l.power(1, scale), l.power(1, -scale)
	c.Keep = l.word(^uint64(0) << spare)
	if l == single {
		// Random bits beyond the spare ones meet a fraction that ends before them.
		unused := 16 - min(s.Bits, spare)
		c.RandomMask = l.word(0xffff &^ (1<<unused - 1))
		c.RandomShift = l.word(uint64(16 - spare))
		return
	}
	c.Limit = l.bits(s.Grid.Max)
	c.RandomShift = l.word(uint64(spare - 16))
	c.RandomMask = l.word((1<<s.Bits - 1) << (spare - s.Bits))
	if s.Centred {
		c.RandomHalf = l.word(1 << (spare - s.Bits - 1))
	} else {
		c.RandomHalf = l.word(0)
	}
}

// cut sets the constants of sums cut to binary32 and rounded stochastically by a carry:
// random bits below the last place, the half of centred thresholds below them.
func (c *Constants) cut(s Sum) {
	spare := single.fraction - s.Grid.Fraction
	c.Keep = single.word(^uint64(0) << spare)
	c.Limit = single.bits(s.Grid.Max)
	c.RandomShift = single.word(uint64(32 - spare))
	c.RandomMask = single.word((1<<s.Bits - 1) << (spare - s.Bits))
	c.RandomHalf = single.word(0)
	if s.Centred {
		c.RandomHalf = single.word(1 << (spare - s.Bits - 1))
	}
}

// carryTerms sets the constants of products rounded stochastically in binary64 lanes.
func (c *Constants) carryTerms(a *Arithmetic) {
	var t Constants
	t.carry(double, Sum{Grid: a.Grid, Bits: a.Bits, Centred: a.Centred}, 0)
	c.Least, c.TermLimit = t.SumLeast, t.Limit
	c.TermKeep, c.TermMask, c.TermShift, c.TermHalf = t.Keep, t.RandomMask, t.RandomShift, t.RandomHalf
}

// fixed sets the constants of sums rounded stochastically as fixed-point numbers in
// binary32 lanes, with r fraction bits, and one more where the threshold is centred.
func (c *Constants) fixed(s Sum, scale int) {
	g := s.Grid
	spare, places := single.fraction-g.Fraction, s.Bits
	half := uint32(0)
	if s.Centred {
		places, half = places+1, 1
	}
	c.SumLeast = single.power(1, g.MinExponent+scale)
	c.Scale, c.Unscale = single.power(1, scale), single.power(1, -scale)
	c.RandomShift = bits32(uint32(32 - places))
	c.RandomHalf = bits32(half)
	c.Fraction, c.Implicit = bits32(fractionMask32), bits32(1<<23)
	c.PreShift = bits32(uint32(max(0, places-spare)))
	c.BaseShift = bits32(uint32(max(0, spare-places)))
	c.WholeShift = bits32(uint32(places))
	c.Quantum = single.power(1, -g.Fraction)
}
