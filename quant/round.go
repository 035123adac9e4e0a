package quant

import (
	"fmt"
	"math"
)

// Event is the range event of one rounding; at most one is reported.
type Event uint8

// The events.
const (
	NoEvent     Event = iota
	Overflowed        // a finite value beyond the largest one became infinity or NaN, or wrapped
	Underflowed       // a nonzero value became zero
	Saturated         // a value beyond the largest finite one, infinity included, became it
	BecameNaN         // the result is NaN, and not by overflow
)

// Count adds one event to the tallies. c may be nil.
func (c *Counts) Count(e Event) {
	if c == nil {
		return
	}
	switch e {
	case Overflowed:
		c.Overflow++
	case Underflowed:
		c.Underflow++
	case Saturated:
		c.Saturated++
	case BecameNaN:
		c.NaN++
	}
}

// Wrapper is a format whose codes can wrap around: integers and fixed point.
type Wrapper interface {
	// Wrap returns the value that the exact finite x, its magnitude rounded to
	// the upper neighbour when away, has modulo the range of the format.
	Wrap(x Real, away bool) float64
}

// bits is the number r of random bits, the default filled in.
func (r Rounding) bits() uint {
	if r.Bits == 0 {
		return DefaultRandomBits
	}
	return uint(r.Bits)
}

// away decides whether a magnitude rounds to the upper end of its bracket. The
// top r bits of word are the random number of stochastic rounding.
func (r Rounding) away(b Bracket, neg bool, word uint32) bool {
	if b.Exact {
		return false // a representable value never moves
	}
	switch r.Mode {
	case NearestEven:
		side := b.side()
		return side > 0 || side == 0 && b.Odd
	case NearestAway:
		return b.side() >= 0
	case TowardZero:
		// In the gap around a zero that the format lacks nothing lies toward
		// zero: the nearest value serves.
		return b.Toward < 0 && (b.side() > 0 || b.side() == 0 && b.Odd)
	case Up:
		return !neg
	case Down:
		return neg
	case ToOdd:
		return !b.Odd
	case Stochastic:
		n := r.bits()
		return r.threshold(b, n)+uint64(word>>(32-n)) >= 1<<n
	}
	panic(fmt.Sprintf("quant: unknown rounding mode %d", r.Mode))
}

// threshold is T, the fraction of the gap as an integer of n bits, 0 to 2^n.
func (r Rounding) threshold(b Bracket, n uint) uint64 {
	whole, rest := b.Fraction>>(64-n), b.Fraction<<n // f 2^n = whole + rest 2^-64 + ...
	const half = 1 << 63
	switch r.Variant {
	case Truncated:
		return whole
	case Centred:
		return whole + rest>>63
	case Equal:
		return 1 << (n - 1)
	case CentredEven:
		if rest > half || rest == half && (b.Rest || whole&1 != 0) {
			whole++
		}
		return whole
	}
	panic(fmt.Sprintf("quant: unknown variant %d of stochastic rounding", r.Variant))
}

// inward reports whether overflow in this direction stops at the largest finite
// value whatever the policy: toward zero, to odd, up for negative numbers, down
// for positive ones.
func (r Rounding) inward(neg bool) bool {
	switch r.Mode {
	case TowardZero, ToOdd:
		return true
	case Up:
		return neg
	case Down:
		return !neg
	}
	return false
}

// policy is the overflow policy, the format's default filled in.
func (p *Point) policy() Overflow {
	if p.Overflow == FormatDefault {
		return p.Format.Limits().DefaultOverflow
	}
	return p.Overflow
}

// Round returns R[p](x) for the exact real x, and the range event. The top r
// bits of word are the random number of stochastic rounding. It is the scalar
// reference of every rounding in the project.
func (p *Point) Round(x Real, word uint32) (float64, Event) {
	switch {
	case x.Kind == NotANumber:
		return nan64, BecameNaN
	case x.Kind == Infinite:
		return p.roundInfinity(x.Neg)
	case x.IsZero() && !p.Format.Limits().NoZero:
		return p.zero(x.Neg), NoEvent
	}
	if x.IsZero() {
		x.Neg = false // -0 is 0 where zero is rounded
	}
	b := p.Format.Bracket(x)
	away := p.Rounding.away(b, x.Neg, word)
	v := b.Toward
	if away {
		v = b.Away
	}
	l := p.Format.Limits()
	switch {
	case l.beyond(v, x.Neg):
		if p.policy() == Wrap {
			return p.Format.(Wrapper).Wrap(x, away), Overflowed
		}
		return p.beyond(x.Neg != (v < 0), l)
	case v == 0, l.Flush && v < l.MinNormal:
		return p.zero(x.Neg), Underflowed
	case x.Neg:
		return -v, NoEvent
	}
	return v, NoEvent
}

