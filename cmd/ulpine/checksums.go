package main

import (
	"crypto/sha256"
	"encoding/binary"
	"fmt"
	"math"
	"math/big"

	"ulpine/quant"
	"ulpine/quant/elementary"
	"ulpine/quant/oracle"
	"ulpine/quant/random"
)

// sumSettings are accumulations whose every addition the oracle can follow.
var sumSettings = []string{
	"product binary32; sum binary32",
	"product exact; sum binary32",
	"product exact; sum fp16",
	"product bf16; sum fp16; chunk(8); outer fp32",
	"product E5M2; sum bf16 toward-zero; lanes(3)",
	"product exact; sum E6M9 to-odd; pairwise",
	"product fp16 stochastic(7); sum bf16 stochastic(11,centred)",
	"product exact; sum fp16 stochastic(16); chunk(5); outer bf16 stochastic(4)",
	"product exact; sum E4M3; lanes(4)",
	"product bf16 up; sum fp32 down; pairwise",
	"product fp16; sum fp16; wide",
	"product exact; sum bf16 stochastic(9); wide",
	"product exact; sum Q4.8",
	"product binary64; sum binary64",
}

// checkSums holds whole products of small matrices to additions in exact rationals.
func checkSums(c *checker) {
	draws := quant.Draws{Seed: random.Derive(3, random.Data)}
	word := uint64(0)
	next := func() float64 {
		w := draws.Word(word)
		word++
		return float64(float32(math.Ldexp(float64(int32(w)>>20), -12-int(w%7))))
	}
	for n, text := range sumSettings {
		acc, err := quant.ParseAccumulate(text)
		if !c.noError(err) {
			continue
		}
		for k := range 28 {
			a, b := make([]float64, 2*k), make([]float64, 3*k)
			for _, x := range [][]float64{a, b} {
				for i := range x {
					x[i] = next()
				}
			}
			got, err := smallProduct(acc, a, b, 2, 3, k, uint64(n))
			if !c.noError(err) {
				break
			}
			for i := range 2 {
				for j := range 3 {
					want, err := exactElement(acc, a, b, i, j, 3, k, uint64(n))
					if !c.noError(err) {
						return
					}
					c.that(sameBits(got[3*i+j], want), "%s, %d terms, element %d,%d: %v, want %v", acc, k, i, j, got[3*i+j], want)
				}
			}
		}
	}
}

// sumStreams are the streams of random words of a seed.
func sumStreams(seed uint64) (terms, sums quant.Streams) {
	a := arithmetic{seed: seed}
	return quant.Streams{Row: a.draws(siteTermRow), Column: a.draws(siteTermColumn)},
		quant.Streams{Row: a.draws(siteSumRow), Column: a.draws(siteSumColumn)}
}

// smallProduct multiplies i x k by k x j matrices in tensors of binary64, or of
// binary32 where the sum fits.
func smallProduct(acc quant.Accumulate, a, b []float64, i, j, k int, seed uint64) ([]float64, error) {
	if quant.Fits32(acc.Sum.Format) && (acc.Outer == nil || quant.Fits32(acc.Outer.Format)) {
		return productIn[float32](acc, a, b, i, j, k, seed)
	}
	return productIn[float64](acc, a, b, i, j, k, seed)
}

func productIn[T quant.Element](acc quant.Accumulate, a, b []float64, i, j, k int, seed uint64) ([]float64, error) {
	m, err := quant.NewMultiplier[T](acc)
	if err != nil {
		return nil, err
	}
	p := quant.Product[T]{I: i, J: j, K: k, C: make([]T, i*j)}
	p.Terms, p.Sums = sumStreams(seed)
	p.A = quant.Matrix[T]{Data: converted[T](a), Row: k, Col: 1}
	p.B = quant.Matrix[T]{Data: converted[T](b), Row: j, Col: 1}
	m.Mul(p, nil, nil)
	return converted[float64](p.C), nil
}

// converted copies a slice to another element type.
func converted[D, S quant.Element](x []S) []D {
	y := make([]D, len(x))
	for i, v := range x {
		y[i] = D(v)
	}
	return y
}

