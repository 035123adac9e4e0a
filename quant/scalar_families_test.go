package quant

import (
	"math"
	"math/big"
	"math/rand/v2"
	"strings"
	"testing"

	"pgregory.net/rapid"
)

// TestFixedWrap: results beyond the range wrap modulo 2^width, from near and from
// far, in every rounding, held to integers of math/big.
func TestFixedWrap(t *testing.T) {
	r := rand.New(rand.NewPCG(51, 52))
	for _, name := range []string{"Q2.14(overflow=wrap)", "UQ3.5(overflow=wrap)", "Q8.0(overflow=wrap)", "Q20.33(overflow=wrap)"} {
		f, err := ParseFormat(name)
		if err != nil {
			t.Fatal(err)
		}
		fixed := f.(Fixed)
		least, most := fixed.Limits().Lowest, fixed.Limits().Max
		for _, mode := range suiteRoundings() {
			p := Point{Format: f, Rounding: mode}
			for range 300 {
				a, b := math.Ldexp(r.NormFloat64(), r.IntN(150)-60), math.Ldexp(r.NormFloat64(), r.IntN(10))
				x := ExactProduct(a, b)
				word := r.Uint32()
				got, event := p.Round(x, word)
				n := wrapOf(x, fixed.fraction, mode, word)
				v := math.Ldexp(float64(n.Int64()), -fixed.fraction)
				inside := n.IsInt64() && v >= least && v <= most
				if !inside {
					modulus := new(big.Int).Lsh(big.NewInt(1), uint(fixed.width))
					n.Sub(n, big.NewInt(fixed.lo)).Mod(n, modulus).Add(n, big.NewInt(fixed.lo))
					v = math.Ldexp(float64(n.Int64()), -fixed.fraction)
				}
				if got != v || (event == Overflowed) == inside {
					t.Fatalf("%v: %v x %v (word %08x): %v %d, want %v", p, a, b, word, got, event, v)
				}
			}
		}
	}
	p := Point{Format: mustFormatOf("Q2.14(overflow=wrap)")}
	if v, e := p.Round(Real{Kind: Infinite}, 0); v == v || e != BecameNaN {
		t.Errorf("infinity wraps to %v", v)
	}
}

// wrapOf rounds x 2^fraction to an integer.
func wrapOf(x Real, fraction int, r Rounding, word uint32) *big.Int {
	q := new(big.Rat).Mul(new(big.Rat).SetFrac(realGrains(x), new(big.Int).Lsh(big.NewInt(1), grain)), power(fraction))
	n, rest := new(big.Int).QuoRem(new(big.Int).Abs(q.Num()), q.Denom(), new(big.Int))
	l := listed{}
	toward, away := entry{v: new(big.Int).Mul(n, q.Denom()), code: n.Uint64() & 1, x: 1}, entry{}
	away.v = new(big.Int).Add(toward.v, q.Denom())
	m := new(big.Int).Abs(q.Num())
	if x.Neg { // goesAway takes the side from the number
		m.Neg(m)
		toward.v.Neg(toward.v)
		away.v.Neg(away.v)
	}
	if rest.Sign() != 0 && l.goesAway(toward, away, m, r, word) {
		n.Add(n, big.NewInt(1))
	}
	if x.Neg {
		n.Neg(n)
	}
	return n
}

// TestGupta: <IL, FL> = <2, 14> is [-2, 1.99993896484375] in steps of 2^-14 (Gupta et
// al. 2015, from memory).
func TestGupta(t *testing.T) {
	l := mustFormatOf("Q2.14").Limits()
	if l.Lowest != -2 || l.Max != 1.99993896484375 || l.MinSubnormal != 0x1p-14 || l.Bits != 16 {
		t.Errorf("%+v", l)
	}
}

// TestRoots: each root is the binary64 number nearest to 2^(j/2^f): the integers
// (2m - 1)^(2^f) and (2m + 1)^(2^f), m the 53-bit significand, enclose 2^j times
// 2^(53 2^f).
func TestRoots(t *testing.T) {
	for f := range maxLogFraction + 1 {
		table := roots(f)
		if len(table) != 1<<f || table[0] != 1<<63 {
			t.Fatalf("f = %d: %d roots, the first %x", f, len(table), table[0])
		}
		step := 1
		if f > 7 {
			step = 7 << (f - 8) // powers of 2^8 and more take long
		}
		power := big.NewInt(1 << f)
		for j := 1; j < len(table); j += step {
			if table[j]&(1<<11-1) != 0 {
				t.Fatalf("root %d of %d has more than 53 bits", j, f)
			}
			m := new(big.Int).SetUint64(table[j] >> 11)
			m.Lsh(m, 1)
			below := new(big.Int).Exp(new(big.Int).Sub(m, big.NewInt(1)), power, nil)
			above := new(big.Int).Exp(new(big.Int).Add(m, big.NewInt(1)), power, nil)
			middle := new(big.Int).Lsh(big.NewInt(1), uint(j+53<<f))
			if below.Cmp(middle) >= 0 || above.Cmp(middle) <= 0 {
				t.Fatalf("root %d of %d is not the nearest", j, f)
			}
		}
	}
}

