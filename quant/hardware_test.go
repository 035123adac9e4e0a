package quant

import (
	"math"
	"math/big"
	"math/rand/v2"
	"testing"
)

// exactOf returns a finite binary64 number as a rational.
func exactOf(x float64) *big.Rat { return new(big.Rat).SetFloat64(x) }

// ratPoint rounds rationals to a small float by the list of its values.
type ratPoint struct {
	l *listed
	p Point
}

// at rounds a rational that is a multiple of 2^-grain, zero as +0, in the way of
// sums.
func (r ratPoint) at(x *big.Rat, word uint32) float64 {
	v, _ := r.l.round(ratGrains(x), x.Sign() < 0, r.p, word)
	return v + 0
}

func addRat(a, b *big.Rat) *big.Rat { return new(big.Rat).Add(a, b) }
func subRat(a, b *big.Rat) *big.Rat { return new(big.Rat).Sub(a, b) }

// smallData draws k operands that are values of E4M3.
func smallData(r *rand.Rand, k int) []float32 {
	p := Point{Format: mustFormatOf("E4M3")}
	x := make([]float32, k)
	for i := range x {
		v, _ := p.Round(Exactly(math.Ldexp(r.Float64()*2-1, r.IntN(8)-4)), 0)
		x[i] = float32(v)
	}
	return x
}

func mustFormatOf(name string) Format {
	f, err := ParseFormat(name)
	if err != nil {
		panic(err)
	}
	return f
}

// hardwareProduct is a product of one row and two columns, the second column being
// column 5 of its numbering.
func hardwareProduct(a, b []float32) Product[float32] {
	return Product[float32]{
		I: 1, J: 1, K: len(a), A: Matrix[float32]{a, len(a), 1}, B: Matrix[float32]{b, 1, 1}, C: make([]float32, 1),
		Terms: Streams{Draws{Seed: 1, Site: 1}, Draws{Seed: 1, Site: 2}}, Sums: Streams{Draws{Seed: 1, Site: 3}, Draws{Seed: 1, Site: 4}},
		FirstJ: 5,
	}
}

// TestCompensatedSteps: Kahan's steps in rationals, every operation rounded once,
// random words by the numbers of the additions.
func TestCompensatedSteps(t *testing.T) {
	r := rand.New(rand.NewPCG(41, 42))
	l := listFloat(t, "E5M2(overflow=infinity)", 5, 2, 15, TopIEEE, ToInfinity)
	for _, mode := range []Rounding{{}, {Mode: TowardZero}, {Mode: Up}, {Mode: Stochastic, Bits: 8, Variant: Centred}, {Mode: Stochastic, Bits: 4, Source: Source{Share: 3, Register: 5}}} {
		p := Point{Format: l.format, Rounding: mode}
		m, err := NewMultiplier[float32](Accumulate{Sum: p, Order: Order{Kind: Compensated}})
		if err != nil {
			t.Fatal(err)
		}
		for range 100 {
			n := r.IntN(12)
			q := hardwareProduct(smallData(r, n), smallData(r, n))
			m.Mul(q, nil, nil)
			b := q.B.(Matrix[float32]).Data
			round := ratPoint{l, p}
			word := func(k int) uint32 { return q.Sums.from(mode.Source, uint32(k), 0, 5) }
			s, c := 0.0, 0.0
			for k := range n {
				term := new(big.Rat).Mul(exactOf(float64(q.A.Data[k])), exactOf(float64(b[k])))
				y := round.at(subRat(term, exactOf(c)), word(n+3*k))
				sum := round.at(addRat(exactOf(s), exactOf(y)), word(k))
				d := round.at(subRat(exactOf(sum), exactOf(s)), word(n+3*k+1))
				c = round.at(subRat(exactOf(d), exactOf(y)), word(n+3*k+2))
				s = sum
			}
			if float64(q.C[0]) != s {
				t.Fatalf("%v, %d terms: %v, want %v", p, n, q.C[0], s)
			}
		}
	}
}

// TestCompensatedSum: 4096 ones in bfloat16, whose sequential sum stalls at 256, are
// 4096; an infinite sum is NaN a term later.
func TestCompensatedSum(t *testing.T) {
	acc := mustAccumulate(t, "sum bf16; compensated")
	if got := dot(t, acc, ones(4096), ones(4096)); got != 4096 {
		t.Errorf("sum of 4096 ones: %v", got)
	}
	big := []float32{3e38, 3e38, 1, 1}
	if got := dot(t, acc, big[:2], ones(2)); !math.IsInf(float64(got), 1) {
		t.Errorf("overflow: %v", got)
	}
	if got := dot(t, acc, big, ones(4)); got == got {
		t.Errorf("after an overflow: %v", got)
	}
}

