package quant

import (
	"fmt"
	"math"
	"math/big"
	"math/bits"
	"regexp"
	"sort"
	"strconv"
	"sync"
)

// The bounds of logarithmic formats: the exponent in binary64, the table of roots
// small.
const (
	maxLogInteger  = 10
	maxLogFraction = 10
)

// Logarithmic is a base-2 logarithmic format, LNSi.f: a sign and a fixed-point
// exponent of i bits before the point, its sign among them, and f behind it. A value
// type, comparable with ==.
//
// Code n of a magnitude, without the sign bit, stands for 2^(n 2^-f - 2^(i-1)), n = 1
// to 2^(i+f) - 1, and for zero when n = 0. There are no specials; results beyond the
// range saturate, or become NaN where asked for.
//
// 2^(n 2^-f) is irrational: the value here is the binary64 number nearest to it, and
// rounding, in every mode, is by the place in the gap between two such values, not
// between their exponents. A real within 2^-51 of a value, relative to it, is taken
// as that value: an exact product of two values, which differs from the value of the
// summed exponents by binary64's own rounding, so multiplies as the format does.
type Logarithmic struct {
	integer, fraction int
	overflow          Overflow
}

// NewLogarithmic returns LNSi.f. Overflow is FormatDefault or Saturate, or ToNaN.
func NewLogarithmic(integer, fraction int, overflow Overflow) (Logarithmic, error) {
	l := Logarithmic{integer, fraction, overflow}
	if overflow == FormatDefault {
		l.overflow = Saturate
	}
	switch {
	case integer < 1 || integer > maxLogInteger || fraction < 0 || fraction > maxLogFraction || integer+fraction < 2:
		return Logarithmic{}, fmt.Errorf("quant: LNS%d.%d: 1 to %d bits before the point, 0 to %d behind it and two in all",
			integer, fraction, maxLogInteger, maxLogFraction)
	case l.overflow != Saturate && l.overflow != ToNaN:
		return Logarithmic{}, fmt.Errorf("quant: LNS%d.%d: overflow %s: a logarithmic format saturates or gives nan", integer, fraction, overflow)
	}
	return l, nil
}

// rootTables hold, for every f, the significands of 2^(j 2^-f), j = 0 to 2^f - 1, as
// 64-bit words with the top bit set, of which binary64's 53 are used.
var rootTables [maxLogFraction + 1]struct {
	once  sync.Once
	roots []uint64
}

// roots returns the table for f: 2^(2^-f) by f square roots of integers of 320 bits,
// its powers cut to 320 bits. 2^f steps lose less than 2^-300 together; that no power
// comes so near the middle of two binary64 numbers is what TestRoots proves.
func roots(f int) []uint64 {
	t := &rootTables[f]
	t.once.Do(func() {
		const precision = 320
		one := new(big.Int).Lsh(big.NewInt(1), precision)
		root := new(big.Int).Lsh(one, 1)
		for range f {
			root.Sqrt(root.Lsh(root, precision))
		}
		power := new(big.Int).Set(one)
		for range 1 << f {
			// The nearest 53 bits, then left-aligned.
			nearest := new(big.Int).Rsh(power, precision-53)
			nearest.Add(nearest, big.NewInt(1)).Rsh(nearest, 1)
			t.roots = append(t.roots, nearest.Uint64()<<11)
			power.Mul(power, root).Rsh(power, precision)
		}
	})
	return t.roots
}

// String returns the canonical name: "LNS5.10".
func (l Logarithmic) String() string {
	name := fmt.Sprintf("LNS%d.%d", l.integer, l.fraction)
	if l.overflow != Saturate {
		name += "(overflow=" + l.overflow.String() + ")"
	}
	return name
}

// last is the code of the largest magnitude.
func (l Logarithmic) last() int { return 1<<(l.integer+l.fraction) - 1 }

// value is the value of magnitude n, on beyond the last one.
func (l Logarithmic) value(n int) float64 {
	if n == 0 {
		return 0
	}
	q := n>>l.fraction - 1<<(l.integer-1)
	return scaled(roots(l.fraction)[n&(1<<l.fraction-1)]>>11, q-fractionBits64)
}

