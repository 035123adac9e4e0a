package quant

import (
	"fmt"
	"math"
	"math/big"
	"math/rand/v2"
	"testing"
)

// dot forms one product of a row and a column and returns the sum.
func dot[T Element](t testing.TB, acc Accumulate, a, b []T) T {
	t.Helper()
	m, err := NewMultiplier[T](acc)
	if err != nil {
		t.Fatal(err)
	}
	c := make([]T, 1)
	m.Mul(Product[T]{I: 1, J: 1, K: len(a), A: Matrix[T]{a, len(a), 1}, B: Matrix[T]{b, 1, 1}, C: c}, nil, nil)
	return c[0]
}

func mustAccumulate(t testing.TB, text string) Accumulate {
	t.Helper()
	a, err := ParseAccumulate(text)
	if err != nil {
		t.Fatal(err)
	}
	return a
}

// ones returns n ones.
func ones(n int) []float32 {
	x := make([]float32, n)
	for i := range x {
		x[i] = 1
	}
	return x
}

// harmonic returns the first n terms 1/k, each rounded to a point.
func harmonic(t testing.TB, n int, format string) []float32 {
	x := make([]float32, n)
	p := Point{Format: mustFormat(t, format)}
	for k := range x {
		v, _ := p.Round(ExactQuotient(1, float64(k+1)), 0)
		x[k] = float32(v)
	}
	return x
}

// TestHarmonicSumStalls: s = fl(s + fl(1/n)) stops growing at a known sum after a
// known number of terms. bfloat16 5.0625 and binary16 7.0859375: N. J. Higham's
// note of 2018-12-03 by way of a page quoting it; binary32 15.40368271: Malone,
// Irish Math. Soc. Bulletin 71 (2013), second hand; all recomputed.
func TestHarmonicSumStalls(t *testing.T) {
	for _, c := range []struct {
		format, rounding string
		want             float32
		last             int // the last term that changes the sum
	}{
		{"E5M2", "nearest-even", 2, 4},
		{"E5M2", "toward-zero", 2, 4},
		{"E4M3", "nearest-even", 3, 8},
		{"bf16", "nearest-even", 5.0625, 64},
		{"E6M9", "nearest-even", 6.40625, 256},
		{"fp16", "nearest-even", 7.0859375, 512},
		{"E8M10", "nearest-even", 7.0859375, 512},
		{"fp32", "nearest-even", 15.40368271, 2097151},
	} {
		n := 3 * c.last
		if c.format == "fp32" {
			n = c.last + 1000
			if testing.Short() {
				continue
			}
		}
		terms := harmonic(t, n, c.format)
		acc := mustAccumulate(t, fmt.Sprintf("product exact; sum %s %s", c.format, c.rounding))
		if got := dot(t, acc, terms, ones(n)); got != c.want {
			t.Errorf("%s %s: %v after %d terms, want %v", c.format, c.rounding, got, n, c.want)
		}
		if got := dot(t, acc, terms[:c.last], ones(c.last)); got != c.want {
			t.Errorf("%s %s: %v after %d terms, want %v", c.format, c.rounding, got, c.last, c.want)
		}
		if got := dot(t, acc, terms[:c.last-1], ones(c.last-1)); got == c.want {
			t.Errorf("%s %s: stalls before term %d", c.format, c.rounding, c.last)
		}
	}
}

// TestOnesStall: a sum of ones stops at 2^p, with ties away at 2^(p+1), in chunks
// later (computed; common knowledge).
func TestOnesStall(t *testing.T) {
	for _, c := range []struct {
		acc  string
		n    int
		want float32
	}{
		{"sum E5M2", 100, 8},
		{"sum E4M3", 100, 16},
		{"sum bf16", 1000, 256},
		{"sum E6M9", 3000, 1024},
		{"sum fp16", 5000, 2048},
		{"sum E8M10", 5000, 2048},
		{"sum fp16 toward-zero", 5000, 2048},
		{"product fp16; sum fp16", 5000, 2048},
		{"sum bf16 nearest-away", 1000, 512},
		{"sum fp16 nearest-away", 10000, 4096},
		{"sum fp16; chunk(64)", 5000, 5000},
		{"sum fp16; pairwise", 5000, 5000},
		{"sum fp16; lanes(4)", 10000, 8192},
		{"sum fp16; wide", 5000, 5000},
		{"sum fp16; through binary32", 5000, 2048},
	} {
		if got := dot(t, mustAccumulate(t, c.acc), ones(c.n), ones(c.n)); got != c.want {
			t.Errorf("%s: %d ones give %v, want %v", c.acc, c.n, got, c.want)
		}
	}
	if testing.Short() {
		return
	}
	const n = 1<<24 + 10
	m, err := NewMultiplier[float32](mustAccumulate(t, "product fp32; sum fp32"))
	if err != nil {
		t.Fatal(err)
	}
	one, c := []float32{1}, make([]float32, 1)
	m.Mul(Product[float32]{I: 1, J: 1, K: n, A: Matrix[float32]{Data: one}, B: Matrix[float32]{Data: one}, C: c}, nil, nil)
	if c[0] != 1<<24 {
		t.Errorf("%d ones in binary32 give %v", n, c[0])
	}
}

