package quant

import (
	"fmt"
	"math"
	"regexp"
	"strconv"
)

// maxFixed bounds the width of fixed-point formats: binary64 holds their values.
const maxFixed = 53

// Fixed is a fixed-point format: the multiples of 2^-f from lo 2^-f to hi 2^-f. A
// value type, comparable with ==.
//
// Qi.f is signed, in two's complement: i bits before the point, the sign bit among
// them, and f behind it; from -2^(i-1) to 2^(i-1) - 2^-f. (It is the <IL, FL> of
// S. Gupta, A. Agrawal, K. Gopalakrishnan, P. Narayanan: Deep learning with limited
// numerical precision, ICML 2015, whose IL counts the sign, too; from memory. Other
// authors do not count it.) UQi.f is unsigned, from 0 to 2^i - 2^-f. Results beyond
// the range saturate, or wrap around modulo 2^i, or become NaN where asked for.
// There is one zero, no infinity and no code for NaN. To even means an even code.
type Fixed struct {
	name     string
	lo, hi   int64 // least and largest code
	fraction int
	width    int
	overflow Overflow
}

// NewFixed returns Qi.f, or UQi.f when unsigned. Overflow is FormatDefault or
// Saturate, Wrap or ToNaN.
func NewFixed(integer, fraction int, unsigned bool, overflow Overflow) (Fixed, error) {
	f := Fixed{name: "Q", fraction: fraction, width: integer + fraction, overflow: overflow}
	least := 1
	if unsigned {
		f.name, least = "UQ", 0
	}
	f.name += fmt.Sprintf("%d.%d", integer, fraction)
	switch {
	case integer < least || fraction < 0:
		return Fixed{}, fmt.Errorf("quant: %s: at least %d bits before the point and none less than 0 behind it", f.name, least)
	case f.width < 1+least || f.width > maxFixed:
		return Fixed{}, fmt.Errorf("quant: %s: %d bits: fixed point has %d to %d", f.name, f.width, 1+least, maxFixed)
	}
	f.lo, f.hi = integerRange(f.width, unsigned)
	switch overflow {
	case FormatDefault:
		f.overflow = Saturate
	case Wrap, ToNaN:
		f.name += "(overflow=" + overflow.String() + ")"
	case Saturate:
	default:
		return Fixed{}, fmt.Errorf("quant: %s: overflow %s: fixed point saturates, wraps or gives nan", f.name, overflow)
	}
	return f, nil
}

// integerRange is the range of integers of a width, two's complement unless
// unsigned.
func integerRange(width int, unsigned bool) (lo, hi int64) {
	if unsigned {
		return 0, 1<<width - 1
	}
	return -1 << (width - 1), 1<<(width-1) - 1
}

// String returns the canonical name: "Q2.14", "UQ0.8(overflow=wrap)".
func (f Fixed) String() string { return f.name }

// value is the value of code n.
func (f Fixed) value(n int64) float64 {
	if n < 0 {
		return -scaled(uint64(-n), -f.fraction)
	}
	return scaled(uint64(n), -f.fraction)
}

// Limits states the format's figures.
func (f Fixed) Limits() Limits {
	step := scaled(1, -f.fraction)
	return Limits{
		Bits: f.width, Fraction: f.fraction, Max: f.value(f.hi), Lowest: f.value(f.lo),
		MinNormal: step, MinSubnormal: step, DefaultOverflow: f.overflow, OneZero: true,
		Binary32: f.hi <= 1<<24 && f.fraction <= 149,
	}
}

// Bracket implements Format: |x| = (n + fraction) 2^-f, without an upper bound.
func (f Fixed) Bracket(x Real) Bracket {
	n, b := f.cut(x)
	b.Odd = n&1 != 0
	if !x.IsZero() && x.Exp+127 >= 54-f.fraction {
		// Beyond every fixed-point format: any bracket beyond this one serves.
		b.Toward, b.Away = math.MaxFloat64, math.Inf(1)
		return b
	}
	b.Toward, b.Away = scaled(n, -f.fraction), scaled(n+1, -f.fraction)
	return b
}

// cut returns floor(|x| 2^f) modulo 2^64 and the fraction that was cut off.
func (f Fixed) cut(x Real) (n uint64, b Bracket) {
	drop := -f.fraction - x.Exp
	switch {
	case x.IsZero():
		b.Exact = true
		return 0, b
	case drop >= 64:
		return split(x, drop)
	case drop > 0:
		n, b.Fraction, b.Rest = x.Hi<<(64-drop)|x.Lo>>drop, x.Lo<<(64-drop), x.Sticky
	case drop > -64:
		n, b.Rest = x.Lo<<-drop, x.Sticky
	default:
		b.Rest = x.Sticky
	}
	b.Exact = b.Fraction == 0 && !b.Rest
	return n, b
}

// Wrap implements Wrapper: the code modulo 2^width.
func (f Fixed) Wrap(x Real, away bool) float64 {
	n, _ := f.cut(x)
	if away {
		n++
	}
	if x.Neg {
		n = -n
	}
	return f.value(f.lo + int64((n-uint64(f.lo))&(1<<f.width-1)))
}

// Encode returns the code of a value, two's complement of the format's width.
func (f Fixed) Encode(x float64) (uint64, bool) {
	if x-x != 0 || x < f.value(f.lo) || x > f.value(f.hi) {
		return 0, false
	}
	r := Exactly(x)
	n, b := f.cut(r)
	if r.Neg {
		n = -n
	}
	return n & (1<<f.width - 1), b.Exact
}

// Decode returns the value of a code.
func (f Fixed) Decode(code uint64) float64 {
	return f.value(f.lo + int64((code-uint64(f.lo))&(1<<f.width-1)))
}

var fixedName = regexp.MustCompile(`^(?i)(U?)Q(\d{1,4})\.(\d{1,4})$`)

// parseFixed reads "Q2.14", "UQ0.8(overflow=wrap)".
func parseFixed(word string) (Format, bool, error) {
	head, o, err := nameAndOptions(word)
	m := fixedName.FindStringSubmatch(head)
	if m == nil {
		return nil, false, nil
	}
	var overflow Overflow
	if err == nil {
		overflow, err = o.overflow()
	}
	if err == nil {
		err = o.rest("fixed point has overflow")
	}
	if err != nil {
		return nil, true, fmt.Errorf("format %q: %w", word, err)
	}
	integer, _ := strconv.Atoi(m[2])
	fraction, _ := strconv.Atoi(m[3])
	f, err := NewFixed(integer, fraction, m[1] != "", overflow)
	if err != nil {
		return nil, true, fmt.Errorf("format %q: %w", word, err)
	}
	return f, true, nil
}
