package quant

import (
	"fmt"
	"math"
	"math/bits"
	"strings"
)

// Top says what the codes of the largest exponent stand for.
type Top uint8

// The layouts of the top exponent.
const (
	TopIEEE    Top = iota // infinity at fraction 0, NaN elsewhere (IEEE 754)
	TopNaNOnly            // numbers, but the code of all ones is NaN (OCP E4M3)
	TopFinite             // numbers throughout: no infinity, no NaN (OCP MX elements)
)

// FloatSpec writes a floating-point format out. The zero values of all but
// Exponent and Fraction give the layout of IEEE 754.
type FloatSpec struct {
	Exponent int      // exponent bits, 0..11
	Fraction int      // fraction bits, 0..52
	Bias     *int     // nil: 2^(Exponent-1) - 1
	Flush    bool     // subnormal results become zero of their sign
	Top      Top      // what the largest exponent holds
	Overflow Overflow // FormatDefault: to infinity where there is one, else saturate
}

// Float is a binary floating-point format of sign and magnitude: a value type,
// comparable with ==.
//
// Magnitudes are numbered 0, 1, 2, ... upwards: number n is the code without its
// sign bit, n = field << fraction | rest, and the numbering goes on beyond the
// largest finite value when a result is rounded as if the exponent had no bound.
type Float struct {
	name     string
	exponent int
	fraction int
	emin     int // exponent of the least normal value, 1 - bias
	top      Top
	flush    bool
	overflow Overflow
	last     uint64 // number of the largest finite magnitude
}

// NewFloat returns the format that s writes out, or an error that names the
// field at fault.
func NewFloat(s FloatSpec) (Float, error) {
	f, err := s.layout()
	if err != nil {
		return Float{}, err
	}
	f.name = f.canonicalName()
	return f, nil
}

// layout checks s and works out all but the name.
func (s FloatSpec) layout() (Float, error) {
	switch {
	case s.Exponent < 0 || s.Exponent > 11:
		return Float{}, fmt.Errorf("quant: %d exponent bits: a format has 0 to 11", s.Exponent)
	case s.Fraction < 0 || s.Fraction > 52:
		return Float{}, fmt.Errorf("quant: %d fraction bits: a format has 0 to 52", s.Fraction)
	case s.Exponent+s.Fraction < 1:
		return Float{}, fmt.Errorf("quant: a format needs at least one bit besides its sign")
	case s.Exponent == 0 && s.Bias == nil:
		return Float{}, fmt.Errorf("quant: a format without exponent bits needs its bias written out (values are multiples of 2^(1-bias-fraction))")
	case s.Top > TopFinite:
		return Float{}, fmt.Errorf("quant: unknown layout %d of the top exponent", s.Top)
	case s.Exponent == 0 && s.Top == TopIEEE:
		return Float{}, fmt.Errorf("quant: a format without exponent bits has no top exponent for infinity: choose the layout nan or finite")
	}
	bias := 1<<max(s.Exponent-1, 0) - 1
	if s.Bias != nil {
		bias = *s.Bias
	}
	f := Float{
		exponent: s.Exponent, fraction: s.Fraction, emin: 1 - bias, top: s.Top, flush: s.Flush,
		overflow: s.Overflow, last: lastNumber(s),
	}
	if f.overflow == FormatDefault {
		f.overflow = Saturate
		if f.top == TopIEEE {
			f.overflow = ToInfinity
		}
	}
	if f.last == 0 || f.last == math.MaxUint64 {
		return Float{}, fmt.Errorf("quant: E%dM%d has no finite value but zero", s.Exponent, s.Fraction)
	}
	if f.flush && f.last>>f.fraction == 0 {
		return Float{}, fmt.Errorf("quant: E%dM%d has only subnormal values: they cannot be flushed", s.Exponent, s.Fraction)
	}
	if err := checkOverflow(f.overflow, f.top == TopIEEE, false); err != nil {
		return Float{}, fmt.Errorf("quant: E%dM%d: %w", s.Exponent, s.Fraction, err)
	}
	if f.emin-f.fraction < minExp64 || f.value(f.last) > math.MaxFloat64 {
		return Float{}, fmt.Errorf("quant: E%dM%d with bias %d reaches beyond binary64 (2^%d to 2^%d), which holds all values here",
			s.Exponent, s.Fraction, bias, minExp64, bias64)
	}
	return f, nil
}

// lastNumber is the number of the largest finite magnitude.
func lastNumber(s FloatSpec) uint64 {
	switch s.Top {
	case TopIEEE:
		return (1<<s.Exponent-1)<<s.Fraction - 1
	case TopNaNOnly:
		return 1<<(s.Exponent+s.Fraction) - 2
	default:
		return 1<<(s.Exponent+s.Fraction) - 1
	}
}

// value returns magnitude number n, +Inf beyond binary64.
func (f Float) value(n uint64) float64 {
	field, rest := int(n>>f.fraction), n&(1<<f.fraction-1)
	if field == 0 {
		return scaled(rest, f.emin-f.fraction)
	}
	return scaled(rest|1<<f.fraction, f.emin-f.fraction+field-1)
}

// String returns the canonical name, which ParseFormat reads.
func (f Float) String() string { return f.name }

// Limits states the format's figures.
func (f Float) Limits() Limits {
	l := Limits{
		Bits: 1 + f.exponent + f.fraction, Exponent: f.exponent, Fraction: f.fraction,
		Max: f.value(f.last), Lowest: -f.value(f.last),
		MinSubnormal: f.value(1), HasInfinity: f.top == TopIEEE,
		HasNaN:          f.top == TopNaNOnly || f.top == TopIEEE && f.fraction > 0,
		DefaultOverflow: f.overflow, Flush: f.flush,
	}
	if least := uint64(1) << f.fraction; f.exponent > 0 && least <= f.last {
		l.MinNormal = f.value(least)
		if f.flush {
			l.MinSubnormal = l.MinNormal
		}
	}
	l.Binary32 = f.fraction <= 23 && l.Max <= math.MaxFloat32 && f.emin-f.fraction >= -149
	return l
}