// TestAlignedSteps: groups of products in rationals, cut to W bits of the largest.
func TestAlignedSteps(t *testing.T) {
	r := rand.New(rand.NewPCG(43, 44))
	l := listFloat(t, "E5M2(overflow=infinity)", 5, 2, 15, TopIEEE, ToInfinity)
	for range 400 {
		mode := Rounding{Mode: []Mode{NearestEven, Down, Stochastic}[r.IntN(3)]}
		if mode.Mode == Stochastic {
			mode.Bits = 7
		}
		o := Order{Kind: Aligned, K: 1 + r.IntN(5), W: 2 + r.IntN(8)}
		p := Point{Format: l.format, Rounding: mode}
		m, err := NewMultiplier[float32](Accumulate{Sum: p, Order: o})
		if err != nil {
			t.Fatal(err)
		}
		n := r.IntN(12)
		q := hardwareProduct(smallData(r, n), smallData(r, n))
		m.Mul(q, nil, nil)
		b := q.B.(Matrix[float32]).Data
		s, next := 0.0, n
		for from := 0; from < n; from += o.K {
			var terms []*big.Rat
			for k := from; k < min(n, from+o.K); k++ {
				terms = append(terms, new(big.Rat).Mul(exactOf(float64(q.A.Data[k])), exactOf(float64(b[k]))))
			}
			s = ratPoint{l, p}.at(addRat(exactOf(s), cutAndAdd(terms, o.W)), q.Sums.Word(uint32(next), 0, 5))
			next++
		}
		if float64(q.C[0]) != s {
			t.Fatalf("%v %v, %d terms: %v, want %v", p, o, n, q.C[0], s)
		}
	}
}

// cutAndAdd cuts rationals toward zero to w bits of the largest and adds them.
func cutAndAdd(terms []*big.Rat, w int) *big.Rat {
	top := -10000
	for _, x := range terms {
		if x.Sign() != 0 {
			f, _ := x.Float64()
			top = max(top, math.Ilogb(f))
		}
	}
	sum := new(big.Rat)
	for _, x := range terms {
		if x.Sign() == 0 {
			continue
		}
		unit := power(top - w + 1)
		n := new(big.Rat).Quo(x, unit)
		whole := new(big.Int).Quo(n.Num(), n.Denom()) // toward zero
		sum.Add(sum, unit.Mul(unit, new(big.Rat).SetInt(whole)))
	}
	return sum
}

// TestAlignedSpecials: infinities and NaN, groups of padding, and a width that loses
// what a wide one keeps.
func TestAlignedSpecials(t *testing.T) {
	inf := float32(math.Inf(1))
	for _, c := range []struct {
		order string
		a     []float32
		want  float64
	}{
		{"aligned(4, 24)", []float32{1, inf, 2}, math.Inf(1)},
		{"aligned(4, 24)", []float32{-inf, inf, 2}, math.NaN()},
		{"aligned(4, 24)", []float32{float32(math.NaN()), 1}, math.NaN()},
		{"aligned(4, 4)", []float32{16, 1.5, 1.5, 1.5}, 16}, // multiples of 2
		{"aligned(4, 5)", []float32{16, 1.5, 1.5, 1.5}, 19}, // multiples of 1
		{"aligned(4, 6)", []float32{16, 1.5, 1.5, 1.5}, 20.5},
		{"aligned(4, 4)", []float32{16, -1.5, -1.5, -1.5}, 16}, // toward zero
		{"aligned(2, 4)", []float32{16, 1.5, 1.5, 1.5}, 19},
		{"aligned(3, 8)", nil, 0},
		{"aligned(3, 8)", []float32{0, 0}, 0},
	} {
		if got := dot(t, mustAccumulate(t, "sum fp32; "+c.order), c.a, ones(len(c.a))); !same(float64(got), c.want) {
			t.Errorf("%s of %v: %v, want %v", c.order, c.a, got, c.want)
		}
	}
	m, err := NewMultiplier[float32](mustAccumulate(t, "sum fp32; aligned(2, 8)"))
	if err != nil {
		t.Fatal(err)
	}
	rows := make([]float32, 1)
	m.SumRows(rows, Matrix[float32]{[]float32{1, 2, 0x1p-9}, 3, 1}, 1, 3, Streams{}, nil)
	if rows[0] != 3+0x1p-9 {
		t.Errorf("aligned sum of a row: %v", rows[0])
	}
}
