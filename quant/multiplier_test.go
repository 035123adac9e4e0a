package quant

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"
)

// sparse is a matrix with padding, as a convolution's patches have it.
type sparse[T Element] struct {
	Matrix[T]
	pad map[[2]int]bool
}

func (s sparse[T]) Padded(k, j int) bool { return s.pad[[2]int{k, j}] }

func (s sparse[T]) Pack(dst []T, width, k0, k1, j0, j1 int) {
	s.Matrix.Pack(dst, width, k0, k1, j0, j1)
	for k := k0; k < k1; k++ {
		for j := j0; j < j1; j++ {
			if s.Padded(k, j) {
				dst[(k-k0)*width+j-j0] = 0
			}
		}
	}
}

// kindsOfData draw operands that lead to the corners of the arithmetic.
var kindsOfData = []struct {
	name string
	draw func(r *rand.Rand) float64
}{
	{"normal", func(r *rand.Rand) float64 { return r.NormFloat64() }},
	{"small integers", func(r *rand.Rand) float64 { return float64(r.IntN(9) - 4) }},
	{"ties", func(r *rand.Rand) float64 {
		return math.Ldexp(float64(r.IntN(4096)-2048), -r.IntN(14))
	}},
	{"tiny", func(r *rand.Rand) float64 { return r.NormFloat64() * math.Ldexp(1, -r.IntN(90)) }},
	{"huge", func(r *rand.Rand) float64 { return r.NormFloat64() * math.Ldexp(1, r.IntN(70)) }},
	{"wide", func(r *rand.Rand) float64 { return r.NormFloat64() * math.Ldexp(1, r.IntN(250)-125) }},
	{"beyond", func(r *rand.Rand) float64 {
		return [...]float64{1, -1, 448, 65504, -65504, 3e38, -3e38, 1e-30, 0.5}[r.IntN(9)]
	}},
	{"specials", func(r *rand.Rand) float64 {
		if r.IntN(6) > 0 {
			return float64(r.IntN(9) - 4)
		}
		return [...]float64{math.Inf(1), math.Inf(-1), math.NaN(), math.Copysign(0, -1), 0}[r.IntN(5)]
	}},
	// Values and midpoints of several formats beside terms far below: sums whose
	// binary64 rounding is a tie that the exact sum is not.
	{"near ties", func(r *rand.Rand) float64 {
		x := [...]float64{1, 1 + 0x1p-8, 1 + 0x1p-11, 1 + 3*0x1p-11, 1 + 3*0x1p-8, 1.25, 0x1p-8, 0x1p-11, 0x1p-24, 0x1p-25}[r.IntN(10)]
		if r.IntN(2) == 0 {
			x = [...]float64{0x1p-40, 0x1p-60, 0x1p-70, 0x1p-54, 0x1p-100}[r.IntN(5)]
		}
		return math.Copysign(x, float64(r.IntN(3))-0.5)
	}},
	{"units", func(r *rand.Rand) float64 { return [...]float64{1, 1, 1, 0.5, -1}[r.IntN(5)] }},
	// Full significands of one sign, in two ranges: the longest exact sums.
	{"full", func(r *rand.Rand) float64 {
		return math.Ldexp(float64(1<<24-1-r.IntN(5)), [...]int{-20, -24, -50}[r.IntN(3)])
	}},
	{"zeros", func(r *rand.Rand) float64 {
		if r.IntN(3) > 0 {
			return math.Copysign(0, float64(r.IntN(2))-0.5)
		}
		return r.NormFloat64()
	}},
}

// innerPoints are arithmetics of products and, but for the last, which binary32
// does not hold, of sums in tensors of float32.
func innerPoints(t testing.TB) []*Point {
	texts := []string{
		"fp16", "bf16", "fp32", "E4M3", "E5M2", "E6M9", "fp16 stochastic", "bf16 stochastic(8,centred)",
		"fp16 stochastic(4,centred-even)", "E5M2 stochastic(2)", "fp32 stochastic(16,centred)", "fp16 toward-zero",
		"bf16 to-odd", "fp32 up", "E4M3 down nan", "fp16 nearest-away saturate", "bf16 nearest-even nan",
		"E5M10(subnormals=flush)", "E4M0", "E2M1", "fp32 nearest-even saturate", "E8M20", "E4M3(top=ieee)",
		"Q2.14", "Q4.4", "Q2.14 stochastic(16)", "Q8.8 toward-zero", "Q3.5 nearest-even nan", "Q2.6 to-odd", "UQ2.6",
		"Q10.14 stochastic(3,centred)", "binary8p4", "binary8p3 stochastic(4)", "binary6p2 up saturate", "E4M1 down", "posit8",
		"fp32 toward-zero", "E9M10",
	}
	var p []*Point
	for _, s := range texts {
		x, err := ParsePoint(s)
		if err != nil {
			t.Fatal(err)
		}
		p = append(p, &x)
	}
	return p
}

var testOrders = []Order{{}, {Kind: Chunk, K: 1}, {Kind: Chunk, K: 5}, {Kind: Wide}, {Kind: Pairwise}, {Kind: Lanes, K: 1}, {Kind: Lanes, K: 4}, {Kind: Chunk, K: 64}}