// exactElement is element i,j of a product by its definition, every rounding the
// oracle's.
func exactElement(acc quant.Accumulate, a, b []float64, i, j, columns, k int, seed uint64) (float64, error) {
	terms, sums := sumStreams(seed)
	points := map[*quant.Point]*oracle.Format{}
	for _, p := range []*quant.Point{acc.Product, &acc.Sum, acc.Outer} {
		if p == nil {
			continue
		}
		o, err := oracleOf(p.Format)
		if err != nil {
			return 0, err
		}
		points[p] = o
	}
	round := func(p *quant.Point, x *big.Rat, word uint32) *big.Rat {
		r := oracleRounding(p.Rounding)
		v, _ := points[p].Round(x, false, r, "", uint64(word>>(32-max(r.Bits, 1))))
		return ratOf(v) // the data stay within the range: infinities have no rational
	}
	term := func(n int) *big.Rat {
		x := new(big.Rat).Mul(ratOf(a[i*k+n]), ratOf(b[n*columns+j]))
		if acc.Product == nil {
			return x
		}
		return round(acc.Product, x, terms.Word(uint32(n), uint32(i), uint32(j)))
	}
	var s *big.Rat
	var err error
	if acc.Order.Kind == quant.Wide {
		s = new(big.Rat)
		for n := range k {
			s.Add(s, term(n))
		}
		s = round(&acc.Sum, s, sums.Word(uint32(k), uint32(i), uint32(j)))
	} else {
		s, err = oracle.Walk(oracle.Order{Kind: kindWord(acc.Order), K: acc.Order.K}, k, new(big.Rat), term,
			func(step oracle.Step, x, y *big.Rat) *big.Rat {
				p := &acc.Sum
				if step.Outer && acc.Outer != nil {
					p = acc.Outer
				}
				return round(p, new(big.Rat).Add(x, y), sums.Word(uint32(step.Number), uint32(i), uint32(j)))
			})
		if err != nil {
			return 0, err
		}
	}
	v, _ := s.Float64()
	return v, nil
}

// checkProducts holds products of larger matrices, which take the fast paths, to
// elements formed one by one from points and words.
func checkProducts(c *checker) {
	draws := quant.Draws{Seed: random.Derive(4, random.Data)}
	const i, j = 5, 70
	for n, text := range append(sumSettings, "sum fp16; aligned(4,12)", "sum bf16; compensated", "product exact; sum fp16 stochastic(8,share=4)") {
		acc, err := quant.ParseAccumulate(text)
		if !c.noError(err) {
			continue
		}
		k := 90 + n
		a, b := make([]float64, i*k), make([]float64, k*j)
		word := uint64(0)
		for _, x := range [][]float64{a, b} {
			for m := range x {
				w := draws.Word(word)
				word++
				x[m] = float64(float32(math.Ldexp(float64(int32(w)>>8), -24-int(w%9))))
			}
		}
		got, err := smallProduct(acc, a, b, i, j, k, uint64(n))
		if !c.noError(err) {
			continue
		}
		m := matmulJob{arithmetic: &arithmetic{seed: uint64(n)}, acc: acc, i: i, j: j, k: k}
		p := quant.Product[float64]{
			I: i, J: j, K: k, A: quant.Matrix[float64]{Data: a, Row: k, Col: 1}, B: quant.Matrix[float64]{Data: b, Row: j, Col: 1}, C: got,
		}
		p.Terms, p.Sums = sumStreams(uint64(n))
		for row := range i {
			for col := range j {
				m.traceRow, m.traceCol = row, col
				c.oneElement(&m, p)
			}
		}
	}
}

// oneElement compares one element of a product with itself formed alone.
func (c *checker) oneElement(m *matmulJob, p quant.Product[float64]) {
	want := p.C[m.traceRow*p.J+m.traceCol]
	if !plainDraws(m.acc) || kindWord(m.acc.Order) == "" && m.acc.Order.Kind != quant.Wide {
		mul, err := quant.NewMultiplier[float64](m.acc)
		if !c.noError(err) {
			return
		}
		one := p
		b := p.B.(quant.Matrix[float64])
		one.I, one.J, one.FirstJ, one.C = m.traceRow+1, 1, uint64(m.traceCol), make([]float64, m.traceRow+1)
		one.B = quant.Matrix[float64]{Data: b.Data[m.traceCol:], Row: b.Row, Col: 1}
		mul.Mul(one, nil, nil)
		c.that(sameBits(one.C[m.traceRow], want), "%s: element %d,%d alone is %v, in the product %v", m.acc, m.traceRow, m.traceCol, one.C[m.traceRow], want)
		return
	}
	_, err := traceOf(m, p)
	c.that(err == nil, "%s: element %d,%d: %v", m.acc, m.traceRow, m.traceCol, err)
}

