package quant

import (
	"math"
	"math/bits"
)

// Real is an exact real, or a special: (-1)^Neg x (Hi:Lo) x 2^Exp, the 128-bit
// significand Hi:Lo normalised (top bit set) unless zero; Sticky says that a
// nonzero rest below one unit of Lo was cut off.
type Real struct {
	Kind   Kind
	Neg    bool
	Sticky bool
	Hi, Lo uint64
	Exp    int
}

// Kind separates finite reals from the specials.
type Kind uint8

// The kinds.
const (
	Finite Kind = iota // zero included: Hi = Lo = 0
	Infinite
	NotANumber
)

// Bracket encloses a magnitude: Toward <= |x| < Away, two neighbours of the
// format, and how far x lies between them. Where a format lacks zero, the gap
// around it lies between a negative and a positive value: Toward is then negative,
// the value of the other sign.
type Bracket struct {
	Toward, Away float64 // magnitudes; equal Toward = |x| exactly when Exact
	Exact        bool
	Odd          bool   // the code of Toward is odd
	Fraction     uint64 // floor of the fraction of the gap times 2^64
	Rest         bool   // the fraction has further bits below
	// Nearest rounding compares with the middle of the gap, but where OwnTie is set
	// with a point of the format's own: Side is -1, 0, +1 as |x| is below, at or
	// above it (posits, whose tie is the next longer pattern).
	OwnTie bool
	Side   int8
}

// side is -1, 0, +1 as the magnitude is below, at or above the point that parts
// what nearest rounding sends toward zero from what it sends away.
func (b *Bracket) side() int8 {
	const half = 1 << 63
	switch {
	case b.OwnTie:
		return b.Side
	case b.Fraction < half:
		return -1
	case b.Fraction == half && !b.Rest:
		return 0
	}
	return 1
}

// The layout of binary64 (IEEE 754).
const (
	fractionBits64 = 52
	bias64         = 1023
	signBit64      = 1 << 63
	fractionMask64 = 1<<fractionBits64 - 1
	exponentMask64 = 0x7ff << fractionBits64
	hidden64       = 1 << fractionBits64
	minExp64       = 1 - bias64 - fractionBits64 // exponent of the least subnormal, 2^-1074
)

// nan64 is the canonical NaN: quiet, positive, no payload. Converted to float32
// it is the canonical NaN 0x7fc00000 there.
var nan64 = math.Float64frombits(0x7ff8000000000000)

// Exactly returns the real that x is.
func Exactly(x float64) Real {
	b := math.Float64bits(x)
	r := Real{Neg: b>>63 != 0}
	field, sig := int(b>>fractionBits64&0x7ff), b&fractionMask64
	switch {
	case field == 0x7ff && sig != 0:
		return Real{Kind: NotANumber}
	case field == 0x7ff:
		r.Kind = Infinite
		return r
	case field == 0 && sig == 0:
		return r
	case field == 0:
		field = 1
	default:
		sig |= hidden64
	}
	z := bits.LeadingZeros64(sig)
	r.Hi, r.Exp = sig<<z, field-1+minExp64-z-64
	return r
}

// IsZero reports whether the real is zero of either sign.
func (a Real) IsZero() bool { return a.Kind == Finite && a.Hi == 0 }

// ExactProduct returns the exact real a b, which has at most 106 significant bits.
func ExactProduct(a, b float64) Real {
	x, y := Exactly(a), Exactly(b)
	neg := x.Neg != y.Neg
	switch {
	case x.Kind == NotANumber || y.Kind == NotANumber:
		return Real{Kind: NotANumber}
	case x.Kind == Infinite || y.Kind == Infinite:
		if x.IsZero() || y.IsZero() {
			return Real{Kind: NotANumber}
		}
		return Real{Kind: Infinite, Neg: neg}
	case x.IsZero() || y.IsZero():
		return Real{Neg: neg}
	}
	// Both significands sit in Hi alone: the 128-bit product is exact.
	hi, lo := bits.Mul64(x.Hi, y.Hi)
	r := Real{Neg: neg, Hi: hi, Lo: lo, Exp: x.Exp + 64 + y.Exp + 64}
	if hi>>63 == 0 {
		r.Hi, r.Lo, r.Exp = hi<<1|lo>>63, lo<<1, r.Exp-1
	}
	return r
}

