package quant

import (
	"math"
	"math/rand/v2"
	"testing"
)

// TestDoubleRoundingIsSeen pins sums whose binary64 rounding is a tie of the sum's
// format that the exact sum is not: each needs the rest of the binary64 sum.
func TestDoubleRoundingIsSeen(t *testing.T) {
	for _, c := range []struct {
		acc  string
		a, b []float64
		want float64
	}{
		// 2^-80 + (1 + 2^-8): just above the middle of two bfloat16 numbers.
		{"product exact; sum bf16", []float64{0x1p-80, 1 + 0x1p-8}, []float64{1, 1}, 1 + 0x1p-7},
		{"product fp32; sum bf16", []float64{0x1p-80, 1 + 0x1p-8}, []float64{1, 1}, 1 + 0x1p-7},
		{"product fp32; sum bf16", []float64{-0x1p-80, 1 + 3*0x1p-8}, []float64{1, 1}, 1 + 0x1p-7},
		// 1 + 2^-11 + 2^-58: a 48-bit product that ends below binary64's last place.
		{"product exact; sum fp16", []float64{1, 0x1p-11 * (1 + 0x1p-23)}, []float64{1, 1 + 0x1p-23}, 1 + 0x1p-10},
		// Two exact products in a tree, the smaller one far below.
		{"product exact; sum fp16; pairwise", []float64{1 + 0x1p-11, 0x1p-70}, []float64{1, 1}, 1 + 0x1p-10},
		// 2^-25 + 2^-100 lies above half the least binary16 number; bfloat16 holds both.
		{"product bf16; sum fp16; pairwise", []float64{0x1p-25, 0x1p-100}, []float64{1, 1}, 0x1p-24},
		// A finished binary32 chunk is a tie of the outer format.
		{"product exact; sum fp32; chunk(1); outer bf16", []float64{0x1p-80, 1 + 0x1p-8}, []float64{1, 1}, 1 + 0x1p-7},
		// 41605 x 1613 = 2^26 + 1: 1 + 2^-29 (1 + 2^-26) above a tie of 29 bits,
		// although the product has fewer bits than the sum.
		{"product E10M26; sum E10M28", []float64{1, 41605}, []float64{1, 1613 * 0x1p-55}, 1 + 0x1p-28},
		// Toward zero and up see the rest as well.
		{"product exact; sum fp16 toward-zero", []float64{1, -0x1p-80}, []float64{1, 1}, 1 - 0x1p-11},
		{"product exact; sum fp16 up", []float64{1, 0x1p-80}, []float64{1, 1}, 1 + 0x1p-10},
		// Through binary32 two roundings are meant: 1 + 2^-11 + 2^-30 is first 1 + 2^-11.
		{"product exact; sum fp16; through binary32", []float64{1 + 0x1p-11, 0x1p-30}, []float64{1, 1}, 1},
		{"product exact; sum fp32; chunk(2); outer fp16", []float64{1 + 0x1p-11, 0x1p-30}, []float64{1, 1}, 1},
	} {
		if got := dot(t, mustAccumulate(t, c.acc), c.a, c.b); got != c.want {
			t.Errorf("%s: %v x %v = %x, want %x", c.acc, c.a, c.b, got, c.want)
		}
	}
}

// TestZeroSumsArePositive pins the sign of zero of sums: tiny negative terms that
// vanish, cancelled terms, negative zeros, in every order.
func TestZeroSumsArePositive(t *testing.T) {
	minus := float32(math.Copysign(0, -1))
	for _, points := range []string{
		"product exact; sum fp16", "product exact; sum fp32", "product fp32; sum fp32", "product E9M10; sum fp32",
		"product fp16; sum fp16", "product exact; sum fp16 down", "product exact; sum bf16 stochastic", "product E5M10(subnormals=flush); sum E5M10(subnormals=flush)",
		"product exact; sum E4M0",
	} {
		for _, order := range testOrders {
			acc := mustAccumulate(t, points)
			acc.Order = order
			for _, a := range [][]float32{{-0x1p-100}, {minus}, {minus, minus, minus}, {1, -1}, {}, {-0x1p-100, -0x1p-100, minus}} {
				b := make([]float32, len(a))
				for i := range b {
					b[i] = 0x1p-100
					if a[i] == 1 || a[i] == -1 {
						b[i] = 1
					}
				}
				got := dot(t, acc, a, b)
				if got == 0 && math.Signbit(float64(got)) {
					t.Errorf("%v: %v x %v is -0", acc, a, b)
				}
			}
		}
	}
}

