package quant

import (
	"math"
	"math/big"
	"sort"
)

// The oracle rounds in exact rationals of math/big, integers over the common
// denominator 2^unit, from a table of all magnitudes of a format, which it builds
// from the definition (-1)^s 2^(e-bias) 1.f. It shares no code with Real, Bracket
// or the arithmetic of Float.
const unit = 1080

type oracle struct {
	format Float
	grid   []*big.Int // magnitudes 0, 1, ... with two binades beyond the largest finite one
	finite int        // number of the largest finite magnitude
}

// newOracle tabulates the magnitudes of the format that spec describes.
func newOracle(f Float, spec FloatSpec) *oracle {
	o := &oracle{format: f}
	bias := 0
	if spec.Exponent > 0 {
		bias = 1<<(spec.Exponent-1) - 1
	}
	if spec.Bias != nil {
		bias = *spec.Bias
	}
	fields := 1 << spec.Exponent
	for field := range fields + 2 {
		for frac := range 1 << spec.Fraction {
			// field 0: 2^(1-bias) 0.f; else 2^(field-bias) 1.f.
			sig, exp := int64(frac), 1-bias-spec.Fraction
			if field > 0 {
				sig, exp = int64(frac)+1<<spec.Fraction, field-bias-spec.Fraction
			}
			v := big.NewInt(sig)
			o.grid = append(o.grid, v.Lsh(v, uint(exp+unit)))
		}
	}
	all := fields<<spec.Fraction - 1
	switch spec.Top {
	case TopIEEE:
		o.finite = (fields-1)<<spec.Fraction - 1
	case TopNaNOnly:
		o.finite = all - 1
	case TopFinite:
		o.finite = all
	}
	return o
}

// scaledInt returns a finite x in units of 2^-unit.
func scaledInt(x float64) *big.Int {
	m, e := math.Frexp(x)
	v := big.NewInt(int64(math.Ldexp(m, 53)))
	if s := e - 53 + unit; s >= 0 {
		return v.Lsh(v, uint(s))
	}
	return v.Rsh(v, uint(53-unit-e)) // a subnormal: the bits that go are zero
}

// float returns a value of the grid.
func (o *oracle) float(n int) float64 {
	f := new(big.Float).SetInt(o.grid[n])
	f.SetMantExp(f, -unit)
	v, _ := f.Float64()
	return v
}

// place is a magnitude's place: the number of the largest grid value at most it,
// what it has beyond that value, and the gap to the next.
type place struct {
	n         int
	over, gap *big.Int
}

// place finds the place of a magnitude in units of 2^-unit.
func (o *oracle) place(x *big.Int) place {
	n := sort.Search(len(o.grid), func(i int) bool { return o.grid[i].Cmp(x) > 0 }) - 1
	p := place{n: n, over: new(big.Int).Sub(x, o.grid[n])}
	if n < len(o.grid)-1 {
		p.gap = new(big.Int).Sub(o.grid[n+1], o.grid[n])
	}
	return p
}

// round rounds a magnitude with a sign.
func (o *oracle) round(x place, negative bool, p Point, word uint32) (float64, Event) {
	n := x.n
	switch {
	case n == 0 && x.over.Sign() == 0:
		return withSign(0, negative), NoEvent
	case x.gap == nil:
		return o.beyond(negative, p) // far beyond: all directions agree there
	case x.over.Sign() != 0 && awayFromZero(x, negative, p.Rounding, word):
		n++
	}
	if n > o.finite {
		return o.beyond(negative, p)
	}
	v := o.float(n)
	if v == 0 || o.format.flush && n < 1<<o.format.fraction {
		return withSign(0, negative), Underflowed
	}
	return withSign(v, negative), NoEvent
}

// awayFromZero decides for the fraction over/gap above magnitude number n.
func awayFromZero(x place, negative bool, r Rounding, word uint32) bool {
	half := new(big.Int).Lsh(x.over, 1).Cmp(x.gap)
	odd := x.n%2 == 1
	switch r.Mode {
	case NearestEven:
		return half > 0 || half == 0 && odd
	case NearestAway:
		return half >= 0
	case TowardZero:
		return false
	case Up:
		return !negative
	case Down:
		return negative
	case ToOdd:
		return !odd
	}
	// T = floor(f 2^bits), f 2^bits = t + rest/gap.
	bits := uint(r.Bits)
	t, rest := new(big.Int).QuoRem(new(big.Int).Lsh(x.over, bits), x.gap, new(big.Int))
	c := rest.Lsh(rest, 1).Cmp(x.gap)
	if r.Variant == Centred && c >= 0 || r.Variant == CentredEven && (c > 0 || c == 0 && t.Bit(0) == 1) {
		t.Add(t, big.NewInt(1))
	}
	return t.Uint64()+uint64(word)>>(32-bits) >= 1<<bits
}

// beyond applies the overflow policy.
func (o *oracle) beyond(negative bool, p Point) (float64, Event) {
	policy := p.Overflow
	if policy == FormatDefault {
		policy = o.format.overflow
	}
	m := p.Rounding.Mode
	inward := m == TowardZero || m == ToOdd || m == Up && negative || m == Down && !negative
	switch {
	case policy == Saturate || inward:
		return withSign(o.float(o.finite), negative), Saturated
	case policy == ToInfinity:
		return withSign(math.Inf(1), negative), Overflowed
	default:
		return math.NaN(), Overflowed
	}
}

func withSign(x float64, negative bool) float64 {
	if negative {
		return math.Copysign(x, -1)
	}
	return x
}

// same reports equal bits, any NaN being like any other.
func same(a, b float64) bool {
	return math.Float64bits(a) == math.Float64bits(b) || a != a && b != b
}
