package quant

import (
	"fmt"
	"math"
	"math/big"
	"sort"
	"testing"
)

// The oracle of the suite knows a format by the list of its values, which come from
// the definitions below, and rounds in whole multiples of 2^-grain. It shares no code
// with the formats, with Real or with Bracket.
const grain = 400

// entry is a value of a format with its code; outside are the values that would
// follow the range.
type entry struct {
	v      *big.Int // in units of 2^-grain
	x      float64
	code   uint64
	inside bool
}

// listed is a format as the oracle knows it.
type listed struct {
	name        string
	format      Coded
	at          []entry            // ascending
	nan         map[uint64]bool    // codes that are NaN
	infinite    map[uint64]float64 // codes that are infinite
	minusZero   map[uint64]bool    // codes that are -0
	tie         func(toward uint64) *big.Int
	neverZero   bool // magnitudes below the least become it
	snaps       bool // reals within 2^-51 of a value are it
	signedZeros bool
	overflow    Overflow
	infinityNaN bool
}

// shiftInt returns v 2^s, which must be a whole number.
func shiftInt(v *big.Int, s int) *big.Int {
	if s >= 0 {
		return v.Lsh(v, uint(s))
	}
	if v.Sign() != 0 && int(v.TrailingZeroBits()) < -s {
		panic("quant: the oracle's grain is too coarse")
	}
	return v.Rsh(v, uint(-s))
}

// realGrains returns a finite real; the rest of a sticky one is taken to be half a
// unit of its last bit.
func realGrains(x Real) *big.Int {
	v := new(big.Int).SetUint64(x.Hi)
	v.Lsh(v, 64).Or(v, new(big.Int).SetUint64(x.Lo)).Lsh(v, 1)
	if x.Sticky {
		v.Or(v, big.NewInt(1))
	}
	v = shiftInt(v, x.Exp-1+grain)
	if x.Neg {
		v.Neg(v)
	}
	return v
}

// ratGrains returns a rational that is a multiple of 2^-grain.
func ratGrains(r *big.Rat) *big.Int {
	n := new(big.Int).Lsh(r.Num(), grain)
	q, rest := n.QuoRem(n, r.Denom(), new(big.Int))
	if rest.Sign() != 0 {
		panic("quant: the oracle's grain is too coarse")
	}
	return q
}

// power returns 2^e as a rational.
func power(e int) *big.Rat {
	if e < 0 {
		return new(big.Rat).SetFrac(big.NewInt(1), new(big.Int).Lsh(big.NewInt(1), uint(-e)))
	}
	return new(big.Rat).SetInt(new(big.Int).Lsh(big.NewInt(1), uint(e)))
}

func (l *listed) add(r *big.Rat, code uint64, inside bool) {
	x, _ := r.Float64()
	l.at = append(l.at, entry{ratGrains(r), x, code, inside})
}

func (l *listed) sorted() *listed {
	sort.Slice(l.at, func(i, j int) bool { return l.at[i].v.Cmp(l.at[j].v) < 0 })
	return l
}

// listOf prepares the list of a format by name.
func listOf(t testing.TB, name string) *listed {
	t.Helper()
	f, err := ParseFormat(name)
	if err != nil {
		t.Fatal(err)
	}
	return &listed{
		name: name, format: f.(Coded), overflow: Saturate,
		nan: map[uint64]bool{}, infinite: map[uint64]float64{}, minusZero: map[uint64]bool{},
	}
}