// checkStalls: harmonic series: bfloat16 and binary16 N. J. Higham's note of
// 2018-12-03, second hand, others computed; ones stop at 2^p; sums of 0.1 computed.
func checkStalls(c *checker) {
	for _, t := range []struct {
		terms, sum string
		length     int
		want       float64
		last       int
	}{
		{"harmonic", "E5M2", 64, 2, 4},
		{"harmonic", "E4M3", 64, 3, 8},
		{"harmonic", "bf16", 4096, 5.0625, 64},
		{"harmonic", "E6M9", 4096, 6.40625, 256},
		{"harmonic", "fp16", 4096, 7.0859375, 512},
		{"harmonic", "bf16 toward-zero", 4096, 4, 40},
		{"harmonic", "fp16 toward-zero", 4096, 5.74609375, 256},
		{"ones", "E5M2", 64, 8, 8},
		{"ones", "E4M3", 64, 16, 16},
		{"ones", "bf16", 1024, 256, 256},
		{"ones", "fp16", 8192, 2048, 2048},
		{"tenth", "fp16", 9000, 256, 0},
		{"tenth", "bf16", 3000, 32, 0},
	} {
		a := &arithmetic{rounding: "nearest-even", overflow: "default", seed: 1}
		s, err := newSumStudy(a, []string{t.sum}, "", "", t.terms, t.length)
		if !c.noError(err) || !c.noError(s.run()) {
			continue
		}
		one := s.all[0]
		c.that(one.sums[len(one.sums)-1] == t.want, "%s in %s: %v, want %v", t.terms, t.sum, one.sums[len(one.sums)-1], t.want)
		c.that(t.last == 0 || one.last == t.last, "%s in %s: term %d is the last, want %d", t.terms, t.sum, one.last, t.last)
	}
}

// checkRandom: the answers published with Random123 for Philox4x32-10 (from memory,
// and recomputed), and the project's own vectors of words and lanes.
func checkRandom(c *checker) {
	for _, t := range []struct {
		counter [4]uint32
		key     uint64
		want    [4]uint32
	}{
		{want: [4]uint32{0x6627e8d5, 0xe169c58d, 0xbc57ac4c, 0x9b00dbd8}},
		{
			[4]uint32{0xffffffff, 0xffffffff, 0xffffffff, 0xffffffff},
			0xffffffffffffffff,
			[4]uint32{0x408f276d, 0x41c83b0e, 0xa20bc7c6, 0x6d5451fd},
		},
		{
			[4]uint32{0x243f6a88, 0x85a308d3, 0x13198a2e, 0x03707344},
			0x299f31d0a4093822,
			[4]uint32{0xd16cfe09, 0x94fdcceb, 0x5001e420, 0x24126ea1},
		},
	} {
		got := random.Block(t.counter, t.key)
		c.that(got == t.want, "block %08x: %08x, want %08x", t.counter, got, t.want)
	}
	d := quant.Draws{Seed: 0x0123456789abcdef, Step: 7, Site: 0x0203, Phase: 1}
	for n, want := range map[uint64]uint32{0: 0x0daae5f2, 1: 0x93af703d, 4: 0x1e497085, 1000003: 0x18a5a501, 1 << 34: 0x979498b9} {
		c.that(d.Word(n) == want, "word %d: %08x, want %08x", n, d.Word(n), want)
	}
	c.that(d.Lane(5, 7) == 0x3e78a6df, "word 5 of lane 7: %08x", d.Lane(5, 7))
}

// elementaryFunctions are the project's own, with the hash over a sweep of their
// bits that every machine must give.
var elementaryFunctions = []struct {
	name string
	f    func(float64) float64
	hash string
}{
	{"exp", elementary.Exp, "c9b085bc067445364046fd9a14e78a8f36e0b37deb7bc3ccaf0ec29ae0c35198"},
	{"log", elementary.Log, "7eb398d5b5a3c4100047ba03d756f69814e1f0c5e6c8503fa161a10724a0199d"},
	{"sin", elementary.Sin, "c22c4a4779bf5e065a5e462e3b12e6d6b10f6d10129806b85fbc401215ba89cb"},
	{"cos", elementary.Cos, "2a1886050497e1c64c835ddb8c6d9a10dee840510ff1169f99c9129d32cd04bc"},
	{"tanh", elementary.Tanh, "cb460af853bf19252ff1998d388cc1139481a7e2ef1a09c8e32224442ab4d629"},
}

