package kernel

import (
	"math"
	"math/rand/v2"

	"ulpine/quant/random"
)

// This file is the arithmetic of the tests: sums one result at a time, by the
// definition, sharing nothing with the kernels. Exact sums of binary64 numbers are
// kept as a number rounded to odd, which every rounding to fewer bits takes for the
// exact one.

// reference is one result, and the events on the way to it.
type reference struct {
	value float32
	tally Tally
}

// unbounded is the policy of binary32's own arithmetic.
var unbounded = Policy{math.Inf(1), math.Inf(1)}

// result forms C[i,j].
func result(a *Arithmetic, p *Product[float32], column []float32, i, j int) reference {
	var r reference
	word := func(s *Streams, k int) uint32 {
		row := s.Row.Lane(uint32(k), uint32(i)) | 1
		col := s.Column.Lane(uint32(k), p.FirstJ+uint32(j))
		s16 := func(x uint32) int32 { return int32(int16(x)) }
		return uint32(s16(row)*s16(col)+s16(row>>16)*s16(col>>16)) & 0xffff
	}
	term := func(k int) float64 {
		x := float64(p.A[i*p.ARow+k*p.ACol]) * float64(column[k])
		switch a.Product {
		case NativeProduct:
			return keep(float64(float32(x)), math.MaxFloat32, policyOf(a.ProductPolicy), &r.tally.Products)
		case RoundedProduct:
			return keep(nearestTo(x, a.Grid), a.Grid.Max, policyOf(a.ProductPolicy), &r.tally.Products)
		case RandomProduct:
			t := &Sum{Grid: a.Grid, Bits: a.Bits, Centred: a.Centred}
			x = stochasticTo(x, t, word(&p.Terms, k)>>(16-a.Bits))
			return keep(x, a.Grid.Max, policyOf(a.ProductPolicy), &r.tally.Products)
		}
		return x
	}
	switch {
	case a.Pairwise:
		leaves := []float64{}
		for k := range p.K {
			leaves = append(leaves, term(k)+0)
		}
		if p.K < 2 {
			leaves = append(leaves, 0)
		}
		r.value = canonical(r.tree(a, p, i, leaves))
		return r
	case a.Lanes > 0:
		lanes := make([]float64, a.Lanes)
		for k := range p.K {
			lanes[k%a.Lanes] = r.add(a, &a.Sum, lanes[k%a.Lanes], term(k), 0)
		}
		r.value = canonical(r.tree(a, p, i, lanes))
		return r
	}
	chunk := a.Chunk
	if chunk == 0 {
		chunk = p.K
	}
	total := 0.0
	for from := 0; from < p.K; from += chunk {
		s := 0.0
		for k := from; k < min(p.K, from+chunk); k++ {
			s = r.add(a, &a.Sum, s, term(k), word(&p.Sums, k))
		}
		if a.Chunk == 0 {
			total = s
		} else {
			total = r.add(a, &a.Outer, total, s, 0)
		}
	}
	if p.Bias != nil {
		total = r.add(a, &a.Outer, total, float64(p.Bias[i]), word(&p.Sums, p.K))
	}
	r.value = canonical(total)
	return r
}

// canonical is x in binary32, NaN without sign and payload.
func canonical(x float64) float32 {
	if x != x {
		return float32(math.NaN())
	}
	return float32(x)
}

// tree adds neighbours, level by level, and the bias.
func (r *reference) tree(a *Arithmetic, p *Product[float32], i int, level []float64) float64 {
	for len(level) > 1 {
		var next []float64
		for n := 0; n+1 < len(level); n += 2 {
			next = append(next, r.add(a, &a.Sum, level[n], level[n+1], 0))
		}
		if len(level)%2 == 1 {
			next = append(next, level[len(level)-1])
		}
		level = next
	}
	if p.Bias != nil {
		return r.add(a, &a.Outer, level[0], float64(p.Bias[i]), 0)
	}
	return level[0]
}

