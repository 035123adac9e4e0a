package quant

import (
	"math"
	"math/big"
	"sort"
)

// round returns the rounding of x, minus saying that it is -0 or negative.
func (l *listed) round(x *big.Int, minus bool, p Point, word uint32) (float64, Event) {
	i := sort.Search(len(l.at), func(i int) bool { return l.at[i].v.Cmp(x) > 0 }) - 1
	return l.roundAt(i, x, minus, p, word)
}

// roundAt is round for an x at or above value number i and below the next one.
func (l *listed) roundAt(i int, x *big.Int, minus bool, p Point, word uint32) (float64, Event) {
	if i >= 0 && l.at[i].v.Cmp(x) == 0 {
		return l.result(l.at[i], x, minus, p)
	}
	if i < 0 || i == len(l.at)-1 {
		return l.beyond(i < 0, p)
	}
	toward, away := l.at[i], l.at[i+1]
	if x.Sign() < 0 {
		toward, away = away, toward
	}
	switch {
	case l.neverZero && toward.x == 0:
		return away.x, NoEvent
	case l.snaps && within(x, toward.v):
		return l.result(toward, x, minus, p)
	case l.snaps && within(x, away.v), l.goesAway(toward, away, x, p.Rounding, word):
		return l.result(away, x, minus, p)
	}
	return l.result(toward, x, minus, p)
}

// within reports |x - v| <= |v| 2^-51.
func within(x, v *big.Int) bool {
	d := new(big.Int).Sub(x, v)
	return d.Abs(d).Lsh(d, 51).CmpAbs(v) <= 0
}

// goesAway decides between the two neighbours of x.
func (l *listed) goesAway(toward, away entry, x *big.Int, r Rounding, word uint32) bool {
	gap := new(big.Int).Sub(away.v, toward.v)
	over := new(big.Int).Sub(x, toward.v)
	gap.Abs(gap)
	over.Abs(over)
	side := new(big.Int).Lsh(over, 1).Cmp(gap)
	if l.tie != nil && toward.x != 0 {
		side = new(big.Int).Abs(x).Cmp(l.tie(toward.code))
	}
	odd := toward.code&1 == 1
	nearest := side > 0 || side == 0 && odd
	switch r.Mode {
	case NearestEven:
		return nearest
	case NearestAway:
		return side >= 0
	case TowardZero:
		crossing := toward.v.Sign()*away.v.Sign() < 0
		return crossing && nearest
	case Up:
		return x.Sign() >= 0
	case Down:
		return x.Sign() < 0
	case ToOdd:
		return !odd
	}
	bits := uint(r.Bits)
	t, rest := new(big.Int).QuoRem(new(big.Int).Lsh(over, bits), gap, new(big.Int))
	c := rest.Lsh(rest, 1).Cmp(gap)
	if r.Variant == Centred && c >= 0 || r.Variant == CentredEven && (c > 0 || c == 0 && t.Bit(0) == 1) {
		t.Add(t, big.NewInt(1))
	}
	if r.Variant == Equal {
		t.SetUint64(1 << (bits - 1))
	}
	return t.Uint64()+uint64(word)>>(32-bits) >= 1<<bits
}

// result is what becomes of a chosen value.
func (l *listed) result(e entry, x *big.Int, minus bool, p Point) (float64, Event) {
	switch {
	case !e.inside:
		return l.beyond(e.v.Sign() < 0, p)
	case e.v.Sign() != 0:
		return e.x, NoEvent
	case x.Sign() != 0:
		return withSign(0, minus && l.signedZeros), Underflowed
	}
	return withSign(0, minus && l.signedZeros), NoEvent
}

// beyond applies the overflow policy.
func (l *listed) beyond(negative bool, p Point) (float64, Event) {
	policy := p.Overflow
	if policy == FormatDefault {
		policy = l.overflow
	}
	var inside []float64
	for _, e := range []entry{l.at[0], l.at[1], l.at[len(l.at)-2], l.at[len(l.at)-1]} {
		if e.inside {
			inside = append(inside, e.x)
		}
	}
	extreme := inside[len(inside)-1]
	if negative {
		extreme = inside[0]
	}
	m := p.Rounding.Mode
	inward := m == TowardZero || m == ToOdd || m == Up && negative || m == Down && !negative
	switch {
	case policy == Saturate || inward:
		return extreme, Saturated
	case policy == ToInfinity:
		return withSign(math.Inf(1), negative), Overflowed
	default:
		return math.NaN(), Overflowed
	}
}