// TestLogProducts: an exact product of two logarithmic values is the value of the
// summed exponents, in every rounding; so is a quotient.
func TestLogProducts(t *testing.T) {
	r := rand.New(rand.NewPCG(53, 54))
	f := mustFormatOf("LNS6.9").(Logarithmic)
	middle := 1 << (6 + 9 - 1)
	for _, mode := range suiteRoundings() {
		p := Point{Format: f, Rounding: mode}
		for range 500 {
			a, b := 1+r.IntN(f.last()), 1+r.IntN(f.last())
			if n := a + b - middle; n >= 1 && n <= f.last() {
				if v, _ := p.Round(ExactProduct(f.value(a), -f.value(b)), r.Uint32()); v != -f.value(n) {
					t.Fatalf("%v: codes %d and %d multiply to %v, want %v", p, a, b, v, -f.value(n))
				}
			}
			if n := a - b + middle; n >= 1 && n <= f.last() {
				if v, _ := p.Round(ExactQuotient(f.value(a), f.value(b)), r.Uint32()); v != f.value(n) {
					t.Fatalf("%v: codes %d and %d divide to %v, want %v", p, a, b, v, f.value(n))
				}
			}
		}
	}
}

// TestPositTable: values of posits of the 2022 standard, from its definition worked
// by hand: posit8 and posit16.
func TestPositTable(t *testing.T) {
	for _, c := range []struct {
		name string
		code uint64
		want float64
	}{
		{"posit8", 0x40, 1},
		{"posit8", 0x01, 0x1p-24},
		{"posit8", 0x7f, 0x1p24},
		{"posit8", 0x02, 0x1p-20},
		{"posit8", 0x44, 1.5},
		{"posit8", 0x48, 2},
		{"posit8", 0x60, 16},
		{"posit8", 0xc0, -1},
		{"posit8", 0x30, 0.25},
		{"posit16", 0x4000, 1},
		{"posit16", 0x7fff, 0x1p56},
		{"posit16", 0x0001, 0x1p-56},
		{"posit16", 0x4c00, 3},
		{"posit32", 0x7fffffff, 0x1p120},
		{"posit32", 0x40000001, 1 + 0x1p-27},
	} {
		f := mustFormatOf(c.name).(Posit)
		if got := f.Decode(c.code); got != c.want {
			t.Errorf("%s %x: %v, want %v", c.name, c.code, got, c.want)
		}
		if code, ok := f.Encode(c.want); !ok || code != c.code {
			t.Errorf("%s: %v has pattern %x %v, want %x", c.name, c.want, code, ok, c.code)
		}
	}
	// Patterns 7c to 7f are 2^16, 2^18, 2^20 and 2^24. The ties between them are the
	// patterns of 9 bits, 2^17, 2^19 and 2^22: exponent bits, not the middles of the gaps.
	p := Point{Format: mustFormatOf("posit8")}
	for x, want := range map[float64]float64{
		0x1p17: 0x1p16, 0x1p17 + 1: 0x1p18, 0x1p18: 0x1p18, 0x1p19: 0x1p20, 0x1p19 - 1: 0x1p18, // 7d is odd
		0x1p22: 0x1p20, 0x1p22 + 1: 0x1p24, 0x1p30: 0x1p24, 0x1p-30: 0x1p-24, -0x1p-30: -0x1p-24,
	} {
		if got, _ := p.Round(Exactly(x), 0); got != want {
			t.Errorf("posit8: %v -> %v, want %v", x, got, want)
		}
	}
	// posit32 over random reals: neighbouring patterns enclose, and the tie is as the
	// standard says.
	r := rand.New(rand.NewPCG(55, 56))
	f := Posit{32}
	p.Format = f
	for range 20000 {
		x := math.Ldexp(1+r.Float64(), r.IntN(250)-125)
		lo := uint64(1)
		if x >= 0x1p-120 {
			lo, _ = f.pattern(min(x, 0x1p120))
		}
		want := f.Decode(lo)
		if lo < 1<<31-1 && x > want {
			tie, _ := positOf(lo<<1|1, 33).Float64()
			if x > tie || x == tie && lo&1 == 1 {
				want = f.Decode(lo + 1)
			}
		}
		if got, _ := p.Round(Exactly(x), 0); got != want {
			t.Fatalf("posit32: %v -> %v, want %v", x, got, want)
		}
	}
}