// beyond reports whether a magnitude with a sign lies outside the finite values.
func (l *Limits) beyond(v float64, neg bool) bool {
	if neg {
		return v > -l.Lowest || v < -l.Max
	}
	return v > l.Max || v < l.Lowest
}

// zero is the zero of a sign, +0 where the format has but one.
func (p *Point) zero(neg bool) float64 {
	if neg && !p.Format.Limits().OneZero {
		return math.Copysign(0, -1)
	}
	return 0
}

// beyond applies the overflow policy, other than wrap, to a finite real whose
// rounding with unbounded exponent lies beyond the largest finite value of its sign.
func (p *Point) beyond(neg bool, l Limits) (float64, Event) {
	policy := p.policy()
	switch {
	case policy == Saturate, p.Rounding.inward(neg):
		return l.extreme(neg), Saturated
	case policy == ToInfinity && l.HasInfinity:
		return math.Inf(sign(neg)), Overflowed
	}
	return nan64, Overflowed
}

// extreme is the finite value of largest magnitude of a sign.
func (l Limits) extreme(neg bool) float64 {
	if neg {
		return l.Lowest
	}
	return l.Max
}

// roundInfinity rounds an infinity, which the policy alone decides: it is not a
// new overflow where it stays infinite.
func (p *Point) roundInfinity(neg bool) (float64, Event) {
	l := p.Format.Limits()
	switch policy := p.policy(); {
	case l.InfinityIsNaN:
		return nan64, BecameNaN
	case policy == Saturate:
		return l.extreme(neg), Saturated
	case policy == ToInfinity && l.HasInfinity:
		return math.Inf(sign(neg)), NoEvent
	}
	return nan64, BecameNaN
}

// Check reports what makes the point unusable: no format, random bits without
// stochastic rounding or out of range, an overflow policy that the format lacks.
//
// A format with shared scales is refused: it rounds operands of products, see
// CheckOperand.
func (p Point) Check() error {
	if _, shared := p.Format.(Blocked); shared {
		return fmt.Errorf("%s: values share scales along an axis: only operands of products have such a format (a sum of codes is one of fixed point, Q32.0)", p.Format)
	}
	return p.CheckOperand()
}

// CheckOperand is Check for points that RoundTensor or RoundChannels serve.
func (p Point) CheckOperand() error {
	if p.Format == nil {
		return fmt.Errorf("point without a format")
	}
	r := p.Rounding
	switch {
	case r.Mode > Stochastic:
		return fmt.Errorf("%s: unknown rounding %s", p.Format, r.Mode)
	case r.Mode != Stochastic && (r.Bits != 0 || r.Variant != Truncated || r.Source != Source{}):
		return fmt.Errorf("%s: random bits, a variant or a source with rounding %s: only stochastic rounding has them", p.Format, r.Mode)
	case r.Bits > 32:
		return fmt.Errorf("%s: %d random bits: 1 to 32 can be used", p.Format, r.Bits)
	case r.Variant > Equal:
		return fmt.Errorf("%s: unknown %s of stochastic rounding", p.Format, r.Variant)
	}
	if err := r.Source.check(r.bits()); err != nil {
		return fmt.Errorf("%s: %w", p.Format, err)
	}
	_, wraps := p.Format.(Wrapper)
	if err := checkOverflow(p.Overflow, p.Format.Limits().HasInfinity, wraps); err != nil {
		return fmt.Errorf("%s: %w", p.Format, err)
	}
	return nil
}

// checkOverflow reports a policy that a format cannot follow.
func checkOverflow(o Overflow, hasInfinity, wraps bool) error {
	switch {
	case o > Wrap:
		return fmt.Errorf("unknown overflow policy %s", o)
	case o == Wrap && !wraps:
		return fmt.Errorf("overflow wrap: only integers and fixed point wrap; use infinity, saturate or nan")
	case o == ToInfinity && !hasInfinity:
		return fmt.Errorf("overflow infinity: the format has no infinity; use saturate or nan")
	}
	return nil
}

// Fits32 reports whether every finite value of the format is a binary32 number,
// so that tensors of float32 hold it.
func Fits32(f Format) bool { return f.Limits().Binary32 }
