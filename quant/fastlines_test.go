package quant

import (
	"fmt"
	"math"
	"math/big"
	"math/rand/v2"
	"testing"
)

// lineFormats are those whose lines have a quick rounding, and some that have none.
var lineFormats = append([]string{
	"INT8", "INT4", "INT16", "INT24", "INT2", "UINT8", "INT8(zero=fit)", "INT8(zero=-100)", "INT8(zero=126)", "INT8(scale=0.1)", "UINT4(zero=fit)",
	"INT8(scale=99%)", "MXFP8(E5M2,rule=up)", "MXINT8(rule=up)", "block(Q1.7,block=4)", "block(bf16,block=4)", "block(fp16,block=4,scale=fp32,rule=up)",
}, sharedNames...)

// lineValue draws a number, often at or beside a tie of some quotient.
func lineValue(r *rand.Rand, spread int) float64 {
	v := math.Ldexp(r.NormFloat64(), r.IntN(2*spread+1)-spread)
	switch r.IntN(10) {
	case 0:
		v = math.Copysign(0, v)
	case 1:
		v = math.Ldexp(float64(r.IntN(513)-256), r.IntN(5)-3)
	case 2:
		v = math.Ldexp(v, r.IntN(250)-125)
	case 3:
		switch r.IntN(6) {
		case 0:
			v = math.Inf(1)
		case 1:
			v = math.Inf(-1)
		case 2:
			v = math.NaN()
		}
	}
	return v
}

// TestFastLines: the quick rounding of lines has the bits and the counts of the
// definition, in every mode, with specials, in float32 and in float64.
func TestFastLines(t *testing.T) {
	r := rand.New(rand.NewPCG(71, 72))
	roundings := []Rounding{
		{},
		{Mode: NearestAway},
		{Mode: TowardZero},
		{Mode: Up},
		{Mode: Down},
		{Mode: ToOdd},
		{Mode: Stochastic, Bits: 16},
		{Mode: Stochastic, Bits: 32},
		{Mode: Stochastic, Bits: 3, Variant: Centred},
		{Mode: Stochastic, Bits: 8, Variant: CentredEven},
	}
	for _, name := range lineFormats {
		f := mustShared(t, name)
		for _, rounding := range roundings {
			for _, overflow := range []Overflow{FormatDefault, ToNaN, ToInfinity, Wrap} {
				p := Point{Format: f, Rounding: rounding, Overflow: overflow}
				if p.CheckOperand() != nil {
					continue
				}
				for round := range 6 {
					x := make([]float64, 1+r.IntN(80))
					for i := range x {
						if x[i] = lineValue(r, 4); round < 5 {
							x[i] = float64(float32(x[i]))
						} else if r.IntN(20) == 0 {
							x[i] = math.Ldexp(1.5, -1060) // beyond what the loops take
						}
					}
					sameLine(t, x, f, &p)
				}
			}
		}
	}
}

// sameLine compares RoundTensor with RoundLine on one line.
func sameLine(t *testing.T, x []float64, f Blocked, p *Point) {
	t.Helper()
	d := Draws{Seed: 3, Site: 9}
	want := append([]float64(nil), x...)
	var word []uint32
	if p.Rounding.Mode == Stochastic {
		for i := range x {
			word = append(word, d.Word(7+uint64(i)))
		}
	}
	var n, m Counts
	f.RoundLine(want, f.Scaling(x), p, word, &n)
	got := make([]float64, len(x))
	RoundTensor(got, x, Shape{1, len(x), 1}, p, d, 7, &m)
	for i := range x {
		if !same(got[i], want[i]) {
			t.Fatalf("%s %v %v: %v (%x) -> %v, want %v", p.Format, p.Rounding, p.Overflow, x[i], math.Float64bits(x[i]), got[i], want[i])
		}
	}
	if n != m {
		t.Fatalf("%s %v %v: events %+v, want %+v", p.Format, p.Rounding, p.Overflow, m, n)
	}
}

// TestFastLinesScales: every exponent that a block of binary32 numbers may have, the
// clamped scales among them, with every significand of 11 bits under it.
func TestFastLinesScales(t *testing.T) {
	for _, name := range []string{"MXFP8(E4M3)", "MXFP8(E5M2)", "MXFP6(E3M2)", "MXFP6(E2M3)", "MXFP4", "MXINT8"} {
		f := mustShared(t, name)
		p := Point{Format: f}
		for e := -149; e <= 127; e++ {
			var x []float64
			for s := 1024 + e&1; s < 2048; s += 2 { // ties, their neighbours, both signs
				v := math.Ldexp(float64(s), e-10)
				if s&4 != 0 {
					v = -v
				}
				x = append(x, float64(float32(v)), float64(float32(math.Ldexp(v, -(s>>3)%12))))
			}
			sameLine(t, x, f, &p)
			sameLine(t, x[:1], f, &p)
		}
	}
}

