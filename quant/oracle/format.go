package oracle

import (
	"fmt"
	"math"
	"math/big"
	"sort"
)

// Format is a set of numbers with what becomes of results beyond it.
type Format struct {
	Infinity bool   // it has infinities
	NaN      bool   // it has a code for NaN
	OneZero  bool   // zero has no sign
	Overflow string // policy where none is asked for: infinity, saturate or nan
	// Normal is the least normal value of a format that flushes: smaller results
	// become zero. nil: all values are kept.
	Normal *big.Rat

	gaps     gapper
	most     *big.Rat // largest finite value
	lowest   *big.Rat // most negative one
	width    int      // bits of a code
	decode   func(code uint64) float64
	emptyNaN uint64 // code of the canonical NaN
	// wrap brings a signed multiple of the step into the range; nil: nothing wraps.
	wrap func(v *big.Rat) *big.Rat
}

// gap is where a magnitude lies: toward <= |x| < away, |x| = toward + (over/width)
// (away - toward). Where toward is nil the two are n 2^q and (n+1) 2^q.
type gap struct {
	toward, away *big.Rat
	n            *big.Int
	q            int
	over, width  *big.Int
	odd          bool // the code of toward is odd
	// Where ownTie is set, nearest compares with a tie of the format's own: side is
	// -1, 0, 1 as the magnitude is below, at or above it.
	ownTie bool
	side   int
}

// gapper finds the neighbours of a magnitude above zero on the side of a sign, as
// if the range had no bound.
type gapper interface {
	gap(x *big.Rat, negative bool) gap
}

// Split describes a floating-point format of sign, Exponent and Fraction bits:
// value (-1)^s 2^(e-Bias) 1.f, and 2^(1-Bias) 0.f for e = 0.
type Split struct {
	Exponent, Fraction, Bias int
	// Top says what the codes of the largest exponent stand for: "ieee" (infinity
	// and NaN), "nan" (numbers, NaN at all ones), "finite", or "infinity" (numbers,
	// infinity at all ones, one zero and NaN in the place of -0: the IEEE P3109 draft).
	Top      string
	Flush    bool
	Overflow string // "": infinity for the layout ieee, else saturate
}

// Bias is the bias of IEEE 754 for a number of exponent bits.
func Bias(exponent int) int { return 1<<(exponent-1) - 1 }

// NewSplit returns the format that s describes.
func NewSplit(s Split) (*Format, error) {
	all := uint64(1)<<(s.Exponent+s.Fraction) - 1
	last := all
	f := &Format{Overflow: s.Overflow, width: 1 + s.Exponent + s.Fraction, emptyNaN: all}
	switch s.Top {
	case "ieee":
		last = all - 1<<s.Fraction
		f.Infinity, f.NaN = true, s.Fraction > 0
		if f.NaN {
			f.emptyNaN = last + 1 + 1<<(s.Fraction-1)
		}
	case "nan":
		last, f.NaN = all-1, true
	case "infinity":
		last, f.Infinity, f.NaN, f.OneZero = all-1, true, true, true
		f.emptyNaN = all + 1
	case "finite":
	default:
		return nil, fmt.Errorf("oracle: unknown layout %q of the top exponent", s.Top)
	}
	if f.Overflow == "" {
		f.Overflow = "saturate"
		if f.Infinity {
			f.Overflow = "infinity"
		}
	}
	f.gaps, f.most = s, s.magnitude(last)
	f.lowest = new(big.Rat).Neg(f.most)
	if s.Flush {
		f.Normal = s.magnitude(1 << s.Fraction)
	}
	f.decode = func(code uint64) float64 { return s.decode(code, last) }
	return f, nil
}

// magnitude is the value of a code without its sign bit.
func (s Split) magnitude(n uint64) *big.Rat {
	e, rest := int(n>>s.Fraction), n&(1<<s.Fraction-1)
	if e == 0 {
		e = 1
	} else {
		rest += 1 << s.Fraction
	}
	return times2(new(big.Rat).SetInt(new(big.Int).SetUint64(rest)), e-s.Bias-s.Fraction)
}

// decode is the value of a whole code; last is that of the largest magnitude.
func (s Split) decode(code, last uint64) float64 {
	n := code & (1<<(s.Exponent+s.Fraction) - 1)
	sign := 1.0
	if code>>(s.Exponent+s.Fraction)&1 == 1 {
		sign = -1
	}
	switch {
	case s.Top == "infinity" && n == 0 && sign < 0:
		return nan
	case (s.Top == "ieee" || s.Top == "infinity") && n == last+1:
		return math.Inf(int(sign))
	case n > last:
		return math.NaN()
	case s.Flush && n < 1<<s.Fraction:
		return math.Copysign(0, sign)
	}
	v, _ := s.magnitude(n).Float64()
	return math.Copysign(v, sign)
}

// gap implements gapper: with q the place of the last kept bit, |x| 2^-q = n + f.
func (s Split) gap(x *big.Rat, _ bool) gap {
	e := log2(x)
	q := max(e, 1-s.Bias) - s.Fraction
	num, den := new(big.Int).Set(x.Num()), new(big.Int).Set(x.Denom())
	num.Abs(num)
	if q > 0 {
		den.Lsh(den, uint(q))
	} else {
		num.Lsh(num, uint(-q))
	}
	n, over := new(big.Int).QuoRem(num, den, new(big.Int))
	g := gap{n: n, q: q, over: over, width: den, odd: n.Bit(0) == 1}
	if s.Fraction == 0 && n.Sign() > 0 {
		g.odd = (e+s.Bias)&1 == 1 // the code is the exponent alone
	}
	return g
}