// listFloat: (-1)^s 2^(e-bias) 1.f, and 2^(1-bias) 0.f for e = 0; top says which
// magnitudes are infinite or NaN.
func listFloat(t testing.TB, name string, exponent, fraction, bias int, top Top, overflow Overflow) *listed {
	l := listOf(t, name)
	l.overflow, l.signedZeros = overflow, true
	value := func(n int) *big.Rat {
		e, frac := n>>fraction, n&(1<<fraction-1)
		if e == 0 {
			e = 1
		} else {
			frac += 1 << fraction
		}
		return new(big.Rat).Mul(new(big.Rat).SetInt64(int64(frac)), power(e-bias-fraction))
	}
	all := 1 << (exponent + fraction)
	last := all - 1
	switch top {
	case TopIEEE:
		last = all - 1<<fraction - 1
	case TopNaNOnly:
		last = all - 2
	}
	for n := range all {
		for s := range 2 {
			code := uint64(s)<<(exponent+fraction) | uint64(n)
			r := value(n)
			if s == 1 {
				r.Neg(r)
			}
			switch {
			case n == 0 && s == 1:
				l.minusZero[code] = true
			case n <= last:
				l.add(r, code, true)
			case top == TopIEEE && n == last+1:
				l.infinite[code] = withSign(math.Inf(1), s == 1)
			default:
				l.nan[code] = true
			}
		}
	}
	l.add(value(last+1), 0, false)
	l.add(new(big.Rat).Neg(value(last+1)), 0, false)
	return l.sorted()
}

// listFixed: integers of a width, two's complement unless unsigned, times 2^-f.
func listFixed(t testing.TB, name string, width, fraction int, unsigned bool) *listed {
	l := listOf(t, name)
	value := func(n int) *big.Rat { return new(big.Rat).Mul(new(big.Rat).SetInt64(int64(n)), power(-fraction)) }
	for code := range 1 << width {
		n := code
		if !unsigned && code>>(width-1) == 1 {
			n -= 1 << width
		}
		l.add(value(n), uint64(code), true)
	}
	least, most := 0, 1<<width
	if !unsigned {
		least, most = -1<<(width-1), 1<<(width-1)
	}
	l.add(value(least-1), 1, false)
	l.add(value(most), 0, false)
	return l.sorted()
}

// positOf reads a pattern of any width as the posit standard does: sign, regime,
// two exponent bits, fraction, bit by bit.
func positOf(code uint64, width int) *big.Rat {
	negative := code>>(width-1) == 1
	if negative {
		code = -code & (1<<width - 1)
	}
	bits := fmt.Sprintf("%0*b", width, code)[1:]
	run := 1
	for run < len(bits) && bits[run] == bits[0] {
		run++
	}
	k := run - 1
	if bits[0] == '0' {
		k = -run
	}
	rest := ""
	if run+1 < len(bits) {
		rest = bits[run+1:]
	}
	e := 0
	for i := range 2 {
		e *= 2
		if i < len(rest) && rest[i] == '1' {
			e++
		}
	}
	v := power(4*k + e)
	for i := 2; i < len(rest); i++ {
		if rest[i] == '1' {
			v.Add(v, power(4*k+e-(i-1)))
		}
	}
	if negative {
		v.Neg(v)
	}
	return v
}

// listPosit: all patterns but 0, which is zero, and 100...0, which is not a real.
func listPosit(t testing.TB, width int) *listed {
	l := listOf(t, fmt.Sprintf("posit%d", width))
	l.neverZero, l.infinityNaN = true, true
	for code := range uint64(1) << width {
		switch code {
		case 0:
			l.add(new(big.Rat), 0, true)
		case 1 << (width - 1):
			l.nan[code] = true
		default:
			l.add(positOf(code, width), code, true)
		}
	}
	// The tie above a magnitude is its pattern with a one behind it.
	known := make([]*big.Int, 1<<(width-1))
	l.tie = func(toward uint64) *big.Int {
		if toward>>(width-1) == 1 {
			toward = -toward & (1<<width - 1)
		}
		if known[toward] == nil {
			known[toward] = ratGrains(positOf(toward<<1|1, width+1))
		}
		return known[toward]
	}
	return l.sorted()
}

