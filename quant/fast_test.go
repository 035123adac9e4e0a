package quant

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"ulpine/quant/internal/kernel"
)

// fastTexts are accumulations that the kernels serve, by the words of a plan.
var fastTexts = []string{
	"product fp32; sum fp32",
	"product exact; sum fp32",
	"product fp16; sum fp32",
	"product fp16; sum fp16",
	"product bf16; sum bf16",
	"product E4M3; sum E4M3",
	"product E5M2; sum fp16",
	"product fp16; sum E5M2",
	"product fp16 nearest-even saturate; sum fp16 nearest-even nan",
	"product fp32; sum fp16",
	"product fp32; sum bf16",
	"product fp32 nearest-even saturate; sum E6M9",
	"product exact; sum fp16",
	"product exact; sum bf16",
	"product exact; sum fp16; through binary32",
	"product fp32; sum bf16; through binary32",
	"product fp16; sum fp16 stochastic",
	"product exact; sum fp16 stochastic(12,centred)",
	"product exact; sum bf16 stochastic(8)",
	"product fp16; sum fp16 stochastic; through binary32",
	"product fp32; sum bf16 stochastic(16,centred); through binary32",
	"product fp16 stochastic; sum fp16 stochastic",
	"product bf16 stochastic(8,centred); sum fp16 stochastic(12)",
	"product fp16; sum fp16; outer fp32; chunk(7)",
	"product fp16; sum fp16; chunk(64)",
	"product fp32; sum fp32; pairwise",
	"product fp16; sum fp16; pairwise",
	"product fp32; sum fp16 nearest-even saturate; outer fp32; pairwise",
	"product exact; sum bf16; through binary32; pairwise",
	"product fp16; sum fp16; lanes(8)",
	"product exact; sum bf16; lanes(5)",
	"product fp32; sum fp32; outer fp16; lanes(3)",
	"product fp32; sum bf16; outer fp32; chunk(16)",
}

// TestFastAgainstEngine forms products with the kernels of every set, and with the
// engine alone: bits and counts are equal, on every kind of data, shapes up to some
// panels, blocks and groups of rows.
func TestFastAgainstEngine(t *testing.T) {
	rounds := 24
	if testing.Short() {
		rounds = 4
	}
	for n, text := range fastTexts {
		t.Run(text, func(t *testing.T) {
			t.Parallel()
			acc, err := ParseAccumulate(text)
			if err != nil {
				t.Fatal(err)
			}
			r := rand.New(rand.NewPCG(uint64(n), 11))
			for round := range rounds {
				a, b := kindsOfData[(n+round)%len(kindsOfData)], kindsOfData[r.IntN(len(kindsOfData))]
				p := randomProduct[float32](r, r.IntN(30), r.IntN(120), r.IntN(70), a.draw, b.draw)
				if round%8 == 0 {
					p = randomProduct[float32](r, 1+r.IntN(5), 1+r.IntN(40), 250+r.IntN(400), a.draw, b.draw)
				}
				p.Scale = nil
				label := fmt.Sprintf("%s: %s x %s, round %d, %dx%dx%d", text, a.name, b.name, round, p.I, p.J, p.K)
				fastAgainstEngine(t, acc, p, label)
			}
		})
	}
}

func fastAgainstEngine(t *testing.T, acc Accumulate, p Product[float32], label string) {
	t.Helper()
	m, err := NewMultiplier[float32](acc)
	if err != nil {
		t.Fatal(err)
	}
	if m.fast == nil {
		t.Fatalf("%s: no kernels", label)
	}
	fast := m.fast
	m.fast = nil
	var wantProducts, wantSums Counts
	m.Mul(p, &wantProducts, &wantSums)
	want := append([]float32(nil), p.C...)
	a, _ := kernelArithmetic(acc)
	m.fast = fast
	for _, set := range kernel.Sets {
		fast.kernel = kernel.NewWith(set, a)
		var products, sums Counts
		clear(p.C)
		m.Mul(p, &products, &sums)
		for i, w := range want {
			if math.Float32bits(p.C[i]) != math.Float32bits(w) {
				t.Fatalf("%s, %s: (%d,%d) = %x, want %x", label, set.Name, i/p.J, i%p.J, p.C[i], w)
			}
		}
		if products != wantProducts || sums != wantSums {
			t.Fatalf("%s, %s: counts %+v %+v, want %+v %+v", label, set.Name, products, sums, wantProducts, wantSums)
		}
	}
}

// TestWideAgainstReference holds products in binary64 to exact reals.
func TestWideAgainstReference(t *testing.T) {
	for n, text := range []string{"product fp64; sum fp64", "product exact; sum fp64", "product fp64; sum fp64; outer fp64"} {
		acc, err := ParseAccumulate(text)
		if err != nil {
			t.Fatal(err)
		}
		if m, _ := NewMultiplier[float64](acc); m.fast == nil || m.fast.wide == nil {
			t.Fatalf("%s: no kernels", text)
		}
		r := rand.New(rand.NewPCG(uint64(n), 13))
		for round := range 40 {
			a, b := kindsOfData[round%len(kindsOfData)], kindsOfData[r.IntN(len(kindsOfData))]
			p := randomProduct[float64](r, r.IntN(6), r.IntN(40), r.IntN(40), a.draw, b.draw)
			for i := range p.A.Data { // more than 24 bits
				p.A.Data[i] *= math.Exp(r.NormFloat64())
			}
			againstReference(t, acc, p, fmt.Sprintf("%s, %s x %s", text, a.name, b.name))
		}
	}
}
