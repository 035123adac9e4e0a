package quant

import (
	"math"
	"testing"
)

// fixed is a small fixed-point format of the tests: signed, or unsigned, integers of
// the given bits times 2^-fraction. It shows that the interfaces fit such families.
type fixed struct {
	width, fraction int
	unsigned        bool
}

func (f fixed) String() string { return "fixed" }

func (f fixed) bounds() (lo, hi float64) {
	if f.unsigned {
		return 0, math.Ldexp(1, f.width) - 1
	}
	return -math.Ldexp(1, f.width-1), math.Ldexp(1, f.width-1) - 1
}

func (f fixed) Limits() Limits {
	lo, hi := f.bounds()
	q := math.Ldexp(1, -f.fraction)
	return Limits{
		Bits: f.width, Max: hi * q, Lowest: lo * q, MinSubnormal: q, MinNormal: q,
		DefaultOverflow: Saturate, OneZero: true, Binary32: true,
	}
}

func (f fixed) Bracket(x Real) Bracket {
	if x.IsZero() {
		return Bracket{Exact: true}
	}
	drop := -f.fraction - x.Exp
	if drop < 64 { // far beyond the range: any bracket beyond it will do
		return Bracket{Toward: math.MaxFloat64, Away: math.Inf(1), Exact: true}
	}
	n, b := split(x, drop)
	b.Toward, b.Away, b.Odd = scaled(n, -f.fraction), scaled(n+1, -f.fraction), n&1 == 1
	return b
}

func (f fixed) Wrap(x Real, away bool) float64 {
	n, _ := split(x, -f.fraction-x.Exp)
	if away {
		n++
	}
	if x.Neg {
		n = -n
	}
	n <<= 64 - f.width
	if f.unsigned {
		return scaled(n>>(64-f.width), -f.fraction)
	}
	return math.Ldexp(float64(int64(n)>>(64-f.width)), -f.fraction)
}

// TestFixedPointFits: rounding, both bounds, one zero, wrapping, and sums.
func TestFixedPointFits(t *testing.T) {
	signed, unsigned := fixed{8, 4, false}, fixed{8, 4, true}
	for _, c := range []struct {
		f      fixed
		policy Overflow
		mode   Mode
		x      float64
		want   float64
		event  Event
	}{
		{signed, Saturate, NearestEven, 0.03125, 0, Underflowed}, // a tie
		{signed, Saturate, NearestEven, 0.09375, 0.125, NoEvent},
		{signed, Saturate, NearestEven, 7.97, 7.9375, Saturated},
		{signed, Saturate, NearestEven, -8.03, -8, NoEvent},
		{signed, Saturate, NearestEven, -8.04, -8, Saturated},
		{signed, Saturate, NearestEven, -0.01, 0, Underflowed},
		{signed, Saturate, Down, -0.01, -0.0625, NoEvent},
		{signed, Saturate, NearestEven, math.Inf(-1), -8, Saturated},
		{signed, Wrap, NearestEven, 8, -8, Overflowed},
		{signed, Wrap, TowardZero, 8.99, -7.0625, Overflowed},
		{signed, Wrap, NearestEven, -8.5, 7.5, Overflowed},
		{signed, Wrap, NearestEven, 16, 0, Overflowed},
		{signed, ToNaN, NearestEven, 8, math.NaN(), Overflowed},
		{signed, Wrap, NearestEven, math.Inf(1), math.NaN(), BecameNaN},
		{unsigned, Saturate, NearestEven, -3, 0, Saturated},
		{unsigned, Saturate, NearestEven, -0.02, 0, Underflowed},
		{unsigned, Saturate, NearestEven, 16, 15.9375, Saturated},
		{unsigned, Wrap, NearestEven, -1, 15, Overflowed},
	} {
		p := Point{Format: c.f, Rounding: Rounding{Mode: c.mode}, Overflow: c.policy}
		got, e := p.Round(Exactly(c.x), 0)
		if !same(got, c.want) || e != c.event {
			t.Errorf("%+v, %v %v: %v -> %v %d, want %v %d", c.f, c.policy, c.mode, c.x, got, e, c.want, c.event)
		}
	}
	minus, _ := (&Point{Format: signed}).Round(Exactly(math.Copysign(0, -1)), 0)
	if math.Signbit(minus) {
		t.Error("fixed point has a negative zero")
	}
	p := Point{Format: signed}
	acc := Accumulate{Product: &p, Sum: p}
	if got := dot(t, acc, []float32{0.25, 2, 7}, []float32{0.3125, 2.5, 1}); got != 7.9375 {
		t.Errorf("saturated sum: %v", got)
	}
	acc.Sum.Overflow = Wrap
	// 0.078125 -> 0.0625; 0.0625 + 5 + 7 = 12.0625, which wraps to -3.9375.
	if got := dot(t, acc, []float32{0.25, 2, 7}, []float32{0.3125, 2.5, 1}); got != -3.9375 {
		t.Errorf("wrapped sum: %v", got)
	}
}

