package kernel

import (
	"fmt"
	"math/rand/v2"
	"testing"
	"time"

	"ulpine/quant/random"
)

// dense is a row-major matrix as the right-hand operand.
type dense struct {
	data []float32
	row  int
}

func (d dense) Pack(dst []float32, width, k0, k1, j0, j1 int) {
	for k := k0; k < k1; k++ {
		to := dst[(k-k0)*width:][:width]
		clear(to[copy(to, d.data[k*d.row+j0:k*d.row+j1]):])
	}
}

var (
	fp16 = Grid{10, -14, 65504}
	bf16 = Grid{7, -126, 0x1.fep127}
	e4m3 = Grid{3, -6, 448}
	e5m2 = Grid{2, -14, 57344}
	e6m9 = Grid{9, -30, 0x1.ff8p31}
)

func nearestSum(g Grid) Sum { return Sum{Kind: NearestSum, Grid: g} }
func throughSum(g Grid) Sum { return Sum{Kind: NearestSum, Grid: g, Through: true} }
func randomSum(g Grid, r int, th, c bool) Sum {
	return Sum{Kind: StochasticSum, Grid: g, Bits: r, Through: th, Centred: c}
}

// in is an arithmetic with one kind of sum everywhere.
func in(p ProductKind, g Grid, s Sum) Arithmetic {
	return Arithmetic{Product: p, Grid: g, Sum: s, Outer: s}
}

// randomBoth rounds products stochastically too.
func randomBoth(g Grid, r int, centred bool, s Sum) Arithmetic {
	return Arithmetic{Product: RandomProduct, Grid: g, Bits: r, Centred: centred, Sum: s, Outer: s}
}

var benchModes = []struct {
	name string
	a    Arithmetic
	g    Grid // of the operands
}{
	{"baseline", in(NativeProduct, Grid{}, Sum{}), fp16},
	{"fma-chain", in(ExactProduct, Grid{}, Sum{}), fp16},
	{"baseline-pairwise", Arithmetic{Product: NativeProduct, Pairwise: true}, fp16},
	{"rounded-product-and-sum", in(RoundedProduct, fp16, nearestSum(fp16)), fp16},
	{"rounded-product-and-sum-bf16", in(RoundedProduct, bf16, nearestSum(bf16)), bf16},
	{"rounded-product-binary32-sum", in(RoundedProduct, fp16, Sum{}), fp16},
	{"rounded-sum-through-binary32", in(ExactProduct, Grid{}, throughSum(fp16)), fp16},
	{"rounded-sum-through-binary32-bf16", in(ExactProduct, Grid{}, throughSum(bf16)), bf16},
	{"fused-sum", in(ExactProduct, Grid{}, nearestSum(fp16)), fp16},
	{"fused-sum-bf16", in(ExactProduct, Grid{}, nearestSum(bf16)), bf16},
	{"fused-sum-fp32-operands", in(NativeProduct, Grid{}, nearestSum(fp16)), Grid{}},
	{"stochastic-sum", in(RoundedProduct, fp16, randomSum(fp16, 16, false, false)), fp16},
	{"stochastic-sum-through-binary32", in(RoundedProduct, fp16, randomSum(fp16, 16, true, false)), fp16},
	{"exact-product-stochastic-sum", in(ExactProduct, Grid{}, randomSum(fp16, 16, false, false)), fp16},
	{"exact-product-stochastic-sum-bf16", in(ExactProduct, Grid{}, randomSum(bf16, 16, false, false)), bf16},
	{"exact-product-stochastic-sum-through-binary32", in(ExactProduct, Grid{}, randomSum(fp16, 16, true, false)), fp16},
	{"exact-product-stochastic-sum-through-binary32-bf16", in(ExactProduct, Grid{}, randomSum(bf16, 16, true, false)), bf16},
	{"stochastic-product-and-sum", randomBoth(fp16, 16, false, randomSum(fp16, 16, false, false)), fp16},
	{"pairwise", Arithmetic{Product: RoundedProduct, Grid: fp16, Sum: nearestSum(fp16), Outer: nearestSum(fp16), Pairwise: true}, fp16},
	{"pairwise-binary32-product", Arithmetic{Product: NativeProduct, Sum: nearestSum(fp16), Outer: nearestSum(fp16), Pairwise: true}, fp16},
	{"lanes8", Arithmetic{Product: RoundedProduct, Grid: fp16, Sum: nearestSum(fp16), Outer: nearestSum(fp16), Lanes: 8}, fp16},
	{"chunk64-binary32-outside", Arithmetic{Product: RoundedProduct, Grid: fp16, Sum: nearestSum(fp16), Chunk: 64}, fp16},
}

// benchShapes are I x J x K: squares, the convolutions of a LeNet-size network
// (batch 64, forward and weight gradient), its dense layer.
var benchShapes = [][3]int{{512, 512, 512}, {256, 256, 256}, {8, 36864, 25}, {16, 4096, 200}, {8, 25, 36864}, {120, 64, 256}}

// toGrid rounds to nearest-even to a grid; a zero grid leaves x alone.
func toGrid(x float64, g Grid) float32 {
	if g == (Grid{}) {
		return float32(x)
	}
	c := single.masks()
	c.nearest(double, g, 0)
	return float32(near64(x, c.SumLeast.double(), c.SumGrow.double()))
}

func BenchmarkProduct(b *testing.B) {
	for _, set := range Sets {
		for _, s := range benchShapes {
			for _, mode := range benchModes {
				b.Run(fmt.Sprintf("%s/%dx%dx%d/%s", set.Name, s[0], s[1], s[2], mode.name), func(b *testing.B) {
					benchProduct(b, NewWith(set, mode.a), mode.g, s)
				})
			}
		}
	}
}

func benchProduct(b *testing.B, m *Multiplier, g Grid, s [3]int) {
	r := rand.New(rand.NewPCG(1, 2))
	draw := func(n int) []float32 {
		x := make([]float32, n)
		for i := range x {
			x[i] = toGrid(r.NormFloat64()*0.25, g)
		}
		return x
	}
	p := Product[float32]{
		I: s[0], J: s[1], K: s[2], A: draw(s[0] * s[2]), ARow: s[2], ACol: 1,
		B: dense{draw(s[1] * s[2]), s[1]}, C: make([]float32, s[0]*s[1]),
		Sums: Streams{random.Draws{Seed: 1}, random.Draws{Seed: 2}}, Terms: Streams{random.Draws{Seed: 3}, random.Draws{Seed: 4}},
	}
	back := 0
	redo := func(i0, i1, j0, j1 int) { back += (i1 - i0) * (j1 - j0) }
	b.ReportAllocs()
	best := time.Hour
	for b.Loop() {
		start := time.Now()
		m.Mul(&p, redo)
		best = min(best, time.Since(start))
	}
	if back > 0 {
		b.Errorf("%d results were handed back", back/b.N)
	}
	operations := 2 * float64(s[0]) * float64(s[1]) * float64(s[2])
	b.ReportMetric(operations*float64(b.N)/float64(b.Elapsed().Nanoseconds()), "GF")
	b.ReportMetric(operations/float64(best.Nanoseconds()), "GF-best") // on a busy machine
}
