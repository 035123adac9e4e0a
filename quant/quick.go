package quant

import "math"

// quickKind is the loop that rounds to a point fastest.
type quickKind uint8

const (
	quickNone       quickKind = iota // exact reals only
	quickGeneral                     // integer significands, every mode
	quickNearest                     // nearest-even by adding and subtracting a constant
	quickStochastic                  // stochastic by integer addition below the last kept place
	quickDirected                    // other modes by integer addition below the last kept place
	quickNative32                    // nearest-even to binary32 by conversion
	quickNative64                    // nearest-even to binary64: the arithmetic itself
)

// quick rounds numbers held in binary64 to one point of the families Float and Draft
// or of signed fixed point. Such a number is either the exact result or that result
// rounded to odd at 53 bits (see oddFold), whose last bit then stands for the rest;
// the kinds are chosen so that both round alike.
type quick struct {
	point    *Point
	kind     quickKind
	foldable bool // a result rounded to odd at 53 bits rounds as the exact one does
	emin     int
	fraction int
	drop     uint       // fraction bits of binary64 below the last kept place of a normal result
	low      uint64     // binary64 exponent bits of the least normal value
	high     uint64     // and of the binade beyond the largest finite value
	lift     uint64     // added to exponent bits e: 1.5 x 2^(e + drop)
	max      float64    // up to which the loops look no further
	limit    [2]float64 // largest finite magnitude by sign, max or the next one
	uneven   bool       // the two limits differ
	oneZero  bool       // zero has no sign
	floor    float64    // least positive result that is not flushed
	random   uint       // random bits
	centre   uint64     // what Centred adds below the last place of the random bits
	add      [2]uint64  // what quickDirected adds to a magnitude before cutting, by sign
	even     uint64     // 1 where it adds the last kept bit as well

	// What becomes of a finite result beyond max, and of an infinite one, by sign.
	over, inf           [2]float64
	overEvent, infEvent [2]Event
}

// newQuick returns the quick rounding of p; its kind is quickNone where there is
// none.
func newQuick(p *Point) quick {
	q := quick{point: p}
	f, ok := gridOf(p)
	if !ok || !p.Rounding.Source.plain() {
		return q
	}
	l := p.Format.Limits()
	q.oneZero, q.uneven = l.OneZero, l.Lowest != -l.Max
	q.limit = [2]float64{l.Max, -l.Lowest}
	q.emin, q.fraction, q.max = f.emin, f.fraction, l.Max
	for s := range 2 {
		q.over[s], q.overEvent[s] = p.beyond(s == 1, l)
		q.inf[s], q.infEvent[s] = p.roundInfinity(s == 1)
	}
	if f == Binary64 && p.Rounding.Mode == NearestEven && p.policy() == ToInfinity {
		q.kind = quickNative64
		return q
	}
	// The bounds keep every constant below a normal binary64 number.
	top := exponentOf(max(l.Max, math.SmallestNonzeroFloat64))
	if f.emin < -900 || f.emin > 900 || top > 900 || f.fraction > 49 {
		return q
	}
	q.drop = uint(fractionBits64 - f.fraction)
	q.low = uint64(f.emin+bias64) << fractionBits64
	q.high = max(q.low, uint64(top+1+bias64)<<fractionBits64)
	q.lift = uint64(q.drop)<<fractionBits64 | 1<<(fractionBits64-1)
	if f.flush {
		q.floor = l.MinNormal
	}
	q.choose(f, p.Rounding)
	return q
}

// gridOf returns the floating-point format whose magnitudes are those of a point's
// format: signed fixed point that does not wrap is one of subnormal values alone, but
// for its most negative value, which is the next magnitude, and its one zero; a
// draft format is one but for its specials and its one zero.
func gridOf(p *Point) (Float, bool) {
	switch f := p.Format.(type) {
	case Float:
		return f, true
	case Draft:
		return f.grid, true
	case Fixed:
		fraction := f.width - 1
		return Float{fraction: fraction, emin: fraction - f.fraction}, f.lo < 0 && p.policy() != Wrap
	}
	return Float{}, false
}