// TestPaddingIsSkipped: padding opposite an infinity or NaN adds nothing, draws
// nothing and counts nothing, where a packed zero would give NaN.
func TestPaddingIsSkipped(t *testing.T) {
	a := []float32{2, float32(math.Inf(1)), 3, float32(math.NaN()), 5}
	b := sparse[float32]{Matrix[float32]{[]float32{1, 7, 1, 7, 1}, 1, 1}, map[[2]int]bool{{1, 0}: true, {3, 0}: true}}
	for _, points := range []string{"product exact; sum fp16", "product fp32; sum fp32", "product fp16; sum bf16 stochastic", "product fp16 up; sum fp16 to-odd"} {
		for _, order := range testOrders {
			acc := mustAccumulate(t, points)
			acc.Order = order
			m, err := NewMultiplier[float32](acc)
			if err != nil {
				t.Fatal(err)
			}
			c := make([]float32, 1)
			var products, sums Counts
			m.Mul(Product[float32]{I: 1, J: 1, K: 5, A: Matrix[float32]{a, 5, 1}, B: b, C: c}, &products, &sums)
			if c[0] != 10 || products != (Counts{}) || sums != (Counts{}) {
				t.Errorf("%v: %v, counts %+v %+v", acc, c[0], products, sums)
			}
		}
	}
}

// TestCounts pins what counts as which event.
func TestCounts(t *testing.T) {
	inf, nan := math.Inf(1), math.NaN()
	for _, c := range []struct {
		point string
		x     []float64
		want  Counts
	}{
		{"fp16", []float64{65519, 65520, -1e9, inf, -inf, nan, 0x1p-25, -0x1p-30, 0, 1}, Counts{Overflow: 2, Underflow: 2, NaN: 1}},
		{"fp16 nearest-even saturate", []float64{65519, 65520, inf, nan}, Counts{Saturated: 2, NaN: 1}},
		{"fp16 nearest-even nan", []float64{65520, inf, nan}, Counts{Overflow: 1, NaN: 2}},
		{"fp16 toward-zero", []float64{65535, 65536, inf}, Counts{Saturated: 1}},
		{"fp16 up", []float64{65505, -65536, -65535}, Counts{Overflow: 1, Saturated: 1}},
		{"E4M3", []float64{464, 465, -500, inf, nan, 0x1p-10}, Counts{Saturated: 3, NaN: 1, Underflow: 1}},
		{"E2M1", []float64{100, nan}, Counts{Saturated: 1, NaN: 1}},
		{"E5M10(subnormals=flush)", []float64{0x1p-15, 0x1p-14, -0x1p-40, 0x1.fffp-15}, Counts{Underflow: 2}},
	} {
		p, err := ParsePoint(c.point)
		if err != nil {
			t.Fatal(err)
		}
		var n Counts
		dst := make([]float64, len(c.x))
		RoundSlice(dst, c.x, &p, Draws{}, 0, &n)
		if n != c.want {
			t.Errorf("%s: %v counts %+v, want %+v", c.point, c.x, n, c.want)
		}
	}
	// In sums: an infinity that stays is no new overflow; the adder through
	// binary32 overflows as the point does; underflow is not counted.
	for _, c := range []struct {
		acc            string
		a              []float64
		products, sums Counts
	}{
		{"product fp16; sum fp16", []float64{60000, 60000, 1, 1}, Counts{}, Counts{Overflow: 1}},
		{"product fp16; sum fp16", []float64{70000, 1, 0x1p-40}, Counts{Overflow: 1}, Counts{}},
		{"product exact; sum fp16", []float64{70000, -inf}, Counts{}, Counts{Overflow: 1, NaN: 1}},
		{"product exact; sum fp16; through binary32", []float64{3e38, 3e38, 0}, Counts{}, Counts{Overflow: 1}},
		{"product fp32; sum fp32", []float64{3e38, 3e38, 3e38}, Counts{}, Counts{Overflow: 1}},
		{"product E4M3; sum E4M3", []float64{448, 448, 448}, Counts{}, Counts{Saturated: 2}},
	} {
		m, err := NewMultiplier[float32](mustAccumulate(t, c.acc))
		if err != nil {
			t.Fatal(err)
		}
		a := make([]float32, len(c.a))
		for i, v := range c.a {
			a[i] = float32(v)
		}
		var products, sums Counts
		m.Mul(Product[float32]{
			I: 1, J: 1, K: len(a), A: Matrix[float32]{a, 0, 1},
			B: Matrix[float32]{ones(len(a)), 1, 1}, C: make([]float32, 1),
		}, &products, &sums)
		if products != c.products || sums != c.sums {
			t.Errorf("%s of %v: %+v %+v, want %+v %+v", c.acc, c.a, products, sums, c.products, c.sums)
		}
	}
}

