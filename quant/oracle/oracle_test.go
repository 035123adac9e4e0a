package oracle

import (
	"math"
	"math/big"
	"testing"
)

func split(t testing.TB, s Split) *Format {
	t.Helper()
	f, err := NewSplit(s)
	if err != nil {
		t.Fatal(err)
	}
	return f
}

func rat(t testing.TB, s string) *big.Rat {
	t.Helper()
	x, ok := new(big.Rat).SetString(s)
	if !ok {
		t.Fatalf("%q is no rational", s)
	}
	return x
}

var (
	half = Split{Exponent: 5, Fraction: 10, Bias: 15, Top: "ieee"}
	e4m3 = Split{Exponent: 4, Fraction: 3, Bias: 7, Top: "nan"}
	e2m1 = Split{Exponent: 2, Fraction: 1, Bias: 1, Top: "finite"}
)

// TestConversions: nearest-even conversions worked by hand or published for the
// OCP types (OFP8 1.0; MX 1.0, element types), recomputed with an independent
// program in exact rationals.
func TestConversions(t *testing.T) {
	for _, c := range []struct {
		s    Split
		x    string
		want float64
		e    string
	}{
		{half, "1/10", 0x1.998p-4, NoEvent},
		{half, "2049", 2048, NoEvent},
		{half, "2051", 2052, NoEvent},
		{half, "65519", 65504, NoEvent},
		{half, "65520", math.Inf(1), Overflow},
		{half, "-65520", math.Inf(-1), Overflow},
		{half, "1/33554432", 0, Underflow}, // 2^-25, a tie
		{half, "3/33554432", 0x1p-23, NoEvent},
		{e4m3, "464", 448, NoEvent},
		{e4m3, "465", 448, Saturation},
		{e4m3, "17/16", 1, NoEvent},
		{e4m3, "19/16", 1.25, NoEvent},
		{e2m1, "5/2", 2, NoEvent},
		{e2m1, "7/2", 4, NoEvent},
		{e2m1, "5", 4, NoEvent},
		{e2m1, "100", 6, Saturation},
	} {
		got, e := split(t, c.s).Round(rat(t, c.x), false, Rounding{Mode: "nearest-even"}, "", 0)
		if got != c.want || e != c.e {
			t.Errorf("%+v: %s -> %v %q, want %v %q", c.s, c.x, got, e, c.want, c.e)
		}
	}
}

// TestDirections covers every mode on both sides of zero for 2.25 between 2 and 3.
func TestDirections(t *testing.T) {
	f := split(t, e2m1)
	for _, c := range []struct {
		mode     string
		pos, neg float64
	}{
		{"nearest-even", 2, -2},
		{"nearest-away", 2, -2},
		{"toward-zero", 2, -2},
		{"up", 3, -2},
		{"down", 2, -3},
		{"to-odd", 3, -3}, // the code of 2 is even
	} {
		for x, want := range map[string]float64{"9/4": c.pos, "-9/4": c.neg} {
			if got, _ := f.Round(rat(t, x), false, Rounding{Mode: c.mode}, "", 0); got != want {
				t.Errorf("%s: %s -> %v, want %v", c.mode, x, got, want)
			}
		}
	}
}

// TestChances: probabilities of moving away for N = 2 random bits at fractions
// 1/8, 3/8 and 7/8 of the gap, the three variants of the IEEE P3109 draft, v4.0,
// section 4.7.4.
func TestChances(t *testing.T) {
	f := split(t, half)
	for variant, want := range map[string][3]string{
		"truncated":    {"0", "1/4", "3/4"},
		"centred":      {"1/4", "1/2", "1"},
		"centred-even": {"0", "1/2", "1"},
	} {
		for i, eighths := range []int64{1, 3, 7} {
			x := new(big.Rat).Add(big.NewRat(1, 1), big.NewRat(eighths, 8*1024))
			r := Rounding{Mode: "stochastic", Bits: 2, Variant: variant}
			if got := f.Chance(x, r); got.Cmp(rat(t, want[i])) != 0 {
				t.Errorf("%s at %d/8: %v, want %s", variant, eighths, got, want[i])
			}
			moved := int64(0)
			for u := range uint64(4) {
				if v, _ := f.Round(x, false, r, "", u); v > 1 {
					moved++
				}
			}
			if got := big.NewRat(moved, 4); got.Cmp(rat(t, want[i])) != 0 {
				t.Errorf("%s at %d/8: moved with chance %v, want %s", variant, eighths, got, want[i])
			}
		}
	}
	if got := f.Chance(rat(t, "1/5"), Rounding{}); got.Cmp(rat(t, "2/5")) != 0 {
		t.Errorf("ideal chance of 1/5 in binary16: %v", got) // 0.2 = 1638.4 x 2^-13
	}
}