// choose sets the kind.
func (q *quick) choose(f Float, r Rounding) {
	q.kind, q.foldable = quickGeneral, true
	switch {
	case r.Mode == Stochastic:
		q.random = r.bits()
		// Deciding on r random bits takes bits r and r+1 of the fraction and, in
		// the folded case, one bit more for the rest.
		q.foldable = q.random+2 <= q.drop
		if q.foldable && !f.flush && r.Variant <= Centred {
			q.kind = quickStochastic
			if r.Variant == Centred {
				q.centre = 1 << (q.drop - q.random - 1)
			}
		}
	case f.fraction == 0 || r.Mode == ToOdd:
		// Without fraction bits odd and even are those of the exponent field, not
		// of the significand.
	case r.Mode != NearestEven || f.flush:
		q.kind = quickDirected
		q.setAdd(r.Mode)
	case f.fraction == 23 && f.emin == Binary32.emin && q.max == math.MaxFloat32:
		q.kind = quickNative32
	default:
		q.kind = quickNearest
	}
}

// setAdd chooses what to add below the last kept place so that the carry out of
// the part to be cut rounds the magnitude up where the mode does.
func (q *quick) setAdd(m Mode) {
	half, all := uint64(1)<<(q.drop-1), uint64(1)<<q.drop-1
	switch m {
	case NearestEven:
		q.add, q.even = [2]uint64{half - 1, half - 1}, 1
	case NearestAway:
		q.add = [2]uint64{half, half}
	case Up:
		q.add[0] = all
	case Down:
		q.add[1] = all
	}
}

// oddFold returns x + rest rounded to odd, where x = nearest(x + rest): of the two
// binary64 neighbours of an inexact result the one with an odd significand. Rounding
// it to p <= 51 bits in any direction gives what the exact result gives (S. Boldo,
// G. Melquiond: Emulation of FMA and correctly rounded sums, IEEE TC 57, 2008).
func oddFold(x, rest float64) float64 {
	b := math.Float64bits(x)
	if rest == 0 || b&1 != 0 || rest != rest {
		return x // a NaN must not gain a payload, which a carry could push out
	}
	// x is even: the odd neighbour lies on the side of the rest.
	if math.Signbit(x) == math.Signbit(rest) {
		return math.Float64frombits(b + 1)
	}
	return math.Float64frombits(b - 1)
}

// round returns what q.point.Round returns for the number x stands for.
func (q *quick) round(x float64, word uint32) (float64, Event) {
	b := math.Float64bits(x)
	mag, sign := b&^signBit64, b>>63
	switch {
	case mag > exponentMask64:
		return nan64, BecameNaN
	case mag == exponentMask64:
		return q.inf[sign], q.infEvent[sign]
	case mag == 0 && q.oneZero:
		return 0, NoEvent
	case mag == 0:
		return x, NoEvent
	}
	field, sig := int(mag>>fractionBits64), mag&fractionMask64|hidden64
	if field == 0 {
		field, sig = 1, sig&^hidden64
	}
	exponent := max(field-bias64, q.emin)
	n, br := splitWord(sig, q.drop+uint(exponent-(field-bias64)))
	br.Odd = n&1 != 0
	if q.fraction == 0 && n != 0 {
		br.Odd = (exponent-q.emin+1)&1 != 0
	}
	if q.point.Rounding.away(br, sign != 0, word) {
		n++
	}
	v := float64(n) * powerOfTwo(exponent-q.fraction)
	switch {
	case v > q.limit[sign]:
		return q.over[sign], q.overEvent[sign]
	case (v == 0 || v < q.floor) && q.oneZero:
		return 0, Underflowed
	case v == 0 || v < q.floor:
		return math.Float64frombits(b & signBit64), Underflowed
	}
	return math.Float64frombits(math.Float64bits(v) | b&signBit64), NoEvent
}

// splitWord cuts the last drop bits off sig, as split does for a Real.
func splitWord(sig uint64, drop uint) (n uint64, b Bracket) {
	if drop <= 64 {
		n, b.Fraction = sig>>drop, sig<<(64-drop)
	} else {
		d := min(drop-64, 64)
		b.Fraction, b.Rest = sig>>d, sig<<(64-d) != 0
	}
	b.Exact = b.Fraction == 0 && !b.Rest
	return n, b
}