// add is one addition.
func (r *reference) add(a *Arithmetic, s *Sum, x, y float64, u uint32) float64 {
	z := oddSum(x, y)
	limit := s.Grid.Max
	if s.Through {
		z = float64(float32(z))
	}
	switch s.Kind {
	case NativeSum:
		z, limit = float64(float32(z)), math.MaxFloat32
	case NearestSum:
		z = nearestTo(z, s.Grid)
	case StochasticSum:
		z = stochasticTo(z, s, u>>(16-s.Bits))
	}
	return keep(z, limit, policyOf(a.SumPolicy), &r.tally.Sums) + 0
}

// policyOf is p, or infinity where nothing is said.
func policyOf(p Policy) Policy {
	if p == (Policy{}) {
		return unbounded
	}
	return p
}

// keep applies the policy to a rounded number and counts.
func keep(x, limit float64, p Policy, e *Events) float64 {
	switch {
	case x != x:
		e.NaN++
		return math.NaN()
	case x-x != 0:
		e.Infinite++
		return math.Copysign(p.Infinite, x)
	case math.Abs(x) > limit:
		e.Beyond++
		return math.Copysign(p.Over, x)
	}
	return x
}

// oddSum is x + y rounded to odd in binary64.
func oddSum(x, y float64) float64 {
	s := x + y
	z := s - x
	rest := (x - (s - z)) + (y - z)
	if rest == 0 || s-s != 0 || math.Float64bits(s)&1 == 1 {
		return s
	}
	if (rest > 0) == (s > 0) {
		return math.Nextafter(s, math.Inf(1)*s)
	}
	return math.Nextafter(s, 0)
}

// quantum is the distance of the grid's values around x.
func quantum(x float64, g Grid) float64 {
	return math.Ldexp(1, max(exponent(x), g.MinExponent)-g.Fraction)
}

func nearestTo(x float64, g Grid) float64 {
	if x == 0 || x-x != 0 {
		return x
	}
	q := quantum(x, g)
	return math.RoundToEven(x/q) * q
}

func stochasticTo(x float64, s *Sum, u uint32) float64 {
	if x == 0 || x-x != 0 {
		return x
	}
	q := quantum(x, s.Grid)
	whole, f := math.Modf(math.Abs(x) / q)
	t := math.Ldexp(f, s.Bits)
	if s.Centred {
		t += 0.5
	}
	if math.Floor(t)+float64(u) >= math.Ldexp(1, s.Bits) {
		whole++
	}
	return math.Copysign(whole*q, x)
}