// TestConstantSums: sums of fp16(0.1) and bf16(0.1) (computed with exact rationals).
func TestConstantSums(t *testing.T) {
	tenth := func(format string, n int) []float32 {
		p := Point{Format: mustFormat(t, format)}
		v, _ := p.Round(Exactly(0.1), 0)
		x := ones(n)
		for i := range x {
			x[i] = float32(v)
		}
		return x
	}
	for _, c := range []struct {
		format string
		n      int
		want   float32
	}{{"fp16", 1000, 105.1875}, {"fp16", 4096, 256}, {"fp16", 9000, 256}, {"bf16", 1000, 32}, {"bf16", 3000, 32}} {
		if got := dot(t, mustAccumulate(t, "sum "+c.format), tenth(c.format, c.n), ones(c.n)); got != c.want {
			t.Errorf("%d terms 0.1 in %s: %v, want %v", c.n, c.format, got, c.want)
		}
	}
}

// ratSum adds terms as the definition of the order says, in exact rationals: the
// oracle of whole sums. It knows nearest-even and toward-zero in one format.
type ratSum struct {
	product, sum, outer func(*big.Rat) *big.Rat
}

// rounder rounds rationals with the oracle of a format.
func rounder(t testing.TB, name string, mode Mode) func(*big.Rat) *big.Rat {
	f := mustFormat(t, name)
	o := newOracle(f, FloatSpec{Exponent: f.exponent, Fraction: f.fraction, Top: f.top})
	return func(x *big.Rat) *big.Rat {
		// All rationals here have denominators that divide 2^unit.
		v := new(big.Rat).Mul(x, timesPower(big.NewRat(1, 1), unit))
		if !v.IsInt() {
			t.Fatal("a rational beyond the oracle")
		}
		r, e := o.round(o.place(new(big.Int).Abs(v.Num())), x.Sign() < 0, Point{Format: f, Rounding: Rounding{Mode: mode}}, 0)
		if e == Overflowed || e == Saturated {
			t.Fatal("an overflow in a test without")
		}
		return ratOf(r)
	}
}

func plus(a, b *big.Rat) *big.Rat { return new(big.Rat).Add(a, b) }

func (s ratSum) total(o Order, terms []*big.Rat) *big.Rat {
	for k := range terms {
		terms[k] = s.product(terms[k])
	}
	from := func(lo, hi, step int) *big.Rat {
		v := new(big.Rat)
		for k := lo; k < hi; k += step {
			v = s.sum(plus(v, terms[k]))
		}
		return v
	}
	switch o.Kind {
	case Sequential:
		return from(0, len(terms), 1)
	case Chunk:
		v := new(big.Rat)
		for lo := 0; lo < len(terms); lo += o.K {
			v = s.outer(plus(v, from(lo, min(lo+o.K, len(terms)), 1)))
		}
		return v
	case Lanes:
		var lanes []*big.Rat
		for l := range o.K {
			lanes = append(lanes, from(l, len(terms), o.K))
		}
		return s.tree(lanes)
	case Pairwise:
		if len(terms) < 2 {
			return from(0, len(terms), 1)
		}
		return s.tree(terms)
	default:
		v := new(big.Rat)
		for _, t := range terms {
			v.Add(v, t)
		}
		return s.sum(v)
	}
}

// tree adds neighbours recursively: each level of the halves is a level of the tree.
func (s ratSum) tree(x []*big.Rat) *big.Rat {
	if len(x) == 1 {
		return x[0]
	}
	var up []*big.Rat
	for i := 0; i+1 < len(x); i += 2 {
		up = append(up, s.sum(plus(x[i], x[i+1])))
	}
	if len(x)%2 == 1 {
		up = append(up, x[len(x)-1])
	}
	return s.tree(up)
}

// TestSumsAgainstRationals holds whole products of matrices to the definition in
// exact rationals.
func TestSumsAgainstRationals(t *testing.T) {
	r := rand.New(rand.NewPCG(9, 10))
	exact := func(x *big.Rat) *big.Rat { return x }
	formats := []string{"fp16", "bf16", "E4M3", "E5M2", "E6M5"}
	rounders := map[string]func(*big.Rat) *big.Rat{}
	get := func(name string, mode Mode) func(*big.Rat) *big.Rat {
		key := name + " " + mode.String()
		if rounders[key] == nil {
			rounders[key] = rounder(t, name, mode)
		}
		return rounders[key]
	}
	rounds := 150
	if testing.Short() {
		rounds = 30
	}
	for range rounds {
		for _, order := range testOrders {
			sum, outer, mode := formats[r.IntN(len(formats))], formats[r.IntN(len(formats))], []Mode{NearestEven, TowardZero}[r.IntN(2)]
			s := ratSum{product: exact, sum: get(sum, mode), outer: get(outer, NearestEven)}
			acc := Accumulate{
				Sum:   Point{Format: mustFormat(t, sum), Rounding: Rounding{Mode: mode}},
				Outer: &Point{Format: mustFormat(t, outer)}, Order: order,
			}
			if r.IntN(2) == 0 {
				product := formats[r.IntN(len(formats))]
				s.product = get(product, NearestEven)
				acc.Product = &Point{Format: mustFormat(t, product)}
			}
			k := r.IntN(24)
			a, b := make([]float32, k), make([]float32, k)
			terms := make([]*big.Rat, k)
			for n := range terms {
				a[n] = float32(math.Ldexp(float64(r.IntN(255)-127), -r.IntN(16)-5))
				b[n] = float32(math.Ldexp(float64(r.IntN(255)-127), -r.IntN(16)-4))
				terms[n] = new(big.Rat).Mul(ratOf(float64(a[n])), ratOf(float64(b[n])))
			}
			want, _ := s.total(order, terms).Float64()
			if got := dot(t, acc, a, b); float64(got) != want {
				t.Fatalf("%v: %v x %v = %v, want %v", acc, a, b, got, want)
			}
		}
	}
}