// TestNumbersOfAdditions pins which random word each addition takes: a sum in
// bfloat16 whose every addition sits at 1/2 of a gap rounds as its words say.
func TestNumbersOfAdditions(t *testing.T) {
	s := Streams{Draws{Seed: 77, Site: 1}, Draws{Seed: 77, Site: 2}}
	up := func(k int) bool { return s.Word(uint32(k), 0, 3)>>31 == 1 }
	form := func(acc string, a []float32, bias []float32) float64 {
		m, err := NewMultiplier[float32](mustAccumulate(t, acc))
		if err != nil {
			t.Fatal(err)
		}
		c := make([]float32, 1)
		m.Mul(Product[float32]{
			I: 1, J: 1, K: len(a), A: Matrix[float32]{a, 0, 1}, B: Matrix[float32]{ones(len(a)), 1, 1}, C: c,
			Bias: bias, Sums: s, FirstJ: 3,
		}, nil, nil)
		return float64(c[0])
	}
	// Half a gap of numbers in [1, 2): one random bit decides.
	half := func(n float64, k int) float64 {
		if up(k) {
			return n + 0x1p-7
		}
		return n
	}
	const h = 0x1p-8
	if got, want := form("product exact; sum bf16 stochastic(1)", []float32{1, h}, nil), half(1, 1); got != want {
		t.Errorf("second term: %v, want %v", got, want)
	}
	if got, want := form("product exact; sum bf16 stochastic(1)", []float32{1}, []float32{h}), half(1, 1); got != want {
		t.Errorf("bias after one term: %v, want %v", got, want)
	}
	// Two chunks of two: outer additions are 4 (1 to zero) and 5, the bias is 6.
	got := form("product exact; sum fp32; outer bf16 stochastic(1); chunk(2)", []float32{1, 0, h, 0}, []float32{h})
	if want := half(half(1, 5), 6); got != want {
		t.Errorf("outer additions: %v, want %v", got, want)
	}
	// Four leaves: nodes 4 and 5, then 6; the bias is 7.
	got = form("product exact; sum bf16 stochastic(1); pairwise", []float32{1, h, h, 0}, []float32{0})
	if want := half(half(1, 4), 6); got != want {
		t.Errorf("tree: %v, want %v", got, want)
	}
	// Three lanes of one term: nodes 3 (lanes 0 and 1) and 4 (that and lane 2).
	got = form("product exact; sum bf16 stochastic(1); lanes(3)", []float32{1, h, h}, nil)
	if want := half(half(1, 3), 4); got != want {
		t.Errorf("lanes: %v, want %v", got, want)
	}
	// A wide sum of three terms is rounded by addition 3.
	got = form("product exact; sum bf16 stochastic(1); wide", []float32{1, h / 2, h / 2}, nil)
	if want := half(1, 3); got != want {
		t.Errorf("wide: %v, want %v", got, want)
	}
}

// TestWideSumsCancel: the exact sum of terms that cancel but for a last bit, of all
// lengths and ranges: what is left shows any rounding on the way.
func TestWideSumsCancel(t *testing.T) {
	r := rand.New(rand.NewPCG(41, 42))
	for k := 1; k < 700; k += 1 + k/9 {
		for _, span := range []int{0, 1, 5, 12, 30, 60} {
			a, b := make([]float32, 2*k+1), make([]float32, 2*k+1)
			for n := range k {
				x := float32(1<<24 - 1 - 2*r.IntN(3))
				a[n], b[n] = x, float32(math.Ldexp(1<<24-1-2*float64(r.IntN(3)), -r.IntN(span+1)))
				a[k+n], b[k+n] = -x, b[n]
			}
			a[2*k], b[2*k] = float32(math.Ldexp(1, -span)), 1
			acc := mustAccumulate(t, "product exact; sum fp32; wide")
			if got, want := dot(t, acc, a, b), a[2*k]; got != want {
				t.Fatalf("%d terms over %d binades: %v is left, want %v", 2*k+1, span, got, want)
			}
		}
	}
}

// TestMulDoesNotAllocate: after the first product of a shape there is nothing to
// allocate.
func TestMulDoesNotAllocate(t *testing.T) {
	r := rand.New(rand.NewPCG(51, 52))
	for _, text := range []string{
		"product fp32; sum fp32", "product fp16; sum fp16", "product exact; sum fp16 stochastic; outer fp32; chunk(4)",
		"product exact; sum bf16; wide", "product fp16; sum fp16; pairwise", "product fp32; sum fp32; lanes(4)", "product fp16 up; sum fp16; lanes(4)",
	} {
		m, err := NewMultiplier[float32](mustAccumulate(t, text))
		if err != nil {
			t.Fatal(err)
		}
		p := randomProduct[float32](r, 5, 70, 20, kindsOfData[0].draw, kindsOfData[0].draw)
		var products, sums Counts
		if n := testing.AllocsPerRun(5, func() { m.Mul(p, &products, &sums) }); n > 0 {
			t.Errorf("%s: %v allocations a product", text, n)
		}
	}
}