// arithmetics are those whose products the tests form; together they reach every
// mode of every set.
var arithmetics = []Arithmetic{
	in(NativeProduct, Grid{}, Sum{}),
	in(ExactProduct, Grid{}, Sum{}),
	{Product: NativeProduct, Pairwise: true},
	in(RoundedProduct, fp16, Sum{}),
	in(RoundedProduct, bf16, Sum{}),
	in(RoundedProduct, fp16, nearestSum(fp16)),
	in(RoundedProduct, bf16, nearestSum(bf16)),
	in(RoundedProduct, e4m3, nearestSum(e4m3)),
	in(RoundedProduct, e5m2, nearestSum(fp16)),
	in(RoundedProduct, bf16, nearestSum(fp16)),
	in(RoundedProduct, fp16, throughSum(bf16)),
	in(RoundedProduct, fp16, nearestSum(bf16)),
	in(RoundedProduct, e6m9, throughSum(e6m9)),
	in(ExactProduct, Grid{}, throughSum(fp16)),
	in(ExactProduct, Grid{}, throughSum(bf16)),
	in(NativeProduct, Grid{}, throughSum(fp16)),
	in(NativeProduct, Grid{}, throughSum(bf16)),
	in(ExactProduct, Grid{}, nearestSum(fp16)),
	in(ExactProduct, Grid{}, nearestSum(bf16)),
	in(NativeProduct, Grid{}, nearestSum(bf16)),
	in(NativeProduct, Grid{}, nearestSum(e5m2)),
	in(NativeProduct, Grid{}, nearestSum(e6m9)),
	in(RoundedProduct, fp16, randomSum(fp16, 16, true, false)),
	in(RoundedProduct, fp16, randomSum(fp16, 16, true, true)),
	in(RoundedProduct, bf16, randomSum(bf16, 8, true, false)),
	in(RoundedProduct, bf16, randomSum(fp16, 8, true, false)),
	in(RoundedProduct, e5m2, randomSum(e5m2, 8, true, true)),
	in(ExactProduct, Grid{}, randomSum(fp16, 16, true, false)),
	in(ExactProduct, Grid{}, randomSum(fp16, 9, true, true)),
	in(ExactProduct, Grid{}, randomSum(bf16, 16, true, false)),
	in(NativeProduct, Grid{}, randomSum(bf16, 5, true, true)),
	in(ExactProduct, Grid{}, randomSum(e4m3, 12, true, false)),
	in(RoundedProduct, fp16, randomSum(fp16, 16, false, false)),
	in(RoundedProduct, bf16, randomSum(bf16, 10, false, true)),
	in(RoundedProduct, e4m3, randomSum(e4m3, 4, false, false)),
	in(ExactProduct, Grid{}, randomSum(fp16, 16, false, true)),
	in(ExactProduct, Grid{}, randomSum(bf16, 16, false, false)),
	in(NativeProduct, Grid{}, randomSum(e5m2, 3, false, false)),
	in(NativeProduct, Grid{}, randomSum(bf16, 15, false, true)),
	in(ExactProduct, Grid{}, randomSum(e4m3, 16, false, false)),
	in(ExactProduct, Grid{}, randomSum(fp16, 13, false, false)),
	randomBoth(fp16, 16, false, randomSum(fp16, 16, false, false)),
	randomBoth(bf16, 7, true, randomSum(fp16, 11, false, true)),
	randomBoth(e5m2, 16, false, randomSum(bf16, 8, false, false)),
	{Product: RoundedProduct, Grid: fp16, Sum: nearestSum(fp16), Chunk: 5},
	{Product: RoundedProduct, Grid: fp16, Sum: nearestSum(fp16), Outer: nearestSum(fp16), Chunk: 7},
	{Product: ExactProduct, Sum: nearestSum(bf16), Chunk: 64},
	{Product: ExactProduct, Sum: throughSum(e5m2), Outer: nearestSum(fp16), Chunk: 3},
	{Product: NativeProduct, Sum: Sum{}, Chunk: 16},
	{Product: RoundedProduct, Grid: fp16, Sum: nearestSum(fp16), Pairwise: true},
	{Product: RoundedProduct, Grid: fp16, Sum: nearestSum(bf16), Pairwise: true},
	{Product: RoundedProduct, Grid: bf16, Sum: throughSum(bf16), Pairwise: true},
	{Product: NativeProduct, Sum: nearestSum(e6m9), Pairwise: true},
	{Product: NativeProduct, Sum: nearestSum(bf16), Pairwise: true},
	{Product: ExactProduct, Sum: nearestSum(e5m2), Pairwise: true},
	{Product: ExactProduct, Sum: Sum{}, Pairwise: true},
	{Product: RoundedProduct, Grid: e4m3, Sum: Sum{}, Pairwise: true},
	{Product: RoundedProduct, Grid: fp16, Sum: nearestSum(fp16), Lanes: 8},
	{Product: ExactProduct, Sum: nearestSum(bf16), Lanes: 3},
	{Product: NativeProduct, Sum: throughSum(fp16), Outer: nearestSum(bf16), Lanes: 4},
	{Product: NativeProduct, Sum: Sum{}, Lanes: 5},
	{Product: ExactProduct, Sum: Sum{}, Outer: nearestSum(fp16), Lanes: 2},
}

// init gives the arithmetics that are formed again with care a policy each.
func init() {
	for i := range arithmetics {
		a := &arithmetics[i]
		if a.Sum.Kind != NearestSum {
			continue
		}
		of := func(max float64, n int) Policy {
			return []Policy{unbounded, {max, max}, {math.NaN(), math.NaN()}}[n%3]
		}
		a.SumPolicy = of(a.Sum.Grid.Max, i)
		a.ProductPolicy = of(a.Grid.Max, i/3)
		if a.Product == NativeProduct {
			a.ProductPolicy = of(math.MaxFloat32, i/3)
		}
	}
}