// ExactQuotient returns a/b to 128 bits, Sticky telling of a remainder. b is
// finite and not zero.
func ExactQuotient(a, b float64) Real {
	x, y := Exactly(a), Exactly(b)
	if y.Kind != Finite || y.IsZero() {
		panic("quant: quotient by zero or by a number that is not finite")
	}
	x.Neg = x.Neg != y.Neg
	if x.Kind != Finite || x.IsZero() {
		return x
	}
	// Halve the dividend's significand so that each step's quotient fits 64 bits:
	// hi = floor(x/2 / y 2^64) in (2^62, 2^64), then 64 further bits.
	hi, rest := bits.Div64(x.Hi>>1, x.Hi<<63, y.Hi)
	lo, rest := bits.Div64(rest, 0, y.Hi)
	r := Real{Neg: x.Neg, Sticky: rest != 0, Hi: hi, Lo: lo, Exp: x.Exp - y.Exp - 127}
	if hi>>63 == 0 {
		// One more bit of the quotient: 2 rest / y.
		bit, tail := bits.Div64(rest>>63, rest<<1, y.Hi)
		r.Hi, r.Lo, r.Exp = hi<<1|lo>>63, lo<<1|bit, r.Exp-1
		r.Sticky = tail != 0
	}
	return r
}

// Negated returns -a.
func (a Real) Negated() Real {
	a.Neg = !a.Neg && a.Kind != NotANumber
	return a
}

// Add returns a + b, the first 128 bits and a sticky rest. A zero result is +0
// unless both operands are -0, in every rounding direction. Neither operand may
// be sticky: its unknown rest could be what is left after cancellation.
func (a Real) Add(b Real) Real {
	if a.Sticky || b.Sticky {
		panic("quant: sum of a real that was already cut off")
	}
	switch {
	case a.Kind == NotANumber || b.Kind == NotANumber:
		return Real{Kind: NotANumber}
	case a.Kind == Infinite && b.Kind == Infinite && a.Neg != b.Neg:
		return Real{Kind: NotANumber}
	case a.Kind == Infinite:
		return a
	case b.Kind == Infinite:
		return b
	case a.IsZero() && b.IsZero():
		return Real{Neg: a.Neg && b.Neg}
	case a.IsZero():
		return b
	case b.IsZero():
		return a
	}
	if a.magnitudeLess(b) {
		a, b = b, a
	}
	w, sticky := b.shifted(a.Exp - b.Exp)
	if a.Neg == b.Neg {
		return sumOf(a, w, sticky)
	}
	return differenceOf(a, w, sticky)
}

// magnitudeLess reports |a| < |b| for finite nonzero reals, sticky rests aside.
func (a Real) magnitudeLess(b Real) bool {
	switch {
	case a.Exp != b.Exp:
		return a.Exp < b.Exp
	case a.Hi != b.Hi:
		return a.Hi < b.Hi
	default:
		return a.Lo < b.Lo
	}
}

// shifted returns the significand d >= 0 places to the right in three words, the
// third one below Lo, and whether a rest fell out below it.
func (a Real) shifted(d int) (w [3]uint64, sticky bool) {
	if d >= 192 {
		return w, true
	}
	w = [3]uint64{a.Hi, a.Lo, 0}
	for ; d >= 64; d -= 64 {
		sticky = sticky || w[2] != 0
		w = [3]uint64{0, w[0], w[1]}
	}
	s := uint(d)
	sticky = sticky || w[2]<<(64-s) != 0 && s > 0
	w[2] = w[2]>>s | w[1]<<(64-s)
	w[1] = w[1]>>s | w[0]<<(64-s)
	w[0] >>= s
	return w, sticky
}

