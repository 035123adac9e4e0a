package quant

// OddSafe reports whether a point rounds a binary64 number that stands for an exact
// one, being that one rounded to odd, as it would round the exact one itself: every
// place at which a decision falls, a value, a tie or a threshold of stochastic
// rounding, then is a binary64 number with an even significand. Callers that form a
// result in binary64 and fold its rest into the last bit may use RoundSlice where it
// is true; elsewhere they owe Point.Round the exact real. It presumes results between
// 2^-900 and 2^1000, zero aside.
func (p *Point) OddSafe() bool {
	const significand = fractionBits64 + 1
	random := 0
	if p.Rounding.Mode == Stochastic {
		random = int(p.Rounding.bits())
	}
	switch f := p.Format.(type) {
	case Float:
		own := *p
		own.Rounding.Source = Source{} // it changes words, not thresholds
		q := newQuick(&own)
		return q.kind != quickNone && q.foldable
	case Draft:
		own := *p
		own.Format, own.Overflow = f.grid, FormatDefault
		return own.OddSafe()
	case Fixed:
		// Decisions are multiples of 2^-(f + random + 1), up to just beyond the range;
		// wrapping has no end.
		return p.policy() != Wrap && f.width+random+3 <= significand
	case Posit:
		// The fraction bits, those of a tie or threshold, and gaps of 15 units.
		return f.width+random+4 <= significand
	case PowerScale:
		return random+4 <= significand
	}
	return false // tables and logarithmic values fill binary64 themselves
}
