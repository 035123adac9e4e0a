package quant

import (
	"math"
	"math/big"
)

// The oracle rounds in exact rationals (math/big.Rat) from a table of all the
// values of a format, which it builds from the definition (-1)^s 2^(e-bias) 1.f.
// It shares no code with Real, Bracket or Float's arithmetic.
type oracle struct {
	format Float
	grid   []*big.Rat // magnitudes 0, 1, ... with one binade beyond the largest finite one
	finite int        // number of the largest finite magnitude
	probe  map[float64]*placed
}

// placed is a magnitude and where it lies in the grid.
type placed struct {
	x *big.Rat
	n int      // number of the largest magnitude at most x
	f *big.Rat // fraction of the gap above it, nil where x is a magnitude of the grid
}

// exact returns x as a rational with its place, computed once.
func (o *oracle) exact(x float64) *placed {
	p, ok := o.probe[x]
	if !ok {
		p = o.place(new(big.Rat).SetFloat64(x))
		o.probe[x] = p
	}
	return p
}

// place finds the place of a magnitude.
func (o *oracle) place(x *big.Rat) *placed {
	p := &placed{x: x, n: o.below(x)}
	if p.n < len(o.grid)-1 && o.grid[p.n].Cmp(x) != 0 {
		gap := new(big.Rat).Sub(o.grid[p.n+1], o.grid[p.n])
		p.f = new(big.Rat).Sub(x, o.grid[p.n])
		p.f.Quo(p.f, gap)
	}
	return p
}

// newOracle tabulates the magnitudes of the format that spec describes.
func newOracle(f Float, spec FloatSpec) *oracle {
	o := &oracle{format: f, probe: map[float64]*placed{}}
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
			o.grid = append(o.grid, timesPower(big.NewRat(sig, 1), exp))
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

// timesPower returns r 2^exp.
func timesPower(r *big.Rat, exp int) *big.Rat {
	p := new(big.Int).Lsh(big.NewInt(1), uint(max(exp, -exp)))
	f := new(big.Rat).SetInt(p)
	if exp < 0 {
		f.Inv(f)
	}
	return new(big.Rat).Mul(r, f)
}

// below returns the number of the largest magnitude of the grid that is at most x.
func (o *oracle) below(x *big.Rat) int {
	lo, hi := 0, len(o.grid)-1
	for lo < hi {
		mid := (lo + hi + 1) / 2
		if o.grid[mid].Cmp(x) <= 0 {
			lo = mid
		} else {
			hi = mid - 1
		}
	}
	return lo
}

// round rounds a magnitude with a sign.
func (o *oracle) round(x *placed, negative bool, p Point, word uint32) (float64, Event) {
	if x.x.Sign() == 0 {
		return withSign(0, negative), NoEvent
	}
	n := x.n
	if n == len(o.grid)-1 {
		return o.beyond(negative, p) // far beyond: all directions agree there
	}
	if x.f != nil && awayFromZero(x.f, n, negative, p.Rounding, word) {
		n++
	}
	if n > o.finite {
		return o.beyond(negative, p)
	}
	v, _ := o.grid[n].Float64()
	if v == 0 || o.format.flush && n < 1<<o.format.fraction {
		return withSign(0, negative), Underflowed
	}
	return withSign(v, negative), NoEvent
}

// awayFromZero decides for the fraction f of the gap above magnitude number n.
func awayFromZero(f *big.Rat, n int, negative bool, r Rounding, word uint32) bool {
	half := f.Cmp(big.NewRat(1, 2))
	switch r.Mode {
	case NearestEven:
		return half > 0 || half == 0 && n%2 == 1
	case NearestAway:
		return half >= 0
	case TowardZero:
		return false
	case Up:
		return !negative
	case Down:
		return negative
	case ToOdd:
		return n%2 == 0
	}
	bits := uint(r.Bits)
	t := timesPower(f, int(bits))
	if r.Variant == Centred {
		t.Add(t, big.NewRat(1, 2))
	}
	whole := new(big.Int).Quo(t.Num(), t.Denom())
	if r.Variant == CentredEven {
		rest := new(big.Rat).Sub(t, new(big.Rat).SetInt(whole))
		c := rest.Cmp(big.NewRat(1, 2))
		if c > 0 || c == 0 && whole.Bit(0) == 1 {
			whole.Add(whole, big.NewInt(1))
		}
	}
	u := uint64(word) >> (32 - bits)
	return whole.Uint64()+u >= 1<<bits
}

// beyond applies the overflow policy.
func (o *oracle) beyond(negative bool, p Point) (float64, Event) {
	policy := p.Overflow
	if policy == FormatDefault {
		policy = o.format.overflow
	}
	largest, _ := o.grid[o.finite].Float64()
	m := p.Rounding.Mode
	inward := m == TowardZero || m == ToOdd || m == Up && negative || m == Down && !negative
	switch {
	case policy == Saturate || inward:
		return withSign(largest, negative), Saturated
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