// kinds draw operands that lead to the corners of the arithmetic.
var kinds = []struct {
	name string
	draw func(r *rand.Rand) float64
}{
	{"normal", func(r *rand.Rand) float64 { return r.NormFloat64() }},
	{"fp16", func(r *rand.Rand) float64 { return float64(toGrid(r.NormFloat64()*0.3, fp16)) }},
	{"bf16", func(r *rand.Rand) float64 { return float64(toGrid(r.NormFloat64()*4, bf16)) }},
	{"integers", func(r *rand.Rand) float64 { return float64(r.IntN(9) - 4) }},
	{"ties", func(r *rand.Rand) float64 { return math.Ldexp(float64(r.IntN(4096)-2048), -r.IntN(14)) }},
	{"fp16 subnormal", func(r *rand.Rand) float64 { return math.Ldexp(float64(r.IntN(2048)-1024), -24) }},
	{"tiny", func(r *rand.Rand) float64 { return r.NormFloat64() * math.Ldexp(1, -r.IntN(90)) }},
	{"bf16 tiny", func(r *rand.Rand) float64 {
		return float64(toGrid(r.NormFloat64()*math.Ldexp(1, -50-r.IntN(80)), bf16))
	}},
	{"huge", func(r *rand.Rand) float64 { return r.NormFloat64() * math.Ldexp(1, r.IntN(70)) }},
	{"wide", func(r *rand.Rand) float64 { return r.NormFloat64() * math.Ldexp(1, r.IntN(250)-125) }},
	{"bf16 wide", func(r *rand.Rand) float64 {
		return float64(toGrid(r.NormFloat64()*math.Ldexp(1, r.IntN(60)-40), bf16))
	}},
	{"overflow", func(r *rand.Rand) float64 {
		return [...]float64{1, -1, 448, 65504, -65504, 57344, 240, 255, 3e38, 0.5}[r.IntN(10)]
	}},
	{"infinite", func(r *rand.Rand) float64 {
		if r.IntN(20) > 0 {
			return float64(r.IntN(9) - 4)
		}
		return math.Inf(r.IntN(2)*2 - 1)
	}},
	{"NaN", func(r *rand.Rand) float64 {
		if r.IntN(20) > 0 {
			return r.NormFloat64()
		}
		return math.NaN()
	}},
	{"zeros", func(r *rand.Rand) float64 {
		if r.IntN(3) > 0 {
			return math.Copysign(0, float64(r.IntN(2))-0.5)
		}
		return r.NormFloat64()
	}},
}

// strided is a matrix of any strides as the right-hand operand.
type strided struct {
	data     []float32
	row, col int
}

func (s strided) Pack(dst []float32, width, k0, k1, j0, j1 int) {
	for k := k0; k < k1; k++ {
		to := dst[(k-k0)*width:][:width]
		clear(to)
		for j := j0; j < j1; j++ {
			to[j-j0] = s.data[k*s.row+j*s.col]
		}
	}
}

// guard is a value that no kernel writes.
const guard = 12345.678

// draw makes a product of random operands with odd strides.
func draw(r *rand.Rand, i, j, k int, a, b func(*rand.Rand) float64) *Product[float32] {
	fill := func(n int, f func(*rand.Rand) float64) []float32 {
		x := make([]float32, n)
		for i := range x {
			x[i] = float32(f(r))
		}
		return x
	}
	pad := r.IntN(4)
	p := &Product[float32]{I: i, J: j, K: k, FirstJ: uint32(r.IntN(1000))}
	p.ARow, p.ACol = k+pad, 1
	m := strided{row: j + pad, col: 1}
	if r.IntN(2) == 0 {
		p.ARow, p.ACol = 1, i+pad
		m.row, m.col = 1, k+pad
	}
	p.A = fill((i+pad)*(k+pad)+1, a)
	m.data = fill((j+pad)*(k+pad)+1, b)
	p.B = m
	if r.IntN(2) == 0 {
		p.Bias = fill(i, a)
	}
	stream := func() random.Draws {
		return random.Draws{Seed: r.Uint64(), Step: r.Uint32(), Site: r.Uint32(), Phase: uint32(r.IntN(256))}
	}
	p.Sums, p.Terms = Streams{stream(), stream()}, Streams{stream(), stream()}
	return p
}