// TestListAgainstSplit: a list of the values of a small format rounds as the split
// does, codes included.
func TestListAgainstSplit(t *testing.T) {
	s := split(t, e2m1)
	l := List{Width: 4, Above: rat(t, "8"), Below: rat(t, "-8")}
	for code := range uint64(16) {
		if code != 8 { // the negative zero
			l.Values = append(l.Values, Value{new(big.Rat).SetFloat64(s.Decode(code)), code})
		}
	}
	f, err := NewList(l)
	if err != nil {
		t.Fatal(err)
	}
	modes := []string{"nearest-even", "nearest-away", "toward-zero", "up", "down", "to-odd"}
	for n := int64(-640); n <= 640; n++ {
		x := big.NewRat(n, 64)
		for _, m := range modes {
			a, ea := s.Round(x, false, Rounding{Mode: m}, "", 0)
			b, eb := f.Round(x, false, Rounding{Mode: m}, "", 0)
			if a != b || ea != eb {
				t.Fatalf("%s: %v -> %v %q and %v %q", m, x, a, ea, b, eb)
			}
		}
		for u := range uint64(8) {
			r := Rounding{Mode: "stochastic", Bits: 3, Variant: "centred-even"}
			a, _ := s.Round(x, false, r, "", u)
			b, _ := f.Round(x, false, r, "", u)
			if a != b {
				t.Fatalf("stochastic %d: %v -> %v and %v", u, x, a, b)
			}
		}
	}
}

// TestTwosComplement: a list with unlike bounds saturates at its own ends.
func TestTwosComplement(t *testing.T) {
	l := List{Width: 4, Above: rat(t, "2"), Below: rat(t, "-9/4")}
	for n := int64(-8); n < 8; n++ {
		l.Values = append(l.Values, Value{big.NewRat(n, 4), uint64(n) & 15})
	}
	f, err := NewList(l)
	if err != nil {
		t.Fatal(err)
	}
	for x, want := range map[string]float64{"17/8": 1.75, "-17/8": -2, "-19/8": -2, "15/8": 1.75, "-1/16": 0, "-3/16": -0.25} {
		got, _ := f.Round(rat(t, x), false, Rounding{Mode: "nearest-even"}, "", 0)
		if got != want || math.Signbit(got) != (want < 0) {
			t.Errorf("%s -> %v, want %v", x, got, want)
		}
	}
}

// TestWalk: the additions of each order in turn, spelt out.
func TestWalk(t *testing.T) {
	for _, c := range []struct {
		o    Order
		n    int
		want string
	}{
		{Order{Kind: "sequential"}, 3, "(((0+a)+b)+c)"},
		{Order{Kind: "chunk", K: 2}, 5, "(((0+((0+a)+b))+((0+c)+d))+(0+e))"},
		{Order{Kind: "lanes", K: 3}, 5, "((((0+a)+d)+((0+b)+e))+(0+c))"},
		{Order{Kind: "pairwise"}, 5, "(((a+b)+(c+d))+e)"},
		{Order{Kind: "pairwise"}, 1, "(a+0)"},
		{Order{Kind: "pairwise"}, 0, "0"},
	} {
		got, err := Walk(c.o, c.n, "0", func(k int) string { return string(rune('a' + k)) },
			func(_ Step, a, b string) string { return "(" + a + "+" + b + ")" })
		if err != nil || got != c.want {
			t.Errorf("%+v of %d: %s (%v), want %s", c.o, c.n, got, err, c.want)
		}
	}
	if _, err := Walk(Order{Kind: "spiral"}, 1, "", func(int) string { return "" }, func(Step, string, string) string { return "" }); err == nil {
		t.Error("an unknown order has a sum")
	}
}

