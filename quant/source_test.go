package quant

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"
)

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
		if got := s.from(shared.Source, k, 2, 11); got != s.Word(k, 2, 2) {
			t.Fatalf("addition %d: %x", k, got)
		}
		if got, want := s.from(both.Source, k, 2, 11), period[(uint64(s.Word(0, 2, 3)>>16)+n)%127]; got != want {
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
