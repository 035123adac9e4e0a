package oracle

import (
	"fmt"
	"math"
	"math/big"
)

// Rounding is a rounding in words.
type Rounding struct {
	Mode    string // nearest-even, nearest-away, toward-zero, up, down, to-odd, stochastic
	Bits    uint   // random bits of stochastic rounding
	Variant string // truncated (or ""), centred, centred-even
}

// The events of a rounding, by their words.
const (
	NoEvent    = ""
	Overflow   = "overflow"  // a finite value beyond the range became infinite or NaN
	Underflow  = "underflow" // a value other than zero became zero
	Saturation = "saturated" // a value beyond the range became its end
)

// Round rounds the exact x to the format. minusZero gives a zero x its sign,
// overflow is a policy or "" for the format's own, and draw is the random number
// U of stochastic rounding, 0 to 2^Bits - 1.
func (f *Format) Round(x *big.Rat, minusZero bool, r Rounding, overflow string, draw uint64) (float64, string) {
	if x.Sign() == 0 {
		return f.zero(minusZero), NoEvent
	}
	negative := x.Sign() < 0
	g := f.gaps.gap(x, negative)
	v := g.end(g.over.Sign() != 0 && g.goesAway(r, negative, draw))
	end := f.most
	if negative {
		end = negated(f.lowest)
	}
	switch {
	case v.Cmp(end) > 0 && f.wraps(overflow):
		if negative {
			v = negated(v)
		}
		y, _ := f.wrap(v).Float64()
		return y, Overflow
	case v.Cmp(end) > 0:
		return f.beyond(negative, r, overflow)
	case v.Sign() == 0, f.Normal != nil && v.Cmp(f.Normal) < 0:
		return f.zero(negative), Underflow
	}
	y, exact := v.Float64()
	if !exact {
		panic("oracle: a value that binary64 does not hold")
	}
	if negative {
		y = -y
	}
	return y, NoEvent
}

// Neighbours returns the magnitudes toward and away from zero next to x, which is
// not zero, as if the range had no bound, and the exact fraction of the gap.
func (f *Format) Neighbours(x *big.Rat) (toward, away, fraction *big.Rat) {
	g := f.gaps.gap(x, x.Sign() < 0)
	return g.end(false), g.end(true), new(big.Rat).SetFrac(g.over, g.width)
}

// Chance is the exact probability that stochastic rounding moves x != 0 to its
// neighbour away from zero: T/2^Bits, or the fraction of the gap itself, the
// ideal, where Bits is 0.
func (f *Format) Chance(x *big.Rat, r Rounding) *big.Rat {
	g := f.gaps.gap(x, x.Sign() < 0)
	if r.Bits == 0 || g.over.Sign() == 0 {
		return new(big.Rat).SetFrac(g.over, g.width)
	}
	return new(big.Rat).SetFrac(g.threshold(r), new(big.Int).Lsh(big.NewInt(1), r.Bits))
}

// goesAway decides for a magnitude strictly inside its gap.
func (g gap) goesAway(r Rounding, negative bool, draw uint64) bool {
	half := new(big.Int).Lsh(g.over, 1).Cmp(g.width)
	if g.ownTie {
		half = g.side
	}
	switch r.Mode {
	case "nearest-even":
		return half > 0 || half == 0 && g.odd
	case "nearest-away":
		return half >= 0
	case "toward-zero":
		return false
	case "up":
		return !negative
	case "down":
		return negative
	case "to-odd":
		return !g.odd
	case "stochastic":
		sum := g.threshold(r)
		sum.Add(sum, new(big.Int).SetUint64(draw))
		return sum.Cmp(new(big.Int).Lsh(big.NewInt(1), r.Bits)) >= 0
	}
	panic(fmt.Sprintf("oracle: unknown rounding %q", r.Mode))
}

// threshold is T: the fraction of the gap times 2^Bits as an integer, cut off, to
// the nearest with halves up, or to the nearest with halves to even.
func (g gap) threshold(r Rounding) *big.Int {
	t, rest := new(big.Int).QuoRem(new(big.Int).Lsh(g.over, r.Bits), g.width, new(big.Int))
	half := rest.Lsh(rest, 1).Cmp(g.width)
	switch r.Variant {
	case "", "truncated":
	case "centred":
		if half >= 0 {
			t.Add(t, big.NewInt(1))
		}
	case "centred-even":
		if half > 0 || half == 0 && t.Bit(0) == 1 {
			t.Add(t, big.NewInt(1))
		}
	default:
		panic(fmt.Sprintf("oracle: unknown variant %q of stochastic rounding", r.Variant))
	}
	return t
}

// wraps reports whether results beyond the range wrap around.
func (f *Format) wraps(overflow string) bool {
	return f.wrap != nil && (overflow == "wrap" || f.Overflow == "wrap" && (overflow == "" || overflow == "default"))
}

// zero is the zero of a sign.
func (f *Format) zero(negative bool) float64 {
	if negative && !f.OneZero {
		return math.Copysign(0, -1)
	}
	return 0
}

// beyond is what becomes of a result beyond the range.
func (f *Format) beyond(negative bool, r Rounding, overflow string) (float64, string) {
	if overflow == "" || overflow == "default" {
		overflow = f.Overflow
	}
	inward := r.Mode == "toward-zero" || r.Mode == "to-odd" || r.Mode == "up" && negative || r.Mode == "down" && !negative
	switch {
	case overflow == "saturate" || inward:
		end := f.most
		if negative {
			end = f.lowest
		}
		y, _ := end.Float64()
		return y, Saturation
	case overflow == "infinity" && f.Infinity:
		if negative {
			return math.Inf(-1), Overflow
		}
		return math.Inf(1), Overflow
	case overflow == "wrap":
		panic("oracle: this format does not wrap")
	}
	return math.NaN(), Overflow
}