// rootOf returns the binary64 number nearest to 2^(j/2^f), as the product of square
// roots of two for the bits of j, in 400 bits of big.Float.
func rootOf(j, f int) *big.Rat {
	v := new(big.Float).SetPrec(400).SetInt64(1)
	root := new(big.Float).SetPrec(400).SetInt64(2)
	for i := f - 1; i >= 0; i-- {
		root.Sqrt(root)
		if j>>i&1 == 1 {
			v.Mul(v, root)
		}
	}
	x, _ := v.Float64()
	return new(big.Rat).SetFloat64(x)
}

// listLog: 2^(n 2^-f - 2^(i-1)) for n from 1, zero for 0.
func listLog(t testing.TB, integer, fraction int) *listed {
	l := listOf(t, fmt.Sprintf("LNS%d.%d", integer, fraction))
	l.snaps, l.signedZeros = true, true
	roots := make([]*big.Rat, 1<<fraction)
	for j := range roots {
		roots[j] = rootOf(j, fraction)
	}
	width := integer + fraction
	for n := range 1<<width + 1 {
		v := new(big.Rat).Mul(roots[n%len(roots)], power(n/len(roots)-1<<(integer-1)))
		inside := n < 1<<width
		if n == 0 {
			l.add(new(big.Rat), 0, true)
			l.minusZero[1<<width] = true
			continue
		}
		l.add(v, uint64(n), inside)
		l.add(new(big.Rat).Neg(v), uint64(n)|1<<width, inside)
	}
	return l.sorted()
}

// listDraft: magnitudes as in listFloat with bias 2^(K-P-1), the last one infinite;
// NaN at the code of -0.
func listDraft(t testing.TB, width, precision int) *listed {
	l := listOf(t, fmt.Sprintf("binary%dp%d-draft", width, precision))
	l.overflow = ToInfinity
	half := 1 << (width - 1)
	bias := 1 << (width - precision - 1)
	for n := range half {
		e, frac := n>>(precision-1), n&(1<<(precision-1)-1)
		if e == 0 {
			e = 1
		} else {
			frac += 1 << (precision - 1)
		}
		v := new(big.Rat).Mul(new(big.Rat).SetInt64(int64(frac)), power(e-bias-precision+1))
		l.add(v, uint64(n), n < half-1)
		if n > 0 {
			l.add(new(big.Rat).Neg(v), uint64(n+half), n < half-1)
		}
	}
	l.nan[uint64(half)] = true
	l.infinite[uint64(half-1)], l.infinite[uint64(2*half-1)] = math.Inf(1), math.Inf(-1)
	return l.sorted()
}

// listPowers: E8M0.
func listPowers(t testing.TB) *listed {
	l := listOf(t, "E8M0")
	for code := range 255 {
		l.add(power(code-127), uint64(code), true)
	}
	l.nan[255] = true
	l.add(power(128), 255, false)
	return l.sorted()
}

// listTable: what it is given.
func listTable(t testing.TB, values ...float64) *listed {
	f, err := NewTable("", values, FormatDefault)
	if err != nil {
		t.Fatal(err)
	}
	l := listOf(t, f.String())
	for i, v := range values {
		l.add(new(big.Rat).SetFloat64(v), uint64(i), true)
	}
	for code := len(values); code < 1<<l.format.Limits().Bits; code++ {
		l.nan[uint64(code)] = true
	}
	return l.sorted()
}

// listADC: from + k/2^bits (to - from) in exact rationals, to the nearest binary32 number.
func listADC(t testing.TB, name string, bits int, from, to float32) *listed {
	l := listOf(t, name)
	lo := new(big.Rat).SetFloat64(float64(from))
	width := new(big.Rat).Sub(new(big.Rat).SetFloat64(float64(to)), lo)
	for k := range 1 << bits {
		v := new(big.Rat).Mul(big.NewRat(int64(k), 1<<bits), width)
		x, _ := v.Add(v, lo).Float32()
		l.add(new(big.Rat).SetFloat64(float64(x)), uint64(k), true)
	}
	return l.sorted()
}