// Bracket implements Format: |x| = (n + fraction) 2^q, 2^q the place of the last
// kept bit, which subnormal results share with the least normal one.
func (f Float) Bracket(x Real) Bracket {
	if x.IsZero() {
		return Bracket{Exact: true}
	}
	exponent := x.Exp + 127
	q := max(exponent, f.emin) - f.fraction
	n, b := split(x, q-x.Exp)
	b.Toward, b.Away = scaled(n, q), scaled(n+1, q)
	b.Odd = n&1 != 0
	if f.fraction == 0 && n != 0 {
		b.Odd = (exponent-f.emin+1)&1 != 0 // the code is the exponent field alone
	}
	return b
}

// split cuts the last drop >= 64 bits off the significand of x: the integer left
// and, in the bracket, the fraction that was cut.
func split(x Real, drop int) (n uint64, b Bracket) {
	if d := uint(drop - 64); d <= 64 {
		n = x.Hi >> d
		b.Fraction = x.Hi<<(64-d) | x.Lo>>d
		b.Rest = x.Sticky || x.Lo<<(64-d) != 0
	} else {
		d -= 64
		b.Fraction = x.Hi >> d
		b.Rest = x.Sticky || x.Lo != 0 || x.Hi<<(64-min(d, 64)) != 0
	}
	b.Exact = b.Fraction == 0 && !b.Rest
	return n, b
}

// Encode returns the code of a value of the format, right-aligned in Limits().Bits
// bits. The false result says that x has no code: it is not a value of the
// format, or a special that the format lacks. NaN has the code of the quiet NaN
// without sign; where subnormals are flushed they have no code.
func (f Float) Encode(x float64) (uint64, bool) {
	var sign uint64
	if math.Signbit(x) {
		sign = 1 << (f.exponent + f.fraction)
	}
	switch {
	case x != x:
		return f.nan(), f.Limits().HasNaN
	case math.IsInf(x, 0):
		return sign | (f.last + 1), f.top == TopIEEE
	}
	n, exact := f.number(math.Abs(x))
	flushed := f.flush && n != 0 && n>>f.fraction == 0
	return sign | n, exact && n <= f.last && !flushed
}

// number returns the number of a finite magnitude and whether it is a value.
func (f Float) number(x float64) (uint64, bool) {
	r := Exactly(x)
	if r.IsZero() {
		return 0, true
	}
	exponent := r.Exp + 127
	n, b := split(r, max(exponent, f.emin)-f.fraction-r.Exp)
	if exponent >= f.emin {
		n += uint64(exponent-f.emin) << f.fraction
	}
	return n, b.Exact
}

// nan is the code of the canonical NaN: top fraction bit set, or all ones.
func (f Float) nan() uint64 {
	if f.top == TopIEEE && f.fraction > 0 {
		return f.last + 1 | 1<<(f.fraction-1)
	}
	return 1<<(f.exponent+f.fraction) - 1
}

// Decode returns the value of a code; bits above Limits().Bits are ignored. Where
// subnormals are flushed their codes read as zero of their sign.
func (f Float) Decode(code uint64) float64 {
	n := code & (1<<(f.exponent+f.fraction) - 1)
	x := f.value(n)
	switch {
	case n == f.last+1 && f.top == TopIEEE:
		x = math.Inf(1)
	case n > f.last:
		return nan64
	case f.flush && n>>f.fraction == 0:
		x = 0
	}
	if code>>(f.exponent+f.fraction)&1 != 0 {
		x = -x
	}
	return x
}

// canonicalName is a known name, or EeMm, with the options in parentheses that
// differ from what the bare name means.
func (f Float) canonicalName() string {
	base, named := Float{}, ""
	for _, k := range knownFloats {
		if k.spec.Exponent == f.exponent && k.spec.Fraction == f.fraction {
			base, named = mustLayout(k.spec), k.name
			break
		}
	}
	if named == "" {
		named = fmt.Sprintf("E%dM%d", f.exponent, f.fraction)
		base, _ = FloatSpec{Exponent: f.exponent, Fraction: f.fraction}.layout()
	}
	options := f.optionsOver(base)
	if len(options) == 0 && f.exponent == 8 && f.fraction == 0 {
		options = []string{"top=ieee"} // the bare name is that of the scale format
	}
	if len(options) > 0 {
		return named + "(" + strings.Join(options, ",") + ")"
	}
	return named
}

// optionsOver lists what distinguishes f from base, a format of the same split
// (or the zero Float, when the bare split is no format).
func (f Float) optionsOver(base Float) []string {
	var o []string
	if f.emin != base.emin || base.last == 0 {
		o = append(o, fmt.Sprintf("bias=%d", 1-f.emin))
	}
	if f.top != base.top {
		o = append(o, "top="+topWords[f.top])
	}
	if f.flush {
		o = append(o, "subnormals=flush")
	}
	derived := Saturate
	if f.top == TopIEEE {
		derived = ToInfinity
	}
	// A change of the top exponent brings its own default overflow along.
	if f.top == base.top {
		derived = base.overflow
	}
	if f.overflow != derived {
		o = append(o, "overflow="+f.overflow.String())
	}
	return o
}

// exponentOf returns floor(log2 x) of a positive finite x.
func exponentOf(x float64) int {
	b := math.Float64bits(x)
	if e := int(b >> fractionBits64); e != 0 {
		return e - bias64
	}
	return minExp64 + 63 - bits.LeadingZeros64(b)
}