// shared is a block format of the tests: pairs along the axis share a power of two,
// under a tensor scale that makes the largest magnitude 1.
type shared struct{ Float }

func (shared) Scaling(x []float64) Scaling { return Scaling{Factor: largestFinite(x)} }

func (s shared) RoundLine(line []float64, tensor Scaling, p *Point, word []uint32, n *Counts) {
	scale := tensor.Factor
	for at := 0; at < len(line); at += 2 {
		block := line[at:min(at+2, len(line))]
		unit := powerOfTwo(exponentOf(max(largestFinite(block), 0x1p-60)) - exponentOf(scale))
		element := Point{Format: s.Float, Rounding: p.Rounding, Overflow: p.Overflow}
		for i, v := range block {
			var w uint32
			if word != nil {
				w = word[at+i]
			}
			r, e := element.Round(ExactQuotient(v/unit, scale), w)
			n.Count(e)
			block[i] = r * unit
		}
	}
}

// TestSharedScalesFit: a tensor is rounded along its axis, line by line, with the
// random words of its elements; scalar formats round as RoundSlice.
func TestSharedScalesFit(t *testing.T) {
	f := mustFormat(t, "E2M1")
	p := Point{Format: shared{f}}
	src := []float32{ // 2 x 3 x 2: lines are columns of three
		4, 0.1,
		3, 0.2,
		1.1, 8,
		-2, 1,
		5, 1,
		0, 0,
	}
	dst := make([]float32, len(src))
	if scale := RoundTensor(dst, src, Shape{2, 3, 2}, &p, Draws{}, 0, nil); scale != 8 {
		t.Errorf("scale %v", scale)
	}
	// Over 8, E2M1 codes times the block's power of two.
	want := []float32{0.5, 0.015625, 0.5, 0.0234375, 0.125, 1, -0.25, 0.125, 0.5, 0.125, 0, 0}
	for i := range want {
		if dst[i] != want[i] {
			t.Errorf("element %d: %v over 8 became %v, want %v", i, src[i], dst[i], want[i])
		}
	}
	p.Rounding = Rounding{Mode: Stochastic, Bits: 8}
	var words []uint32
	probe := probe{f, &words}
	p.Format = probe
	d := Draws{Seed: 4}
	RoundTensor(dst, src, Shape{2, 3, 2}, &p, d, 100, nil)
	for i, n := range []uint64{100, 102, 104, 101, 103, 105, 106, 108, 110, 107, 109, 111} {
		if words[i] != d.Word(n) {
			t.Errorf("word %d is not that of element %d", i, n)
		}
	}
	scalar := Point{Format: Binary16}
	again := make([]float32, len(src))
	if RoundTensor(dst, src, Shape{2, 3, 2}, &scalar, d, 5, nil) != 1 {
		t.Error("a scalar format has a scale")
	}
	RoundSlice(again, src, &scalar, d, 5, nil)
	for i := range dst {
		if dst[i] != again[i] {
			t.Errorf("element %d: %v and %v", i, dst[i], again[i])
		}
	}
}

// probe records the words its lines are given.
type probe struct {
	Float
	words *[]uint32
}

func (probe) Scaling([]float64) Scaling { return Scaling{Factor: 1} }

func (p probe) RoundLine(_ []float64, _ Scaling, _ *Point, word []uint32, _ *Counts) {
	*p.words = append(*p.words, word...)
}

// TestScaleThenBias: the finished sum is scaled once, rounded to sum, and the bias
// added in outer.
func TestScaleThenBias(t *testing.T) {
	m, err := NewMultiplier[float32](mustAccumulate(t, "product exact; sum bf16; outer fp32"))
	if err != nil {
		t.Fatal(err)
	}
	c := make([]float32, 1)
	m.Mul(Product[float32]{
		I: 1, J: 1, K: 2, A: Matrix[float32]{[]float32{100, 3}, 2, 1}, B: Matrix[float32]{[]float32{1, 1}, 1, 1}, C: c,
		Scale: []float64{1.5}, Bias: []float32{0x1p-10},
	}, nil, nil)
	// 103 x 1.5 = 154.5, a tie between 154 and 155 in bfloat16, whose spacing is 1 there.
	if want := float32(154 + 0x1p-10); c[0] != want {
		t.Errorf("%v, want %v", c[0], want)
	}
}