// randomProduct draws operands of an I x K by K x J product.
func randomProduct[T Element](r *rand.Rand, i, j, k int, a, b func(*rand.Rand) float64) Product[T] {
	fill := func(n int, draw func(*rand.Rand) float64) []T {
		x := make([]T, n)
		for i := range x {
			x[i] = T(float32(draw(r)))
		}
		return x
	}
	p := Product[T]{I: i, J: j, K: k, C: make([]T, i*j), FirstJ: uint64(r.IntN(1000))}
	p.A = Matrix[T]{fill(i*k+3, a), k, 1}
	m := Matrix[T]{fill(j*k+3, b), j, 1}
	if r.IntN(2) == 0 {
		p.A.Row, p.A.Col = 1, i
		m.Row, m.Col = 1, k
	}
	p.B = m
	if r.IntN(3) == 0 && k*j > 0 {
		s := sparse[T]{m, map[[2]int]bool{}}
		for range 1 + k*j/3 {
			s.pad[[2]int{r.IntN(k), r.IntN(j)}] = true
		}
		p.B = s
	}
	if r.IntN(2) == 0 {
		p.Bias = fill(i, a)
	}
	if r.IntN(4) == 0 {
		p.Scale = make([]float64, i)
		for n := range p.Scale {
			p.Scale[n] = math.Exp(r.NormFloat64())
		}
	}
	draw := func() Draws {
		return Draws{Seed: r.Uint64(), Step: r.Uint32(), Site: r.Uint32(), Phase: uint32(r.IntN(4))}
	}
	p.Terms, p.Sums = Streams{draw(), draw()}, Streams{draw(), draw()}
	return p
}

// againstReference forms the product by whatever path serves, by the paths without
// kernels, and by the engine alone, and compares bits and counts with the reference.
func againstReference[T Element](t *testing.T, acc Accumulate, p Product[T], label string) {
	t.Helper()
	m, err := NewMultiplier[T](acc)
	if err != nil {
		t.Fatalf("%v: %v", acc, err)
	}
	want := p
	want.C = make([]T, len(p.C))
	var wantProducts, wantSums Counts
	ref := newReference[T](acc)
	ref.mul(&want, &wantProducts, &wantSums)
	for _, path := range []string{"fastest", "without kernels", "engine"} {
		switch path {
		case "without kernels":
			m.fast = nil
		case "engine":
			m.native = nil
		}
		clear(p.C)
		var products, sums Counts
		m.Mul(p, &products, &sums)
		for n := range p.C {
			if math.Float64bits(float64(p.C[n])) != math.Float64bits(float64(want.C[n])) {
				t.Fatalf("%v, %s, %dx%dx%d, %s: element %d (row %d): %v (%x), want %v (%x)", acc, label, p.I, p.J, p.K, path, n, n/p.J,
					p.C[n], float64(p.C[n]), want.C[n], float64(want.C[n]))
			}
			if p.C[n] == 0 && math.Signbit(float64(p.C[n])) {
				t.Fatalf("%v, %s, %s: a sum is -0", acc, label, path)
			}
		}
		if products != wantProducts || sums != wantSums {
			t.Fatalf("%v, %s, %dx%dx%d, %s: counts %+v %+v, want %+v %+v", acc, label, p.I, p.J, p.K, path, products, sums, wantProducts, wantSums)
		}
	}
}

// TestMulAgainstReference draws products of every order, pair of points and kind of
// data, and holds Mul to the scalar reference in bits and counts.
func TestMulAgainstReference(t *testing.T) {
	points := innerPoints(t)
	rounds := 40
	if testing.Short() {
		rounds = 8
	}
	for _, order := range testOrders {
		t.Run(order.String(), func(t *testing.T) {
			t.Parallel()
			r := rand.New(rand.NewPCG(1, uint64(order.Kind)<<8|uint64(order.K)))
			for round := range rounds {
				for n, sum := range points[:len(points)-1] {
					acc := Accumulate{Sum: *sum, Order: order}
					if i := (n*7 + round*5) % (len(points) + 2); i < len(points) {
						acc.Product = points[i]
					}
					if round%10 == 9 { // the baseline and its like
						acc.Product, acc.Sum = points[2], *points[2]
					}
					if r.IntN(3) == 0 {
						acc.Outer = points[r.IntN(len(points)-1)]
					}
					acc.Through32 = r.IntN(4) == 0 && order.Kind != Wide
					a, b := kindsOfData[(n+round)%len(kindsOfData)], kindsOfData[r.IntN(len(kindsOfData))]
					i, j, k := r.IntN(5), r.IntN(21), r.IntN(21)
					if r.IntN(20) == 0 {
						j, k = 60+r.IntN(20), r.IntN(300)
					}
					label := fmt.Sprintf("%s x %s, round %d", a.name, b.name, round)
					if r.IntN(4) == 0 {
						againstReference(t, acc, randomProduct[float64](r, i, j, k, a.draw, b.draw), label)
					} else {
						againstReference(t, acc, randomProduct[float32](r, i, j, k, a.draw, b.draw), label)
					}
				}
			}
		})
	}
}
