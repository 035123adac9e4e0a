package quant

import (
	"math"
	"testing"

	"pgregory.net/rapid"
)

// TestOddSafe: where a point says so, products folded to odd round as exact ones.
func TestOddSafe(t *testing.T) {
	safe := 0
	rapid.Check(t, func(t *rapid.T) {
		p := Point{Format: anyScalar(t), Rounding: anyRounding(t)}
		if !p.OddSafe() {
			return
		}
		safe++
		word := rapid.Uint32().Draw(t, "word")
		a := anyReal(t, p.Format.Limits())
		b := rapid.Float64Range(-4, 4).Draw(t, "factor")
		// A factor near 1 puts the product a hair's breadth from values and ties.
		if rapid.Bool().Draw(t, "near") {
			v, _ := p.Round(Exactly(a), word)
			if v-v == 0 {
				a = v * rapid.SampledFrom([]float64{1, 1.5, 1.25, 1 + 0x1p-20}).Draw(t, "place")
			}
			b = 1 + math.Ldexp(float64(rapid.IntRange(-3, 3).Draw(t, "hair")), -52)
		}
		product := float64(a * b)
		rest := math.FMA(a, b, -product)
		if m := math.Abs(product); m < 0x1p-900 || m > 0x1p900 {
			return
		}
		want, event := p.Round(ExactProduct(a, b), word)
		if got, e := p.Round(Exactly(oddFold(product, rest)), word); !same(got, want) || e != event {
			t.Fatalf("%v: %v x %v folded -> %v %d, want %v %d", p, a, b, got, e, want, event)
		}
	})
	if safe == 0 {
		t.Error("no point was safe")
	}
	for name, want := range map[string]bool{
		"fp16": true, "fp64": false, "Q2.14 stochastic(32)": true, "Q30.20 stochastic(8)": false, "Q2.14(overflow=wrap)": false,
		"posit16 stochastic(32)": true, "posit32 stochastic(32)": false, "LNS4.3": false, "table(-1,1)": false, "binary8p3 stochastic(16)": true,
	} {
		p, err := ParsePoint(name)
		if err != nil {
			t.Fatal(err)
		}
		if p.OddSafe() != want {
			t.Errorf("%v: %v", p, p.OddSafe())
		}
	}
}