// sumOf adds the three-word significand w to a of the same sign.
func sumOf(a Real, w [3]uint64, sticky bool) Real {
	lo, c := bits.Add64(a.Lo, w[1], 0)
	hi, c := bits.Add64(a.Hi, w[0], c)
	rest := sticky || w[2] != 0
	if c != 0 {
		rest = rest || lo&1 != 0
		lo, hi = lo>>1|hi<<63, hi>>1|1<<63
		a.Exp++
	}
	a.Hi, a.Lo, a.Sticky = hi, lo, rest
	return a
}

// differenceOf subtracts the three-word significand w, at most a's, from a. A
// rest below w means that the true difference lies under the difference of the
// words: borrow one unit of the third word and stay sticky. No rest fell out
// unless w was shifted by more than 64 places, and then the difference keeps
// 127 of its leading bits.
func differenceOf(a Real, w [3]uint64, sticky bool) Real {
	var borrow uint64
	if sticky {
		borrow = 1
	}
	g, c := bits.Sub64(0, w[2], borrow)
	lo, c := bits.Sub64(a.Lo, w[1], c)
	hi, _ := bits.Sub64(a.Hi, w[0], c)
	return normalised(a.Neg, [3]uint64{hi, lo, g}, sticky, a.Exp)
}

// normalised returns the real of the three-word significand w whose middle word
// has exponent exp, with a nonzero rest below it when sticky.
func normalised(neg bool, w [3]uint64, sticky bool, exp int) Real {
	if w[0]|w[1]|w[2] == 0 && !sticky {
		return Real{}
	}
	for w[0] == 0 {
		w = [3]uint64{w[1], w[2], 0}
		exp -= 64
	}
	s := uint(bits.LeadingZeros64(w[0]))
	return Real{
		Neg:    neg,
		Sticky: sticky || w[2]<<s != 0,
		Hi:     w[0]<<s | w[1]>>(64-s),
		Lo:     w[1]<<s | w[2]>>(64-s),
		Exp:    exp - int(s),
	}
}

// Compare returns -1, 0 or +1 as the finite real a is below, at or above b. Two
// reals that agree in all but their sticky rests cannot be told apart and panic.
func (a Real) Compare(b Real) int {
	if a.Kind != Finite || b.Kind != Finite {
		panic("quant: comparison of a number that is not finite")
	}
	switch {
	case a.IsZero() && b.IsZero():
		return 0
	case a.IsZero():
		return sign(!b.Neg)
	case b.IsZero(), a.Neg != b.Neg:
		return sign(a.Neg)
	case a.Hi == b.Hi && a.Lo == b.Lo && a.Exp == b.Exp:
		if a.Sticky && b.Sticky {
			panic("quant: comparison of two reals that were cut off at the same place")
		}
		if a.Sticky == b.Sticky {
			return 0
		}
		return sign(a.Neg != b.Sticky)
	}
	return sign(a.magnitudeLess(b) != a.Neg)
}

// sign returns -1 for true and +1 for false.
func sign(negative bool) int {
	if negative {
		return -1
	}
	return 1
}

// scaled returns n 2^q, +Inf beyond binary64. n has at most 53 bits and q is at
// least -1074, so every step is exact.
func scaled(n uint64, q int) float64 {
	x := float64(n)
	for ; q > bias64-fractionBits64; q -= 512 {
		x *= 0x1p512
	}
	return x * powerOfTwo(q)
}

// powerOfTwo returns 2^q for -1074 <= q <= 1023.
func powerOfTwo(q int) float64 {
	if q < 1-bias64 {
		return math.Float64frombits(1 << (q - minExp64))
	}
	return math.Float64frombits(uint64(q+bias64) << fractionBits64)
}

// toFloat returns a real that is a binary64 number as such.
func toFloat(a Real) float64 {
	v, _ := binary64Point.Round(a, 0)
	return v
}