// end is the neighbour toward or away from zero.
func (g gap) end(away bool) *big.Rat {
	switch {
	case g.toward != nil && away:
		return g.away
	case g.toward != nil:
		return g.toward
	}
	n := new(big.Int).Set(g.n)
	if away {
		n.Add(n, big.NewInt(1))
	}
	return times2(new(big.Rat).SetInt(n), g.q)
}

// Value is one value of a listed format.
type Value struct {
	X    *big.Rat
	Code uint64
}

// List describes a format by its values.
type List struct {
	Values []Value // in any order, zero among them
	Width  int     // bits of a code
	NaN    bool    // NaNCode is that of NaN
	// NaNCode is the code of NaN.
	NaNCode uint64
	// Above and Below are the values that would follow the largest and precede the
	// most negative one, which decide what rounds beyond the range; nil: none would,
	// and what lies beyond is beyond.
	Above, Below *big.Rat
	Overflow     string // "": saturate
}

// NewList returns the format of a list of values.
func NewList(l List) (*Format, error) {
	up, down := side{beyond: l.Above}, side{beyond: negated(l.Below)}
	for _, v := range l.Values {
		if v.X.Sign() >= 0 {
			up.at = append(up.at, v)
		}
		if v.X.Sign() <= 0 {
			down.at = append(down.at, Value{negated(v.X), v.Code})
		}
	}
	up.sort()
	down.sort()
	if len(up.at) == 0 || len(down.at) == 0 || up.at[0].X.Sign() != 0 {
		return nil, fmt.Errorf("oracle: a list of values without zero")
	}
	f := &Format{
		OneZero: true, NaN: l.NaN, emptyNaN: l.NaNCode, width: l.Width, Overflow: l.Overflow,
		gaps: sides{up, down}, most: up.last(), lowest: negated(down.last()),
	}
	if f.Overflow == "" {
		f.Overflow = "saturate"
	}
	byCode := map[uint64]float64{}
	for _, v := range l.Values {
		byCode[v.Code], _ = v.X.Float64()
	}
	f.decode = func(code uint64) float64 {
		if v, ok := byCode[code]; ok {
			return v
		}
		return math.NaN()
	}
	return f, nil
}

// sides are the magnitudes of the two signs.
type sides struct{ up, down side }

// side is the magnitudes of one sign, ascending from zero.
type side struct {
	at     []Value
	beyond *big.Rat
}

func (s *side) sort() {
	sort.Slice(s.at, func(i, j int) bool { return s.at[i].X.Cmp(s.at[j].X) < 0 })
}

func (s *side) last() *big.Rat { return s.at[len(s.at)-1].X }

// gap implements gapper. Beyond the range with no further value the bracket is
// the magnitude itself, which is then beyond.
func (s sides) gap(x *big.Rat, negative bool) gap {
	side := s.up
	if negative {
		side = s.down
	}
	m := new(big.Rat).Abs(x)
	n := sort.Search(len(side.at), func(i int) bool { return side.at[i].X.Cmp(m) > 0 }) - 1
	toward := side.at[n]
	g := gap{toward: toward.X, away: side.beyond, odd: toward.Code&1 == 1}
	if n+1 < len(side.at) {
		g.away = side.at[n+1].X
	}
	if g.away == nil || g.away.Cmp(m) <= 0 {
		if m.Cmp(toward.X) != 0 {
			g.toward = m
		}
		g.away, g.over, g.width = g.toward, new(big.Int), big.NewInt(1)
		return g
	}
	f := new(big.Rat).Quo(new(big.Rat).Sub(m, g.toward), new(big.Rat).Sub(g.away, g.toward))
	g.over, g.width = f.Num(), f.Denom()
	return g
}

// Bits is the width of a code.
func (f *Format) Bits() int { return f.width }

// Max is the largest finite value.
func (f *Format) Max() *big.Rat { return new(big.Rat).Set(f.most) }

// Lowest is the most negative finite value.
func (f *Format) Lowest() *big.Rat { return new(big.Rat).Set(f.lowest) }

// Decode returns the value of a code.
func (f *Format) Decode(code uint64) float64 { return f.decode(code) }

// NaNCode is the code of the canonical NaN.
func (f *Format) NaNCode() (uint64, bool) { return f.emptyNaN, f.NaN }

// nan is NaN.
var nan = math.NaN()

// log2 returns floor(log2 |x|) of x != 0.
func log2(x *big.Rat) int {
	num := new(big.Int).Abs(x.Num())
	e := num.BitLen() - x.Denom().BitLen()
	// 2^(e-1) < |x| < 2^(e+1): e is right iff |x| >= 2^e.
	den := new(big.Int).Set(x.Denom())
	if e >= 0 {
		den.Lsh(den, uint(e))
	} else {
		num.Lsh(num, uint(-e))
	}
	if num.Cmp(den) < 0 {
		e--
	}
	return e
}

// times2 returns x 2^q in x.
func times2(x *big.Rat, q int) *big.Rat {
	p := new(big.Int).Lsh(big.NewInt(1), uint(max(q, -q)))
	if q >= 0 {
		return x.Mul(x, new(big.Rat).SetInt(p))
	}
	return x.Quo(x, new(big.Rat).SetInt(p))
}

// negated returns -x, nil for nil.
func negated(x *big.Rat) *big.Rat {
	if x == nil {
		return nil
	}
	return new(big.Rat).Neg(x)
}
