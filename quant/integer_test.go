package quant

import (
	"math"
	"math/big"
	"math/rand/v2"
	"slices"
	"testing"
)

// TestIntegerByHand: scales, zero points and codes worked by hand.
func TestIntegerByHand(t *testing.T) {
	inf := math.Inf(1)
	for _, c := range []struct {
		name   string
		x      []float64
		factor float64
		zero   int64
		terms  []float64
	}{
		{"INT8", []float64{1, -127, 63.5, 0.5, 1.5}, 1, 0, []float64{1, -127, 64, 0, 2}}, // ties to even
		{"INT4", []float64{7, -3.4, 0.2}, 1, 0, []float64{7, -3, 0}},
		{"INT8(scale=0.5)", []float64{1, -64, -70, 63.5, 99, inf, -inf}, 0.5, 0, []float64{2, -128, -128, 127, 127, 127, -128}},
		{"UINT8", []float64{255, 3, -4}, 1, 0, []float64{255, 3, 0}},
		{"UINT8(zero=fit)", []float64{-55, 200, 0.4}, 1, 55, []float64{-55, 200, 0}},
		{"INT8(zero=fit)", []float64{-55, 200, 0.4}, 1, -73, []float64{-55, 200, 0}},
		{"UINT4(zero=fit)", []float64{3, 30}, 2, 0, []float64{2, 15}},    // zero stretches the range: 1.5 -> 2
		{"INT4(zero=fit)", []float64{-30, -3}, 2, 7, []float64{-15, -2}}, // -1.5 -> -2
		{"UINT8(scale=1,zero=128)", []float64{-200, 200, 5.6}, 1, 128, []float64{-128, 127, 6}},
		{"INT8", []float64{0, 0}, 1, 0, []float64{0, 0}},
		{"UINT8(zero=fit)", []float64{0}, 1, 0, []float64{0}},
		{"INT3(scale=75%)", []float64{100, 6, -3, 1}, 2, 0, []float64{3, 3, -2, 0}},         // rank 3 of 1, 3, 6, 100; 0.5 -> 0
		{"INT3(scale=76%)", []float64{300, 6, -3, 1}, 100, 0, []float64{3, 0, 0, 0}},        // rank 4
		{"INT3(scale=50%)", []float64{100, 3, -6, 1, inf}, 1, 0, []float64{3, 3, -4, 1, 3}}, // infinity has no rank
		{"UINT2(scale=75%,zero=fit)", []float64{-50, -1, 2, 70}, 1, 1, []float64{-1, -1, 2, 2}},
	} {
		f := mustShared(t, c.name)
		p := Point{Format: f}
		s := f.Scaling(c.x)
		if s.Factor != c.factor || s.Zero != c.zero {
			t.Errorf("%s of %v: %+v, want %v and %v", c.name, c.x, s, c.factor, c.zero)
			continue
		}
		terms := slices.Clone(c.x)
		f.RoundLine(terms, s, &p, nil, nil)
		if !slices.Equal(terms, c.terms) {
			t.Errorf("%s of %v: %v, want %v", c.name, c.x, terms, c.terms)
		}
		for _, v := range terms {
			code, ok := f.(Integer).Encode(v, s)
			spec := f.(Integer).Spec()
			n := int64(code)
			if !spec.Unsigned {
				n = int64(code<<(64-spec.Bits)) >> (64 - spec.Bits)
			}
			if !ok || float64(n-s.Zero) != v {
				t.Errorf("%s: term %v has code %x %v", c.name, v, code, ok)
			}
		}
	}
}

