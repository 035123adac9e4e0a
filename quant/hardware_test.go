package quant

import (
	"fmt"
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
			s = ratPoint{l, p}.at(addRat(exactOf(s), cutAndAdd(terms, o.W)), q.Sums.word(uint32(next), 0, 5))
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

// TestRegisterPeriods walks through every register: each state once, but zero.
func TestRegisterPeriods(t *testing.T) {
	for width := uint8(minRegister); width <= maxRegister; width++ {
		seen := make([]bool, 1<<width)
		for _, s := range states(width) {
			n := s >> (32 - width)
			if n == 0 || seen[n] || s<<width != 0 {
				t.Fatalf("register of %d bits: state %x comes again, is zero or too wide", width, n)
			}
			seen[n] = true
		}
		if n := len(states(width)); n != 1<<width-1 {
			t.Errorf("register of %d bits: period %d", width, n)
		}
	}
	// One step written out: 5 bits, x^5 + x^3 + 1, from 1: the last bit falls out and
	// sets bits 5 and 3.
	if got := states(5)[1] >> 27; got != 0b10100 {
		t.Errorf("second state %b", got)
	}
}

// TestSources: which word serves which element, column and addition.
func TestSources(t *testing.T) {
	d := Draws{Seed: 9, Site: 3}
	s := Streams{d, Draws{Seed: 9, Site: 4}}
	shared := Rounding{Mode: Stochastic, Bits: 16, Source: Source{Share: 4}}
	register := Rounding{Mode: Stochastic, Bits: 6, Source: Source{Register: 7}}
	both := Rounding{Mode: Stochastic, Bits: 6, Source: Source{Share: 3, Register: 7}}
	period := states(7)
	for n := range uint64(300) {
		if got := shared.Word(d, n); got != d.Word(n/4) {
			t.Fatalf("element %d: %x", n, got)
		}
		if got, want := register.Word(d, n), period[(uint64(d.Word(0))+n)%127]; got != want {
			t.Fatalf("element %d of a register: %x, want %x", n, got, want)
		}
		if got, want := both.Word(d, n), period[(uint64(d.Word(0))+n/3)%127]; got != want {
			t.Fatalf("element %d of a shared register: %x, want %x", n, got, want)
		}
		k := uint32(n)
		if got := s.from(shared.Source, k, 2, 11); got != s.word(k, 2, 2) {
			t.Fatalf("addition %d: %x", k, got)
		}
		if got, want := s.from(both.Source, k, 2, 11), period[(uint64(s.word(0, 2, 3)>>16)+n)%127]; got != want {
			t.Fatalf("addition %d of a shared register: %x, want %x", k, got, want)
		}
	}
}

// TestSourcesInUse: slices and products take their words from the source of their
// point, whatever part of them is formed.
func TestSourcesInUse(t *testing.T) {
	r := rand.New(rand.NewPCG(45, 46))
	for _, source := range []Source{{Share: 4}, {Register: 8}, {Share: 5, Register: 12}} {
		p := Point{Format: mustFormatOf("E4M3"), Rounding: Rounding{Mode: Stochastic, Bits: 8, Source: source}}
		src := make([]float32, 600)
		for i := range src {
			src[i] = float32(r.NormFloat64())
		}
		d := Draws{Seed: 6}
		all, part := make([]float32, len(src)), make([]float32, len(src))
		RoundSlice(all, src, &p, d, 100, nil)
		RoundSlice(part[:251], src[:251], &p, d, 100, nil)
		RoundSlice(part[251:], src[251:], &p, d, 351, nil)
		for i, v := range src {
			want, _ := p.Round(Exactly(float64(v)), p.Rounding.Word(d, 100+uint64(i)))
			if float64(all[i]) != want || part[i] != all[i] {
				t.Fatalf("%v, element %d: %v and %v, want %v", p, i, all[i], part[i], want)
			}
		}
		m, err := NewMultiplier[float32](Accumulate{Product: &p, Sum: p})
		if err != nil {
			t.Fatal(err)
		}
		q := randomProduct[float32](r, 3, 11, 9, kindsOfData[0].draw, kindsOfData[0].draw)
		q.Scale, q.Bias = nil, nil
		m.Mul(q, nil, nil)
		for i := range 3 {
			for j := range 11 {
				s := 0.0
				for k := range 9 {
					if q.B.Padded(k, j) {
						continue
					}
					var b [1]float32
					q.B.Pack(b[:], 1, k, k+1, j, j+1)
					lane := uint32(q.FirstJ) + uint32(j)
					x, _ := p.Round(ExactProduct(float64(q.A.At(i, k)), float64(b[0])), q.Terms.from(source, uint32(k), uint32(i), lane))
					s, _ = p.Round(Exactly(s).Add(Exactly(x)), q.Sums.from(source, uint32(k), uint32(i), lane))
					s += 0
				}
				if !same(float64(q.C[i*11+j]), s) {
					t.Fatalf("%v, result %d %d: %v, want %v", p, i, j, q.C[i*11+j], s)
				}
			}
		}
	}
}

// TestBiases measures the mean error of every rounding, in gaps, over fractions
// uniform on a grid of 9 bits and all random numbers, against the formulas of the
// package's documentation.
func TestBiases(t *testing.T) {
	const b, n = 9, 4
	grid := math.Ldexp(1, -b)
	mean := func(r Rounding, neg, odd bool, chance func(Bracket) float64) float64 {
		sum := 0.0
		for i := range uint64(1) << b {
			x := Bracket{Fraction: i << (64 - b), Exact: i == 0, Odd: odd}
			up := 0.0
			switch {
			case chance != nil && !x.Exact:
				up = chance(x)
			case chance == nil && r.away(x, neg, 0):
				up = 1
			}
			sum += up - float64(i)*grid
		}
		return sum * grid
	}
	random := func(r Rounding) func(Bracket) float64 {
		return func(x Bracket) float64 { return probability(r, x) }
	}
	inside := 0.5 - grid/2 // the mean fraction
	for _, c := range []struct {
		name      string
		got, want float64
	}{
		// A tie goes up from an odd value, down from an even one: zero on average.
		{"nearest-even", (mean(Rounding{}, false, false, nil) + mean(Rounding{}, false, true, nil)) / 2, 0},
		{"nearest-away", mean(Rounding{Mode: NearestAway}, false, false, nil), grid / 2},
		{"toward-zero", mean(Rounding{Mode: TowardZero}, true, false, nil), -inside},
		{"up", mean(Rounding{Mode: Up}, false, false, nil), 1 - grid - inside},
		{"up, negative", mean(Rounding{Mode: Up}, true, false, nil), -inside},
		{"down", mean(Rounding{Mode: Down}, false, false, nil), -inside},
		{"to-odd", (mean(Rounding{Mode: ToOdd}, false, false, nil) + mean(Rounding{Mode: ToOdd}, false, true, nil)) / 2, 0},
		{"truncated", mean(Rounding{}, false, false, random(Rounding{Mode: Stochastic, Bits: n})), -(math.Ldexp(1, -n) - grid) / 2},
		{"centred", mean(Rounding{}, false, false, random(Rounding{Mode: Stochastic, Bits: n, Variant: Centred})), grid / 2},
		{"centred-even", mean(Rounding{}, false, false, random(Rounding{Mode: Stochastic, Bits: n, Variant: CentredEven})), 0},
		{"equal", mean(Rounding{}, false, false, random(Rounding{Mode: Stochastic, Bits: n, Variant: Equal})), 0},
		{"register", mean(Rounding{}, false, false, registerChance(Rounding{Mode: Stochastic, Bits: n, Source: Source{Register: 6}})), registerBias(n, 6, b)},
	} {
		if math.Abs(c.got-c.want) > 1e-12 {
			t.Errorf("%s: mean error %v gaps, want %v", c.name, c.got, c.want)
		}
	}
	// Equal probability: 1/2 - f for every fraction f that is not zero.
	for i := uint64(1); i < 1<<b; i++ {
		f := float64(i) * grid
		got := probability(Rounding{Mode: Stochastic, Bits: n, Variant: Equal}, Bracket{Fraction: i << (64 - b)})
		if got-f != 0.5-f {
			t.Fatalf("equal probability at %v: %v", f, got)
		}
	}
}

// registerChance counts over one period.
func registerChance(r Rounding) func(Bracket) float64 {
	return func(x Bracket) float64 {
		up := 0
		for _, s := range states(r.Source.Register) {
			if r.away(x, false, s) {
				up++
			}
		}
		return float64(up) / float64(len(states(r.Source.Register)))
	}
}

// registerBias is the formula: T of 2^r becomes T 2^(w-r) of 2^w - 1 states, the mean
// of T/2^r being that of truncation.
func registerBias(r, w, b int) float64 {
	period := math.Ldexp(1, w) - 1
	truncated := 0.5 - math.Ldexp(1, -r)/2 // the mean of T 2^-r
	return truncated*(period+1)/period - (0.5 - math.Ldexp(1, -b)/2)
}

// TestSharedDraws: lanes that share a draw err alike: the mean error of one element
// is that of its own draw, but of n equal elements all or none move.
func TestSharedDraws(t *testing.T) {
	p := Point{Format: mustFormatOf("Q8.0"), Rounding: Rounding{Mode: Stochastic, Bits: 8, Source: Source{Share: 8}}}
	const n = 8 * 4000
	src, dst := make([]float64, n), make([]float64, n)
	for i := range src {
		src[i] = 0.3125
	}
	RoundSlice(dst, src, &p, Draws{Seed: 77}, 0, nil)
	up := 0
	for at := 0; at < n; at += 8 {
		for _, v := range dst[at : at+8] {
			if v != dst[at] {
				t.Fatalf("lanes of a group differ: %v", dst[at:at+8])
			}
		}
		up += int(dst[at])
	}
	near(t, "mean of shared draws", float64(up)/4000, 0.3125, math.Sqrt(0.3125*0.6875/4000))
}

// TestHardwareText: orders and roundings of hardware models, to text and back.
func TestHardwareText(t *testing.T) {
	for text, want := range map[string]string{
		"compensated": "compensated", "aligned(4,24)": "aligned(4, 24)", "Aligned( 16 , 12 )": "aligned(16, 12)",
	} {
		o, err := ParseOrder(text)
		if err != nil || o.String() != want {
			t.Errorf("%q: %v, %v", text, o, err)
		}
	}
	for text, want := range map[string]string{
		"stochastic(8,equal)": "stochastic(8, equal)", "stochastic(6, share=4, register=7)": "stochastic(6, share=4, register=7)",
		"stochastic(8, centred, share=1)": "stochastic(8, centred)", "stochastic(16,register=16)": "stochastic(16, register=16)",
	} {
		r, err := ParseRounding(text)
		if err != nil || r.String() != want {
			t.Errorf("%q: %v, %v", text, r, err)
		}
		if again, err := ParseRounding(r.String()); err != nil || again != r {
			t.Errorf("%q reads back as %v, %v", r, again, err)
		}
	}
	acc := mustAccumulate(t, "product exact; sum bf16 stochastic(8,share=4,register=9); aligned(4, 12)")
	if again := mustAccumulate(t, acc.String()); again.String() != acc.String() || fmt.Sprint(again.Sum) != fmt.Sprint(acc.Sum) {
		t.Errorf("%v reads back as %v", acc, again)
	}
	for _, text := range []string{
		"aligned", "aligned(4)", "aligned(4,1)", "aligned(0,8)", "aligned(4,65)", "aligned(4,x)", "chunk(4,8)", "compensated(2)",
	} {
		if o, err := ParseOrder(text); err == nil {
			t.Errorf("order %q is read as %v", text, o)
		}
	}
	for _, text := range []string{
		"stochastic(8,register=3)", "stochastic(8,register=17)", "stochastic(9,register=8)", "stochastic(8,share=0)",
		"stochastic(8,share=x)", "stochastic(8,lanes=4)", "stochastic(8,even)",
	} {
		if r, err := ParseRounding(text); err == nil {
			t.Errorf("rounding %q is read as %v", text, r)
		}
	}
	for _, text := range []string{"sum fp16; aligned(4,8); through binary32", "sum MXFP4", "sum INT8", "product MXFP8; sum fp32"} {
		if a, err := ParseAccumulate(text); err == nil {
			t.Errorf("accumulation %q is read as %v", text, a)
		}
	}
	if err := (Point{Format: Binary16, Rounding: Rounding{Source: Source{Share: 4}}}).Check(); err == nil {
		t.Error("a shared draw without stochastic rounding is accepted")
	}
}