// TestScaledIntegersNearTies: numbers that are the nearest binary32 and binary64 ones
// to the ties (k + 1/2) scale, and their neighbours, against rationals.
func TestScaledIntegersNearTies(t *testing.T) {
	r := rand.New(rand.NewPCG(73, 74))
	half := big.NewRat(1, 2)
	for range 300 {
		scale := float32(math.Ldexp(1+r.Float64(), r.IntN(280)-150))
		if scale == 0 || r.IntN(8) == 0 {
			scale = float32(math.Ldexp(float64(1+r.IntN(9)), -149)) // subnormal
		}
		f := mustShared(t, fmt.Sprintf("INT8(scale=%v)", scale))
		p := Point{Format: f}
		var x []float64
		for k := -130; k <= 130; k++ {
			tie := (float64(k) + 0.5) * float64(scale) // 33 bits: exact
			x = append(x, tie, math.Nextafter(tie, 0), math.Nextafter(tie, 2*tie))
			if v := float32(tie); float64(v)-float64(v) == 0 {
				x = append(x, float64(v), float64(math.Nextafter32(v, 0)), float64(math.Nextafter32(v, 2*v)))
			}
		}
		got := make([]float64, len(x))
		RoundTensor(got, x, Shape{1, len(x), 1}, &p, Draws{}, 0, nil)
		for i, v := range x {
			// floor(q + 1/2), less one at a tie whose floor is even.
			q := new(big.Rat).Quo(exactOf(v), exactOf(float64(scale)))
			q.Add(q, half)
			n := new(big.Int).Div(q.Num(), q.Denom())
			if q.IsInt() && n.Bit(0) == 1 {
				n.Sub(n, big.NewInt(1))
			}
			if want := min(max(n.Int64(), -128), 127); got[i] != float64(want) {
				t.Fatalf("%v / %v -> %v, want %d", v, scale, got[i], want)
			}
		}
	}
}

// TestLateScale: products with scales from the kernels have the bits and the counts
// of the definition.
func TestLateScale(t *testing.T) {
	r := rand.New(rand.NewPCG(75, 76))
	for _, text := range []string{
		"product fp32; sum fp32", "product exact; sum fp32", "product fp16; sum fp16", "product fp16; sum fp16; outer fp32", "product bf16; sum E4M3",
		"product fp32; sum fp32; chunk(3)", "product fp16; sum fp16; pairwise", "product fp16; sum fp16; through binary32",
		"product fp16; sum fp16 stochastic",
	} {
		acc := mustAccumulate(t, text)
		m, err := NewMultiplier[float32](acc)
		if err != nil {
			t.Fatal(err)
		}
		for round := range 12 {
			i, j, k := 1+r.IntN(9), 1+r.IntN(40), 1+r.IntN(30)
			draw := func(n int) []float32 {
				x := make([]float32, n)
				for i := range x {
					if x[i] = float32(r.IntN(255) - 127); round%3 == 1 {
						x[i] = float32(lineValue(r, 8))
					}
				}
				return x
			}
			p := Product[float32]{I: i, J: j, K: k, A: Matrix[float32]{draw(i * k), k, 1}, B: Matrix[float32]{draw(k * j), j, 1}, Scale: make([]float64, i)}
			for n := range p.Scale {
				p.Scale[n] = math.Ldexp(1+r.Float64(), r.IntN(40)-30)
			}
			if round%2 == 0 {
				p.Bias = draw(i)
			}
			q := p
			p.C, q.C = make([]float32, i*j), make([]float32, i*j)
			var n, want, a, b Counts
			m.Mul(p, &a, &n)
			ref := newReference[float32](acc)
			ref.mul(&q, &b, &want)
			for e := range q.C {
				if !same(float64(p.C[e]), float64(q.C[e])) {
					t.Fatalf("%s: result %d: %v, want %v", text, e, p.C[e], q.C[e])
				}
			}
			if n != want || a != b {
				t.Fatalf("%s: events %+v %+v, want %+v %+v", text, n, a, want, b)
			}
		}
	}
}

// TestFastLinesAllocate: a tensor a step should cost no memory.
func TestFastLinesAllocate(t *testing.T) {
	x, y := make([]float32, 640), make([]float32, 640)
	for i := range x {
		x[i] = float32(i%37) - 11.3
	}
	for _, name := range []string{"MXFP8(E4M3)", "INT8", "MXFP4(block=16,scale=E4M3,rule=nearest,tensor=binary32)"} {
		p := Point{Format: mustShared(t, name)}
		if n := testing.AllocsPerRun(50, func() { RoundTensor(y, x, Shape{2, 32, 10}, &p, Draws{}, 0, nil) }); n >= 1 {
			t.Errorf("%s: %v allocations", name, n)
		}
	}
}

// TestQuotientsNearTies: units of up to 48 bits, whose ties binary64 does not hold, so
// that the nearest quotient of a number beside a tie is the tie itself.
func TestQuotientsNearTies(t *testing.T) {
	r := rand.New(rand.NewPCG(77, 78))
	e := Point{Format: mustShared(t, "INT8").(Integer).code}
	l, ok := newFastLines(mustShared(t, "INT8"), Scaling{Factor: 1}, &e)
	if !ok {
		t.Fatal("no quick rounding")
	}
	for range 2000 {
		unit := float64(r.Uint64()>>16 | 1)
		got := []float64{(float64(r.IntN(255)-127) + 0.5) * unit}
		v, want := got[0], []float64{got[0]}
		l.divide(got, unit, nil, nil)
		l.divideReals(want, unit, nil, nil)
		if got[0] != want[0] {
			t.Fatalf("%v / %v -> %v, want %v", v, unit, got[0], want[0])
		}
	}
}