// TestDraftFigures: the figures of the draft's formats that are public.
func TestDraftFigures(t *testing.T) {
	for name, most := range map[string]float64{"binary8p4": 224, "Binary8p3se": 49152} {
		f := mustFormatOf(name).(Draft)
		if l := f.Limits(); l.Max != most || f.Decode(0x7e) != most {
			t.Errorf("%s: %+v, code 7e is %v", name, l, f.Decode(0x7e))
		}
		if x := f.Decode(0x80); x == x || f.Decode(0) != 0 || math.Signbit(f.Decode(0)) || !math.IsInf(f.Decode(0x7f), 1) || !math.IsInf(f.Decode(0xff), -1) {
			t.Errorf("%s: specials", name)
		}
		if !strings.Contains(f.String(), "draft") {
			t.Errorf("%s is called %s", name, f)
		}
	}
}

// TestGapFraction: fractions of gaps against rationals, gaps of many bits and sticky
// reals among them.
func TestGapFraction(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		toward := rapid.Float64Range(-4, 4).Draw(t, "toward")
		away := toward + math.Ldexp(rapid.Float64Range(1, 2).Draw(t, "gap"), rapid.IntRange(-30, 3).Draw(t, "exponent"))
		x := toward + rapid.Float64Range(0, 1).Draw(t, "place")*(away-toward)
		if !(away > 0 && away > toward && x >= max(0, toward) && x < away) {
			return
		}
		real := Exactly(x)
		sticky := rapid.Bool().Draw(t, "sticky") && x > 0
		real.Sticky = sticky
		fraction, rest := gapFraction(real, toward, away)
		f := subRat(exactOf(x), exactOf(toward))
		f.Quo(f, subRat(exactOf(away), exactOf(toward))).Mul(f, power(64))
		whole, remainder := new(big.Int).QuoRem(f.Num(), f.Denom(), new(big.Int))
		if fraction != whole.Uint64() || rest != (remainder.Sign() != 0 || sticky) {
			t.Fatalf("%v from %v to %v: %x %v, want %x %v", x, toward, away, fraction, rest, whole, remainder)
		}
	})
}

// TestTables: what a table accepts, writes and reads back.
func TestTables(t *testing.T) {
	table, err := NewTable("steps", []float64{-1, -0.1, 0, 1e-3}, FormatDefault)
	if err != nil {
		t.Fatal(err)
	}
	if table.Name() != "steps" || table.Len() != 4 || table.String() != "table(name=steps,-1,-0.1,0,0.001)" || table.Limits().Binary32 {
		t.Errorf("%v %+v", table, table.Limits())
	}
	if same, _ := NewTable("steps", []float64{-1, -0.1, math.Copysign(0, -1), 1e-3}, Saturate); same != table {
		t.Errorf("%v and %v differ", same, table)
	}
	for _, c := range []struct {
		name   string
		values []float64
		policy Overflow
		want   string
	}{
		{"a", []float64{1}, 0, "2 to 65536"},
		{"a", []float64{2, 1}, 0, "ascend"},
		{"a", []float64{1, 1}, 0, "value 2, 1: values must ascend"},
		{"a", []float64{1, math.Inf(1)}, 0, "finite"},
		{"a", []float64{math.NaN(), 1}, 0, "finite"},
		{"a", []float64{1e-20, 1}, 0, "2^40"},
		{"a", []float64{0, 1}, Wrap, "saturates"},
		{"a b", []float64{0, 1}, 0, "name"},
		{"a,b", []float64{0, 1}, 0, "name"},
	} {
		if f, err := NewTable(c.name, c.values, c.policy); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%v: %v, %v; want an error with %q", c.values, f, err, c.want)
		}
	}
}