func checkElementaryBits(c *checker) {
	for _, e := range elementaryFunctions {
		hash := sha256.New()
		var word [8]byte
		for i := range uint64(20000) {
			// Magnitudes from 2^-43 to 2^22, both signs, fractions by a Weyl sequence.
			x := math.Float64frombits(i&1<<63 | (980+i%65)<<52 | (i*0x9E3779B97F4A7C15)>>12)
			binary.LittleEndian.PutUint64(word[:], math.Float64bits(e.f(x)))
			hash.Write(word[:])
			c.count++ // each enters the hash
		}
		got := fmt.Sprintf("%x", hash.Sum(nil))
		c.that(got == e.hash, "%s: the hash over 20000 values is %s", e.name, got)
	}
}

// seriesBits is the precision of the series.
const seriesBits = 320

func bigOf(x float64) *big.Float { return new(big.Float).SetPrec(seriesBits).SetFloat64(x) }

// bigExp is e^x: the series of x 2^-40, squared 40 times, loses far fewer than the
// bits held in excess.
func bigExp(x *big.Float) *big.Float {
	y := new(big.Float).SetPrec(seriesBits).SetMantExp(x, -40)
	sum, term := bigOf(1), bigOf(1)
	for n := 1.0; n < 30; n++ {
		term.Mul(term, y)
		term.Quo(term, bigOf(n))
		sum.Add(sum, term)
	}
	for range 40 {
		sum.Mul(sum, sum)
	}
	return sum
}

// bigSin is the sine of |x| < 100 by its series.
func bigSin(x *big.Float) *big.Float {
	square := new(big.Float).SetPrec(seriesBits).Mul(x, x)
	sum := new(big.Float).SetPrec(seriesBits)
	term := new(big.Float).SetPrec(seriesBits).Set(x)
	for n := 1.0; n < 700; n += 2 {
		sum.Add(sum, term)
		term.Mul(term, square)
		term.Quo(term, bigOf(-(n+1)*(n+2)))
	}
	return sum
}

// checkElementary: errors below one unit in the last place.
func checkElementary(c *checker) {
	draws := quant.Draws{Seed: random.Derive(5, random.Data)}
	for n := range uint64(400) {
		w := draws.Words(n)
		x := math.Ldexp(1+float64(w[0])/(1<<32), int(w[1]%16)-10) // 2^-10 to 2^6
		if w[2]&1 != 0 {
			x = -x
		}
		c.close("exp", x, elementary.Exp(x), bigExp(bigOf(x)))
		c.close("sin", x, elementary.Sin(x), bigSin(bigOf(x)))
		e := bigExp(bigOf(2 * x))
		t := new(big.Float).SetPrec(seriesBits).Quo(new(big.Float).Sub(e, bigOf(1)), new(big.Float).Add(e, bigOf(1)))
		c.close("tanh", x, elementary.Tanh(x), t)
		// y = log z is right to one unit where e^y and z agree to as much: the
		// logarithm is y + log(z / e^y), to first order y + z / e^y - 1.
		z := math.Abs(x)
		y := elementary.Log(z)
		q := new(big.Float).SetPrec(seriesBits).Quo(bigOf(z), bigExp(bigOf(y)))
		c.close("log", z, y, q.Sub(q, bigOf(1)).Add(q, bigOf(y)))
	}
}

// close compares with an exact value to one unit in the last place.
func (c *checker) close(name string, x, got float64, want *big.Float) {
	w, _ := want.Float64()
	ulp := math.Nextafter(math.Abs(w), math.Inf(1)) - math.Abs(w)
	d, _ := new(big.Float).SetPrec(seriesBits).Sub(bigOf(got), want).Float64()
	c.that(math.Abs(d) < ulp, "%s(%v) = %v is %.3g units off", name, x, got, math.Abs(d)/ulp)
}
