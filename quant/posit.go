package quant

import (
	"fmt"
	"math"
	"math/bits"
	"regexp"
	"strconv"
)

// Posit is a posit format of the 2022 standard (Standard for Posit Arithmetic
// (2022), Posit Working Group; from memory): sign, regime, two exponent bits and a
// fraction that takes the bits left. A value type, comparable with ==.
//
// A value is 16^k 2^e 1.f, k being the length of the regime, its first bits, all
// alike: a run of m zeros means k = -m, of m ones k = m - 1. Negative values are the
// two's complement of their pattern. There is one zero, pattern 0, and one special,
// NaR, pattern 100...0, which is NaN here.
//
// Rounding never gives zero or NaR: what lies below the least magnitude becomes it,
// whatever the mode, and what lies beyond the largest one saturates; infinities
// become NaR. Nearest compares with the pattern of one more bit, 1, which is not the
// middle of the gap where the pattern cuts exponent bits off; a tie goes to the even
// pattern. Stochastic rounding uses the fraction of the gap between the two values.
type Posit struct{ width int }

// NewPosit returns the posit format of 3 to 32 bits.
func NewPosit(width int) (Posit, error) {
	if width < 3 || width > 32 {
		return Posit{}, fmt.Errorf("quant: posit of %d bits: 3 to 32 are known", width)
	}
	return Posit{width}, nil
}

const positExponent = 2 // exponent bits, es

// top is the exponent of the largest value.
func (p Posit) top() int { return (p.width - 2) << positExponent }

// String returns the canonical name: "posit16".
func (p Posit) String() string { return fmt.Sprintf("posit%d", p.width) }

// Limits states the format's figures. Fraction is that of the values around 1.
func (p Posit) Limits() Limits {
	fraction := max(0, p.width-5)
	least := powerOfTwo(-p.top())
	return Limits{
		Bits: p.width, Exponent: positExponent, Fraction: fraction,
		Max: powerOfTwo(p.top()), Lowest: -powerOfTwo(p.top()), MinNormal: least, MinSubnormal: least,
		HasNaN: true, DefaultOverflow: Saturate, OneZero: true, InfinityIsNaN: true,
		Binary32: fraction <= 23,
	}
}

// magnitude is the value of a pattern without its sign, 1 to 2^(width-1) - 1.
func (p Posit) magnitude(pattern uint64) float64 {
	word := pattern << (65 - p.width) // the regime starts at the top bit
	var k, run int
	if word>>63 == 0 {
		run = bits.LeadingZeros64(word)
		k = -run
	} else {
		run = bits.LeadingZeros64(^word)
		k = run - 1
	}
	word <<= run
	word <<= 1 // the bit that ends the regime; beyond the pattern bits are zero
	e := k<<positExponent + int(word>>(64-positExponent))
	fraction := word << positExponent >> 12 // 52 bits
	return math.Float64frombits(uint64(e+bias64)<<fractionBits64 | fraction)
}

// Bracket implements Format.
func (p Posit) Bracket(x Real) Bracket {
	exponent := x.Exp + 127
	switch {
	case x.IsZero():
		return Bracket{Exact: true}
	case exponent < -p.top():
		least := powerOfTwo(-p.top())
		return Bracket{Toward: least, Away: least, Exact: true}
	case exponent >= p.top():
		largest := x.Hi == 1<<63 && x.Lo == 0 && !x.Sticky && exponent == p.top()
		if largest {
			return Bracket{Toward: powerOfTwo(p.top()), Away: math.Inf(1), Exact: true, Odd: true}
		}
		return Bracket{Toward: math.MaxFloat64, Away: math.Inf(1), Exact: true}
	}
	head, length := p.head(exponent)
	if room := p.width - 1 - length; room >= 0 {
		// Fraction bits fill the pattern: the gap is their last place.
		n, b := split(x, 127-room)
		pattern := head<<room | n&(1<<room-1)
		return p.bracket(pattern, b)
	}
	return p.shortened(x, head, length)
}

// head returns regime and exponent bits, and their number, of the values with an
// exponent.
func (p Posit) head(exponent int) (head uint64, length int) {
	k := exponent >> positExponent
	head = uint64(exponent - k<<positExponent)
	if k < 0 {
		return head | 1<<positExponent, -k + 1 + positExponent
	}
	return head | (1<<(k+2)-2)<<positExponent, k + 2 + positExponent
}

// bracket fills the values of a bracket in.
func (p Posit) bracket(pattern uint64, b Bracket) Bracket {
	b.Toward, b.Away, b.Odd = p.magnitude(pattern), p.magnitude(pattern+1), pattern&1 != 0
	return b
}

// shortened is the bracket of a magnitude whose pattern has no room for all
// exponent bits: the values around it are powers of two, up to 16 times apart.
func (p Posit) shortened(x Real, head uint64, length int) Bracket {
	cut := length - (p.width - 1)
	tail := head & (1<<cut - 1)
	// What follows the bits cut off: the fraction of the significand.
	more := x.Hi != 1<<63 || x.Lo != 0 || x.Sticky
	b := p.bracket(head>>cut, Bracket{OwnTie: true, Side: -1})
	half := uint64(1) << (cut - 1)
	switch {
	case tail == half && !more:
		b.Side = 0
	case tail >= half:
		b.Side = 1
	}
	b.Exact = tail == 0 && !more
	b.Fraction, b.Rest = gapFraction(x, b.Toward, b.Away)
	return b
}

// Encode returns the pattern of a value; that of NaN is NaR.
func (p Posit) Encode(x float64) (uint64, bool) {
	mask := uint64(1)<<p.width - 1
	switch {
	case x != x:
		return 1 << (p.width - 1), true
	case x == 0:
		return 0, true
	case math.Abs(x) > powerOfTwo(p.top()) || math.Abs(x) < powerOfTwo(-p.top()):
		return 0, false
	}
	pattern, exact := p.pattern(math.Abs(x))
	if x < 0 {
		pattern = -pattern
	}
	return pattern & mask, exact
}

// pattern returns the pattern of the largest value that is at most x, which lies
// in the range.
func (p Posit) pattern(x float64) (pattern uint64, exact bool) {
	// Patterns ascend with their values: a binary search by bits.
	for bit := uint64(1) << (p.width - 2); bit > 0; bit >>= 1 {
		if p.magnitude(pattern|bit) <= x {
			pattern |= bit
		}
	}
	return pattern, p.magnitude(pattern) == x
}

// Decode returns the value of a pattern, NaN for NaR.
func (p Posit) Decode(code uint64) float64 {
	sign := uint64(1) << (p.width - 1)
	code &= 2*sign - 1
	switch {
	case code == 0:
		return 0
	case code == sign:
		return nan64
	case code > sign:
		return -p.magnitude(2*sign - code)
	}
	return p.magnitude(code)
}

var positName = regexp.MustCompile(`^(?i)posit(\d{1,3})$`)

// parsePosit reads "posit8", "Posit16".
func parsePosit(word string) (Format, bool, error) {
	m := positName.FindStringSubmatch(word)
	if m == nil {
		return nil, false, nil
	}
	width, _ := strconv.Atoi(m[1])
	p, err := NewPosit(width)
	if err != nil {
		return nil, true, fmt.Errorf("format %q: %w", word, err)
	}
	return p, true, nil
}
