package quant

import (
	"fmt"
	"math"
	"strings"
)

// PowerScale is E8M0, the scale format of the OCP Microscaling Formats (MX) 1.0
// specification: the powers of two from 2^-127, code 00, to 2^127, code FE; code FF
// is NaN. It has no sign, no zero and no infinity. A value type, comparable with ==.
//
// Zero, negative numbers and what is too small saturate to the least value, as
// results beyond the largest saturate to that. To even means an even code.
type PowerScale struct{}

const (
	powerLeast   = -127
	powerLargest = 127
	powerNaN     = 0xff
)

// String returns "E8M0".
func (PowerScale) String() string { return "E8M0" }

// Limits states the format's figures.
func (PowerScale) Limits() Limits {
	least := powerOfTwo(powerLeast)
	return Limits{
		Bits: 8, Exponent: 8, Max: powerOfTwo(powerLargest), Lowest: least, MinNormal: least, MinSubnormal: least,
		HasNaN: true, DefaultOverflow: Saturate, OneZero: true, NoZero: true, Binary32: true,
	}
}

// Bracket implements Format: a gap of powers of two, without an upper bound.
func (PowerScale) Bracket(x Real) Bracket {
	exponent := x.Exp + 127
	if x.IsZero() || x.Neg || exponent < powerLeast {
		return outsideBelow(x.Neg)
	}
	n, b := split(x, 127)
	b.Toward, b.Away = scaled(n, exponent), scaled(n, exponent+1)
	b.Odd = (exponent-powerLeast)&1 != 0
	return b
}

// outsideBelow is the bracket of a number of either sign below all values of a
// format.
func outsideBelow(neg bool) Bracket {
	v := -math.MaxFloat64
	if neg {
		v = math.MaxFloat64
	}
	return Bracket{Toward: v, Away: v, Exact: true}
}

// Encode returns the code of a value.
func (PowerScale) Encode(x float64) (uint64, bool) {
	switch {
	case x != x:
		return powerNaN, true
	case !(x > 0) || math.IsInf(x, 1):
		return 0, false
	}
	e := exponentOf(x)
	return uint64(e - powerLeast), e >= powerLeast && e <= powerLargest && powerOfTwo(e) == x
}

// Decode returns the value of a code.
func (PowerScale) Decode(code uint64) float64 {
	if code &= 0xff; code == powerNaN {
		return nan64
	}
	return powerOfTwo(int(code) + powerLeast)
}

// parsePowerScale reads "E8M0"; with options in parentheses, E8M0(top=ieee), the
// name is that of a signed float.
func parsePowerScale(word string) (Format, bool, error) {
	if !strings.EqualFold(word, "E8M0") {
		return nil, false, nil
	}
	return PowerScale{}, true, nil
}

// positiveScale reports whether a format may serve as the scale of blocks: scalar,
// with binary32 values, so that products with a binary32 scale are exact.
func positiveScale(f Format) error {
	if _, shared := f.(Blocked); shared {
		return fmt.Errorf("scale %s: a scale has a scalar format", f)
	}
	if l := f.Limits(); !l.Binary32 || !(l.Max > 0) {
		return fmt.Errorf("scale %s: a scale has positive values that are binary32 numbers", f)
	}
	return nil
}