// TestSumRowsAgainstReference holds sums without products to the reference, and
// to those of a product with ones where nothing is drawn.
func TestSumRowsAgainstReference(t *testing.T) {
	points := innerPoints(t)
	r := rand.New(rand.NewPCG(13, 14))
	rounds := 6
	if testing.Short() {
		rounds = 1
	}
	for range rounds {
		for _, order := range testOrders {
			for _, sum := range points[:len(points)-1] {
				acc := Accumulate{Sum: *sum, Order: order, Through32: r.IntN(4) == 0 && order.Kind != Wide}
				if r.IntN(2) == 0 {
					acc.Outer = points[r.IntN(len(points)-1)]
				}
				sumRowsOnce[float32](t, r, acc)
				sumRowsOnce[float64](t, r, acc)
			}
		}
	}
}

// TestSumRowsInBinary64: the machine's own additions, infinities and NaN included.
func TestSumRowsInBinary64(t *testing.T) {
	r := rand.New(rand.NewPCG(15, 16))
	for range 200 {
		for _, order := range testOrders {
			sumRowsOnce[float64](t, r, Accumulate{Sum: Point{Format: Binary64}, Order: order})
		}
	}
}

func sumRowsOnce[T Element](t *testing.T, r *rand.Rand, acc Accumulate) {
	t.Helper()
	data := kindsOfData[r.IntN(len(kindsOfData))]
	rows, k := 1+r.IntN(70), r.IntN(40)
	p := randomProduct[T](r, rows, 1, k, data.draw, data.draw)
	m, err := NewMultiplier[T](acc)
	if err != nil {
		t.Fatal(err)
	}
	got, want := make([]T, rows), make([]T, rows)
	var counts, wantCounts Counts
	m.SumRows(got, p.A, rows, k, p.Sums, &counts)
	ref := newReference[T](acc)
	ref.sumRows(want, p.A, k, 0, p.Sums, &wantCounts)
	for i := range got {
		if math.Float64bits(float64(got[i])) != math.Float64bits(float64(want[i])) {
			t.Fatalf("%v, %s: row %d of %dx%d: %v, want %v", acc, data.name, i, rows, k, got[i], want[i])
		}
	}
	if counts != wantCounts {
		t.Fatalf("%v, %s: counts %+v, want %+v", acc, data.name, counts, wantCounts)
	}
}

// TestBinary64Products holds products of binary64 tensors to the reference: the
// controls, and points of fewer bits with operands of all 53.
func TestBinary64Products(t *testing.T) {
	r := rand.New(rand.NewPCG(15, 16))
	texts := []string{
		"product fp64; sum fp64", "product exact; sum fp64", "product fp64; sum fp64; pairwise", "product fp64; sum fp64; lanes(3)",
		"product exact; sum fp64; chunk(4)", "product exact; sum fp64; pairwise", "product exact; sum fp64; wide",
		"product exact; sum fp16", "product fp32; sum fp16", "product fp64; sum fp32; outer fp64; chunk(3)", "sum fp64 stochastic",
		"sum E11M40 up", "product fp64; sum fp64; through binary32", "product fp64 nearest-even saturate; sum fp64 nearest-even saturate",
		"product fp64 nearest-even nan; sum fp64 nearest-even nan",
	}
	wide := []func(*rand.Rand) float64{
		func(r *rand.Rand) float64 { return r.NormFloat64() },
		anyFloat,
		func(r *rand.Rand) float64 { return r.NormFloat64() * 0x1p-530 },
		func(r *rand.Rand) float64 { return r.NormFloat64() * 0x1p510 },
		kindsOfData[7].draw,
	}
	for _, text := range texts {
		for n, draw := range wide {
			for range 4 {
				p := randomProduct[float64](r, 1+r.IntN(3), r.IntN(20), r.IntN(20), draw, draw)
				for i := range p.A.Data {
					p.A.Data[i] = draw(r)
				}
				for i := range p.Bias {
					p.Bias[i] = draw(r)
				}
				againstReference(t, mustAccumulate(t, text), p, fmt.Sprintf("data %d", n))
			}
		}
	}
}