// TestFamilyNames: words to canonical names and back.
func TestFamilyNames(t *testing.T) {
	for word, want := range map[string]string{
		"q2.14": "Q2.14", "uq0.8": "UQ0.8", "Q2.14(overflow=saturate)": "Q2.14", "Q4.4(overflow=wrap)": "Q4.4(overflow=wrap)",
		"Posit16": "posit16", "POSIT8": "posit8", "lns5.10": "LNS5.10", "LNS4.3(overflow=nan)": "LNS4.3(overflow=nan)",
		"binary8p4": "binary8p4-draft", "Binary8p3se": "binary8p3-draft", "binary8p4-draft(overflow=saturate)": "binary8p4-draft(overflow=saturate)",
		"e8m0": "E8M0", "E8M0(top=ieee)": "E8M0(top=ieee)", "E8M0(top=finite)": "E8M0(top=finite)", "E8M0(bias=120)": "E8M0(bias=120)",
		"table(-1, 0, 1)": "table(-1,0,1)", "TABLE(0,1e3,name=x)": "table(name=x,0,1000)", "table(0,1,overflow=nan)": "table(overflow=nan,0,1)",
		"int8": "INT8", "INT8(scale=max)": "INT8", "uint4(zero=fit,scale=99.9%)": "UINT4(scale=99.9%,zero=fit)",
		"INT8(scale=0.1,zero=3,per=channel)": "INT8(scale=0.1,zero=3,per=channel)", "INT8(scale=100%,per=tensor)": "INT8",
		"mxfp8": "MXFP8(E4M3)", "MXFP8(e5m2)": "MXFP8(E5M2)", "MXFP6": "MXFP6(E3M2)", "MXFP6(E2M3,block=16)": "MXFP6(E2M3,block=16)",
		"MXFP4": "MXFP4", "MXFP4(block=32,rule=floor)": "MXFP4", "MXFP4(rule=least-error)": "MXFP4(rule=least-error)", "mxint8": "MXINT8",
		"MXFP4(block=16,scale=E4M3,rule=nearest,tensor=fp32)": "block(E2M1,block=16,scale=E4M3,rule=nearest,tensor=binary32)",
		"block(E2M1)": "MXFP4", "block(E4M3)": "MXFP8(E4M3)", "block(Q2.6,block=8)": "MXINT8(block=8)", "block(E3M4,rule=up)": "block(E3M4,rule=up)",
		"block(E4M3(top=ieee),scale=E5M0(top=finite),block=4)": "block(E4M3(top=ieee),block=4,scale=E5M0(top=finite))",
	} {
		f, err := ParseFormat(word)
		if err != nil {
			t.Errorf("%q: %v", word, err)
			continue
		}
		if f.String() != want {
			t.Errorf("%q is called %q, want %q", word, f, want)
		}
		if again, err := ParseFormat(f.String()); err != nil || again != f {
			t.Errorf("%q reads back as %v, %v", f, again, err)
		}
	}
}

// TestFamilyNameErrors: each refusal names the fault.
func TestFamilyNameErrors(t *testing.T) {
	for word, want := range map[string]string{
		"Q0.8": "at least 1", "Q40.20": "60 bits", "UQ0.0": "bits", "Q1.0": "2 to 53", "Q2.14(overflow=infinity)": "saturates, wraps",
		"Q2.14(width=16)": "unknown option", "Q2.14(overflow=wrap": "closing", "Q2.14(overflow=wrap,overflow=nan)": "twice",
		"posit2": "3 to 32", "posit64": "3 to 32", "LNS0.4": "before the point", "LNS5.11": "before the point", "LNS4.3(overflow=wrap)": "saturates",
		"binary9p4": "3 to 8", "binary8p8": "precision", "binary8p4(overflow=wrap)": "only integers", "binary8p4(bias=3)": "unknown option",
		"table(1)": "2 to 65536", "table(1,x)": "not a number", "table(0,1,2,colour=red)": "unknown option", "table(": "closing",
		"INT1": "2 to 24", "INT33": "2 to 24", "INT8(scale=-1)": "positive", "INT8(scale=101%)": "positive", "INT8(zero=127)": "-128 to 126",
		"INT8(zero=x)": "or fit", "INT8(per=row)": "tensor or channel", "INT8(axis=1)": "unknown option",
		"MXFP8(E3M2)": "E4M3 or E5M2", "MXFP4(block=0)": "number of its elements", "MXFP4(rule=ceiling)": "one of floor", "block()": "unknown format",
		"block(block=3)": "name the element", "block(fp64)": "binary32", "block(MXFP4)": "scalar", "MXFP4(scale=fp64)": "binary32", "MXFP4(scale=INT8)": "scalar",
		"MXFP4(tensor=fp16)": "binary32", "MXFP4(scale=fp32,rule=least-error)": "at most 8 bits", "MXFP4(E2M1,E2M1)": "unknown option",
		"posit": "posit8", "MXFP5": "MXFP",
	} {
		f, err := ParseFormat(word)
		if err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%q: %v, %v; want an error with %q", word, f, err, want)
		}
	}
}
