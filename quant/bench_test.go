package quant

import (
	"fmt"
	"math/rand/v2"
	"testing"
)

// benchModes are the arithmetics measured, by the names that the tables use; binary16
// throughout unless the name says otherwise.
var benchModes = []struct {
	name string
	acc  string
}{
	{"baseline", "product fp32; sum fp32"},
	{"baseline-pairwise", "product fp32; sum fp32; pairwise"},
	{"fma-chain", "product exact; sum fp32"},
	{"rounded-product-and-sum", "product fp16; sum fp16"},
	{"rounded-product-bf16-and-sum", "product bf16; sum bf16"},
	{"rounded-product-binary32-sum", "product fp16; sum fp32"},
	{"binary32-product-rounded-sum", "product fp32; sum fp16"},
	{"fused-sum", "product exact; sum fp16"},
	{"rounded-sum-through-binary32", "product exact; sum fp16; through binary32"},
	{"stochastic-sum", "product fp16; sum fp16 stochastic"},
	{"exact-product-stochastic-sum", "product exact; sum fp16 stochastic"},
	{"stochastic-sum-through-binary32", "product fp16; sum fp16 stochastic; through binary32"},
	{"chunk64-binary32-outside", "product fp16; sum fp16; outer fp32; chunk(64)"},
	{"pairwise", "product fp16; sum fp16; pairwise"},
	{"lanes8", "product fp16; sum fp16; lanes(8)"},
	{"wide", "product exact; sum fp16; wide"},
	{"toward-zero", "product fp16 toward-zero; sum fp16 toward-zero"},
	{"flush", "product E5M10(subnormals=flush); sum E5M10(subnormals=flush)"},
	{"E4M3-saturating", "product E4M3; sum E4M3"},
}

// benchShapes are I x J x K.
var benchShapes = [][3]int{{256, 256, 256}, {8, 2304, 25}, {16, 256, 200}, {10, 64, 128}}

func BenchmarkMatMul(b *testing.B) {
	for _, s := range benchShapes {
		for _, mode := range benchModes {
			b.Run(fmt.Sprintf("%dx%dx%d/%s", s[0], s[1], s[2], mode.name), func(b *testing.B) {
				acc, err := ParseAccumulate(mode.acc)
				if err != nil {
					b.Fatal(err)
				}
				benchmarkProduct[float32](b, acc, s)
			})
		}
	}
	for _, mode := range []struct{ name, acc string }{
		{"control-binary64", "product fp64; sum fp64"},
		{"control-binary64-fused", "product exact; sum fp64"},
	} {
		b.Run("256x256x256/"+mode.name, func(b *testing.B) {
			acc, err := ParseAccumulate(mode.acc)
			if err != nil {
				b.Fatal(err)
			}
			benchmarkProduct[float64](b, acc, benchShapes[0])
		})
	}
}

func benchmarkProduct[T Element](b *testing.B, acc Accumulate, s [3]int) {
	m, err := NewMultiplier[T](acc)
	if err != nil {
		b.Fatal(err)
	}
	r := rand.New(rand.NewPCG(1, 2))
	draw := func(n int) []T {
		x := make([]T, n)
		for i := range x {
			v, _ := (&Point{Format: Binary16}).Round(Exactly(r.NormFloat64()*0.25), 0)
			x[i] = T(v)
		}
		return x
	}
	i, j, k := s[0], s[1], s[2]
	p := Product[T]{I: i, J: j, K: k, A: Matrix[T]{draw(i * k), k, 1}, B: Matrix[T]{draw(k * j), j, 1}, C: make([]T, i*j)}
	b.ReportAllocs()
	for b.Loop() {
		m.Mul(p, nil, nil)
	}
	b.ReportMetric(2*float64(i)*float64(j)*float64(k)*float64(b.N)/float64(b.Elapsed().Nanoseconds()), "GF")
}

func BenchmarkRoundSlice(b *testing.B) {
	const n = 1 << 16
	src, dst := make([]float32, n), make([]float32, n)
	r := rand.New(rand.NewPCG(1, 2))
	for i := range src {
		src[i] = float32(r.NormFloat64())
	}
	for _, text := range []string{"fp16", "bf16", "fp32", "E4M3", "bf16 stochastic", "bf16 stochastic(32)", "fp16 toward-zero"} {
		b.Run(text, func(b *testing.B) {
			p, err := ParsePoint(text)
			if err != nil {
				b.Fatal(err)
			}
			b.SetBytes(4 * n)
			var c Counts
			for b.Loop() {
				RoundSlice(dst, src, &p, Draws{}, 0, &c)
			}
		})
	}
	b.Run("copy", func(b *testing.B) {
		b.SetBytes(4 * n)
		for b.Loop() {
			copy(dst, src)
		}
	})
}