// Limits states the format's figures.
func (l Logarithmic) Limits() Limits {
	return Limits{
		Bits: 1 + l.integer + l.fraction, Exponent: l.integer + l.fraction,
		Max: l.value(l.last()), Lowest: -l.value(l.last()), MinNormal: l.value(1), MinSubnormal: l.value(1),
		DefaultOverflow: l.overflow, Binary32: l.fraction == 0 && l.integer <= 8,
	}
}

// Bracket implements Format.
func (l Logarithmic) Bracket(x Real) Bracket {
	if x.IsZero() {
		return Bracket{Exact: true}
	}
	exponent := x.Exp + 127
	if exponent > 1<<(l.integer-1) {
		return Bracket{Toward: math.MaxFloat64, Away: math.Inf(1), Exact: true}
	}
	table := roots(l.fraction)
	j := sort.Search(len(table), func(j int) bool { return table[j] > x.Hi }) - 1
	n := (exponent+1<<(l.integer-1))<<l.fraction + j
	switch {
	case n >= 1 && nearRoot(x, table[j], false):
		return Bracket{Toward: l.value(n), Away: l.value(n + 1), Exact: true, Odd: n&1 != 0}
	case n >= 0 && nearRoot(x, after(table, j), true):
		return Bracket{Toward: l.value(n + 1), Away: l.value(n + 2), Exact: true, Odd: (n+1)&1 != 0}
	case n < 1:
		return between(x, 0, l.value(1), false)
	}
	return between(x, l.value(n), l.value(n+1), n&1 != 0)
}

// after is the root behind number j, 2 written as 0.
func after(table []uint64, j int) uint64 {
	if j+1 == len(table) {
		return 0
	}
	return table[j+1]
}

// nearRoot reports whether the significand of x is within 2^-51 of root, relative to it:
// x at or above it, or below it, where the root may be 2, written 0.
func nearRoot(x Real, root uint64, below bool) bool {
	hi, lo := x.Hi-root, x.Lo
	if below {
		var borrow uint64
		lo, borrow = bits.Sub64(0, x.Lo, 0)
		hi, _ = bits.Sub64(root, x.Hi, borrow)
	}
	// The limit is root 2^-51 in units of the last bit of x: root 2^13.
	limitHi, limitLo := root>>51, root<<13
	if root == 0 {
		limitHi, limitLo = 1<<13, 0
	}
	if hi != limitHi {
		return hi < limitHi
	}
	return lo < limitLo || lo == limitLo && (below || !x.Sticky)
}

// Encode returns the code of a value.
func (l Logarithmic) Encode(x float64) (uint64, bool) {
	if x-x != 0 {
		return 0, false
	}
	var sign uint64
	if math.Signbit(x) {
		sign = 1 << (l.integer + l.fraction)
	}
	x = math.Abs(x)
	n := sort.Search(l.last()+1, func(n int) bool { return l.value(n) >= x })
	return sign | uint64(n), n <= l.last() && l.value(n) == x
}

// Decode returns the value of a code.
func (l Logarithmic) Decode(code uint64) float64 {
	x := l.value(int(code) & l.last())
	if code>>(l.integer+l.fraction)&1 != 0 {
		x = -x
	}
	return x
}

var logName = regexp.MustCompile(`^(?i)LNS(\d{1,3})\.(\d{1,3})$`)

// parseLogarithmic reads "LNS5.10", "LNS4.3(overflow=nan)".
func parseLogarithmic(word string) (Format, bool, error) {
	head, o, err := nameAndOptions(word)
	m := logName.FindStringSubmatch(head)
	if m == nil {
		return nil, false, nil
	}
	var overflow Overflow
	if err == nil {
		overflow, err = o.overflow()
	}
	if err == nil {
		err = o.rest("a logarithmic format has overflow")
	}
	if err != nil {
		return nil, true, fmt.Errorf("format %q: %w", word, err)
	}
	integer, _ := strconv.Atoi(m[1])
	fraction, _ := strconv.Atoi(m[2])
	l, err := NewLogarithmic(integer, fraction, overflow)
	if err != nil {
		return nil, true, fmt.Errorf("format %q: %w", word, err)
	}
	return l, true, nil
}