// TestIntegersAgainstRationals: terms are the rounded quotients by the scale, and
// the scale is the binary32 number nearest to its quotient.
func TestIntegersAgainstRationals(t *testing.T) {
	r := rand.New(rand.NewPCG(65, 66))
	for _, name := range []string{"INT8", "INT16", "UINT8(zero=fit)", "INT5(scale=90%)", "INT8(scale=0.37)"} {
		f := mustShared(t, name).(Integer)
		for range 50 {
			x := make([]float64, 1+r.IntN(40))
			for i := range x {
				x[i] = float64(float32(r.NormFloat64()))
			}
			s := f.Scaling(x)
			if name == "INT8" || name == "INT16" {
				most := new(big.Rat).Quo(exactOf(largestFinite(x)), exactOf(float64(f.hi)))
				if want, _ := most.Float32(); float64(want) != s.Factor {
					t.Fatalf("%s: scale %v, want %v", name, s.Factor, want)
				}
			}
			p := Point{Format: f, Rounding: Rounding{Mode: NearestAway}}
			terms := slices.Clone(x)
			f.RoundLine(terms, s, &p, nil, nil)
			for i, v := range x {
				q := new(big.Rat).Quo(exactOf(v), exactOf(s.Factor))
				twice := new(big.Int).Quo(new(big.Int).Lsh(new(big.Int).Abs(q.Num()), 1), q.Denom()).Int64()
				want := (twice + 1) / 2 // half away from zero
				if v < 0 {
					want = -want
				}
				want = max(f.lo-s.Zero, min(f.hi-s.Zero, want))
				if terms[i] != float64(want) {
					t.Fatalf("%s, scale %v, zero %v: %v -> %v, want %v", name, s.Factor, s.Zero, v, terms[i], want)
				}
			}
		}
	}
}

// TestCalibrated: the scale of a sample, fixed.
func TestCalibrated(t *testing.T) {
	f := mustShared(t, "UINT8(scale=99%,zero=fit)").(Integer)
	sample := make([]float64, 200)
	for i := range sample {
		sample[i] = float64(i) - 55
	}
	fixed := f.Calibrated(sample)
	s := f.Scaling(sample)
	if got := fixed.Scaling([]float64{1e9}); got != s || s.Factor == 1 {
		t.Errorf("%+v, want %+v", got, s)
	}
	if again, err := ParseFormat(fixed.String()); err != nil || again != fixed {
		t.Errorf("%v reads back as %v, %v", fixed, again, err)
	}
}

// TestIntegerProduct: codes enter a product, scales multiply the finished sums, the
// rows of the left-hand operand by channels.
func TestIntegerProduct(t *testing.T) {
	a := []float32{1.27, -0.635, 0.02, 12.7, 1, -2}
	b := []float32{25.5, 0, 2, 1, 10, -5}
	left := Point{Format: mustShared(t, "INT8(per=channel)")}
	right := Point{Format: mustShared(t, "INT8")}
	ta, tb, factors := make([]float32, 6), make([]float32, 6), make([]float64, 2)
	RoundChannels(ta, a, Shape{2, 3, 1}, &left, Draws{}, 0, nil, factors)
	f := RoundTensor(tb, b, Shape{1, 3, 2}, &right, Draws{}, 0, nil)
	r32 := func(x float64) float64 { return float64(float32(x)) }
	if factors[0] != r32(float64(a[0])/127) || factors[1] != r32(float64(a[3])/127) || f != r32(float64(b[0])/127) {
		t.Fatalf("factors %v, %v", factors, f)
	}
	scale := []float64{factors[0] * f, factors[1] * f}
	acc := Accumulate{Sum: Point{Format: mustFormatOf("Q24.0")}}
	if _, err := NewMultiplier[float32](acc); err != nil {
		t.Fatal(err)
	}
	acc.Sum = Point{Format: Binary32}
	m, err := NewMultiplier[float32](acc)
	if err != nil {
		t.Fatal(err)
	}
	c := make([]float32, 4)
	m.Mul(Product[float32]{I: 2, J: 2, K: 3, A: Matrix[float32]{ta, 3, 1}, B: Matrix[float32]{tb, 2, 1}, C: c, Scale: scale}, nil, nil)
	for i := range 2 {
		for j := range 2 {
			sum := new(big.Rat)
			for k := range 3 {
				sum.Add(sum, new(big.Rat).Mul(exactOf(float64(ta[i*3+k])), exactOf(float64(tb[k*2+j]))))
			}
			want, _ := sum.Mul(sum, new(big.Rat).Mul(exactOf(factors[i]), exactOf(f))).Float32()
			if c[i*2+j] != want {
				t.Errorf("result %d %d: %v, want %v", i, j, c[i*2+j], want)
			}
		}
	}
	defer func() {
		if recover() == nil {
			t.Error("RoundTensor takes a scale per channel over several channels")
		}
	}()
	RoundTensor(ta, a, Shape{2, 3, 1}, &left, Draws{}, 0, nil)
}