// TestPosits: values of posit8 by hand from the 2022 standard's definition (from
// memory): one, its neighbours, the ends; a tie that is a geometric mean.
func TestPosits(t *testing.T) {
	f, err := NewPosit(8)
	if err != nil {
		t.Fatal(err)
	}
	for code, want := range map[uint64]float64{
		0: 0, 0x40: 1, 0x41: 1.125, 0x3f: 0.9375, 0x48: 2, 0x7f: 0x1p24, 0x01: 0x1p-24, 0xc0: -1, 0xff: -0x1p-24, 0x7e: 0x1p20,
	} {
		if got := f.Decode(code); got != want {
			t.Errorf("code %02x: %v, want %v", code, got, want)
		}
	}
	if !math.IsNaN(f.Decode(0x80)) {
		t.Error("NaR is not NaN")
	}
	for x, want := range map[string]float64{
		"4194303":   0x1p20, // below 2^22, the tie of 2^20 and 2^24
		"4194305":   0x1p24,
		"4194304":   0x1p20, // 7e is even
		"1e-30":     0x1p-24,
		"-1e30":     -0x1p24,
		"1.0625":    1,
		"1.1875":    1.25,
		"1.0626":    1.125,
		"-1.062501": -1.125,
	} {
		if got, _ := f.Round(rat(t, x), false, Rounding{Mode: "nearest-even"}, "", 0); got != want {
			t.Errorf("%s -> %v, want %v", x, got, want)
		}
	}
}

// TestDraftLayout: the ends of two formats of the IEEE P3109 draft, v4.0 (as the
// interim report of 2026-06-26 states them): Binary8p4 224, Binary8p3 49152.
func TestDraftLayout(t *testing.T) {
	for _, c := range []struct {
		s   Split
		max float64
	}{
		{Split{Exponent: 4, Fraction: 3, Bias: 8, Top: "infinity", Overflow: "infinity"}, 224},
		{Split{Exponent: 5, Fraction: 2, Bias: 16, Top: "infinity", Overflow: "infinity"}, 49152},
	} {
		f := split(t, c.s)
		if got := f.Decode(0x7e); got != c.max {
			t.Errorf("%+v: 7e is %v", c.s, got)
		}
		if !math.IsInf(f.Decode(0x7f), 1) || !math.IsInf(f.Decode(0xff), -1) || !math.IsNaN(f.Decode(0x80)) || f.Decode(0x40) != 1 {
			t.Errorf("%+v: specials", c.s)
		}
	}
}

// TestIntegers: fixed point by hand: bounds, ties to even codes, one zero, wrapping.
func TestIntegers(t *testing.T) {
	signed, err := NewInteger(8, -4, false, "saturate")
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range []struct {
		x, overflow string
		want        float64
	}{
		{"1/32", "", 0},
		{"3/32", "", 0.125},
		{"100", "", 7.9375},
		{"-100", "", -8},
		{"8", "wrap", -8},
		{"-17/2", "wrap", 7.5},
		{"16", "wrap", 0},
		{"-1/100", "", 0},
	} {
		got, _ := signed.Round(rat(t, c.x), false, Rounding{Mode: "nearest-even"}, c.overflow, 0)
		if got != c.want || math.Signbit(got) != (c.want < 0) {
			t.Errorf("%s %q -> %v, want %v", c.x, c.overflow, got, c.want)
		}
	}
	if signed.Decode(0x80) != -8 || signed.Decode(0x7f) != 7.9375 || signed.Decode(0xff) != -0.0625 {
		t.Error("codes")
	}
	unsigned, err := NewInteger(4, 0, true, "saturate")
	if err != nil {
		t.Fatal(err)
	}
	if got, _ := unsigned.Round(rat(t, "-1"), false, Rounding{Mode: "nearest-even"}, "wrap", 0); got != 15 {
		t.Errorf("-1 wraps to %v", got)
	}
	if unsigned.Decode(15) != 15 {
		t.Error("unsigned codes")
	}
}
