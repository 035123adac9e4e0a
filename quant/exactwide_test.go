package quant

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"
)

// TestWideSumsByChains holds the chains of binary64 to the engine's own exact sums and,
// in TestMulAgainstReference, to exact reals; and sees that they serve where one would
// expect them to, by one chain, two and four.
func TestWideSumsByChains(t *testing.T) {
	type data struct {
		name   string
		chains int
		draw   func(r *rand.Rand) float64
	}
	narrow := func(text string) func(r *rand.Rand) float64 {
		p := mustPoint(t, text)
		return func(r *rand.Rand) float64 { v, _ := p.Round(Exactly(r.NormFloat64()), 0); return v }
	}
	kinds := []data{
		{"E4M3", 1, narrow("E4M3")},
		{"fp16", 2, narrow("fp16")},
		{"fp16 of all exponents", 4, func(r *rand.Rand) float64 {
			return math.Ldexp(float64(1024+r.IntN(1024))*float64(1-2*r.IntN(2)), r.IntN(30)-24)
		}},
		{"too wide", 0, func(r *rand.Rand) float64 { return float64(float32(math.Ldexp(r.NormFloat64(), r.IntN(90)-45))) }},
	}
	texts := []string{
		"product exact; sum fp16; wide", "product fp32; sum bf16; wide", "product exact; sum fp32 stochastic; wide",
		"product exact; sum fp16 stochastic(8,centred); outer fp32; wide", "product exact; sum E4M3 toward-zero; wide",
	}
	most := make([]int, len(kinds))
	defer func() {
		for k, d := range kinds {
			if most[k] != d.chains {
				t.Errorf("%s: never more than %d chains, want %d", d.name, most[k], d.chains)
			}
		}
	}()
	for n, text := range texts {
		acc, err := ParseAccumulate(text)
		if err != nil {
			t.Fatal(err)
		}
		for k, d := range kinds {
			r := rand.New(rand.NewPCG(uint64(n), 7))
			for range 3 {
				p := randomProduct[float32](r, 1+r.IntN(30), 1+r.IntN(90), 200+r.IntN(100), d.draw, d.draw)
				m, _ := NewMultiplier[float32](acc)
				var got, want [2]Counts
				m.Mul(p, &got[0], &got[1])
				if n := m.wide.n; n > d.chains || (n > 0) != (d.chains > 0) {
					t.Errorf("%s, %s: %d chains, want up to %d", text, d.name, n, d.chains)
				}
				most[k] = max(most[k], m.wide.n)
				chained := append([]float32(nil), p.C...)
				m.wide = nil
				m.Mul(p, &want[0], &want[1])
				for i, w := range p.C {
					if math.Float32bits(chained[i]) != math.Float32bits(w) {
						t.Fatalf("%s, %s: element %d is %v by chains, %v without", text, d.name, i, chained[i], w)
					}
				}
				if got != want {
					t.Fatalf("%s, %s: counts %+v by chains, %+v without", text, d.name, got, want)
				}
			}
		}
	}
}

// TestCutOperands: the parts of an operand add up to it, and are as short as they say.
func TestCutOperands(t *testing.T) {
	r := rand.New(rand.NewPCG(5, 6))
	for round := range 2000 {
		o := cutOperand{whole: make([]float64, 1+r.IntN(9))}
		span := 1 + r.IntN(80)
		for i := range o.whole {
			o.whole[i] = math.Ldexp(float64(r.IntN(1<<24)-1<<23), r.IntN(span)-span/2-100*(round%2))
		}
		o.measure()
		for _, n := range []int{1, 2} {
			if o.width(n) > 52 {
				continue
			}
			o.cut(n)
			place := [2]int{o.fine, o.fine}
			if n == 2 {
				place[0] = o.fine + o.width(2)
			}
			for i, v := range o.whole {
				sum := 0.0
				for k, part := range o.parts[:n] {
					sum += part[i]
					if units := math.Abs(math.Ldexp(part[i], -place[k])); units != math.Floor(units) || units > math.Ldexp(1, o.width(n)) {
						t.Fatalf("part %d of %d of %x is %v units, width %d", k, n, v, units, o.width(n))
					}
				}
				if sum != v {
					t.Fatalf("%d parts of %x add up to %x", n, v, sum)
				}
			}
		}
	}
}

func mustPoint(t testing.TB, text string) *Point {
	t.Helper()
	p, err := ParsePoint(text)
	if err != nil {
		t.Fatal(fmt.Errorf("%s: %w", text, err))
	}
	return &p
}
