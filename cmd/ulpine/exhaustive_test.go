package main

import (
	"fmt"
	"math"
	"math/big"
	"testing"

	"ulpine/quant"
	"ulpine/quant/oracle"
)

// report fails the test with the first difference of a checker.
func (c *checker) report(t *testing.T, least int) {
	t.Helper()
	if c.failed > 0 {
		t.Errorf("%d of %d differ, the first: %s", c.failed, c.count, c.first)
	}
	if c.count < least {
		t.Errorf("%d comparisons, at least %d were meant", c.count, least)
	}
}

// TestEveryCodeTo16Bits decodes every code of every floating-point split, of fixed
// point and of posits of 9 to 16 bits, holds the value to the oracle's and encodes it
// again. (Formats of at most 8 bits: checkCodes of the selftest, below.)
func TestEveryCodeTo16Bits(t *testing.T) {
	t.Parallel()
	var names []string
	for width := 9; width <= 16; width++ {
		for e := 0; e <= 11 && e < width-1; e++ {
			m := width - 1 - e
			top := "ieee"
			if e == 0 {
				top = "finite,bias=1"
			}
			names = append(names, fmt.Sprintf("E%dM%d(top=%s)", e, m, top))
		}
		names = append(names, fmt.Sprintf("Q%d.%d", width/2, width-width/2), fmt.Sprintf("UQ1.%d", width-1), fmt.Sprintf("posit%d", width))
	}
	names = append(names, "fp16", "bf16", "E6M5(top=nan)", "E4M7(top=finite,bias=3)", "E5M6(subnormals=flush)")
	var c checker
	for n, name := range names {
		if testing.Short() && n%9 != 0 {
			continue
		}
		f, err := quant.ParseFormat(name)
		if err != nil {
			t.Fatal(err)
		}
		c.everyCode(f)
	}
	least := 1_500_000
	if testing.Short() {
		least = 50_000
	}
	c.report(t, least)
}

func TestEveryCodeTo8Bits(t *testing.T) {
	var c checker
	checkCodes(&c)
	c.report(t, 30_000)
}

// TestEveryPair adds and multiplies every two operands of every format of at most 8
// bits, to nearest-even and, of the narrowest, in one more rounding, in exact
// rationals. Of the 8-bit splits it takes one layout of the top exponent, and E4M3
// and E5M2 as OCP defines them: the layouts differ at the end of the range alone,
// which TestMidpointsAtTheEnds goes through.
func TestEveryPair(t *testing.T) {
	t.Parallel()
	var c checker
	for n, f := range narrowFormats() {
		base, err := newPair(f)
		if err != nil {
			t.Fatal(err)
		}
		name, bits := f.String(), f.Limits().Bits
		_, split := f.(quant.Float)
		repeated := bits == 8 && split && !f.Limits().HasInfinity && name != "E4M3"
		if testing.Short() && bits > 5 || repeated {
			continue
		}
		c.everyPair(base.with(quant.Rounding{}), f)
		if bits <= 5 {
			c.everyPair(base.with(sevenRoundings[n%len(sevenRoundings)]), f)
		}
	}
	least := 800_000
	if testing.Short() {
		least = 10_000
	}
	c.report(t, least)
}

// everyPair goes through the pairs of one format.
func (c *checker) everyPair(p pair, f quant.Format) {
	var values []float64
	for code := range uint64(1) << f.Limits().Bits {
		if v := f.(coder).Decode(code); v == v && !math.IsInf(v, 0) {
			values = append(values, v)
		}
	}
	word := uint32(0)
	for i, a := range values {
		ra := ratOf(a)
		for _, b := range values[i:] { // both operations commute
			word += 0x9E3779B9
			rb := ratOf(b)
			c.exactResult(p, quant.Exactly(a).Add(quant.Exactly(b)), new(big.Rat).Add(ra, rb), math.Signbit(a) && math.Signbit(b), word, "+", a, b)
			c.exactResult(p, quant.ExactProduct(a, b), new(big.Rat).Mul(ra, rb), math.Signbit(a) != math.Signbit(b), word, "x", a, b)
		}
	}
}

// exactResult compares the rounding of an exact result with the oracle's.
func (c *checker) exactResult(p pair, x quant.Real, want *big.Rat, minusZero bool, word uint32, op string, a, b float64) {
	got, event := p.point.Round(x, word)
	w, e := p.o.Round(want, minusZero, p.r, "", uint64(word>>(32-max(p.r.Bits, 1))))
	c.that(sameBits(got, w) && eventWord(event) == e, "%s: %v %s %v = %v %s, want %v %s", p.point, a, op, b, got, eventWord(event), w, e)
}

// TestMidpointsAtTheEnds rounds what lies around the largest finite value under every
// policy and rounding: where overflow is decided.
func TestMidpointsAtTheEnds(t *testing.T) {
	t.Parallel()
	var c checker
	for _, f := range narrowFormats() {
		base, err := newPair(f)
		if err != nil {
			t.Fatal(err)
		}
		l := f.Limits()
		b := f.Bracket(quant.Exactly(l.Max))
		gap := b.Away - b.Toward
		if _, posit := f.(quant.Posit); posit {
			gap = l.Max
		}
		for _, r := range sevenRoundings {
			for _, policy := range []quant.Overflow{quant.FormatDefault, quant.Saturate, quant.ToNaN, quant.ToInfinity, quant.Wrap} {
				p := base.with(r)
				p.point.Overflow = policy
				if p.point.Check() != nil {
					continue
				}
				for eighths := -8; eighths <= 24; eighths++ {
					x := l.Max + gap*float64(eighths)/8
					for _, y := range []float64{x, -x, math.Nextafter(x, math.Inf(1)), -math.Nextafter(x, 0)} {
						word := uint32(eighths) * 0x9E3779B9
						got, _ := p.point.Round(quant.Exactly(y), word)
						want, _ := p.o.Round(ratOf(y), math.Signbit(y), p.r, overflowText(policy), uint64(word>>(32-max(p.r.Bits, 1))))
						c.that(sameBits(got, want), "%s of %v: %v, want %v", p.point, y, got, want)
					}
				}
			}
		}
	}
	c.report(t, 100_000)
}

func overflowText(o quant.Overflow) string {
	if o == quant.FormatDefault {
		return ""
	}
	return o.String()
}

// TestStochasticMean: the mean of many stochastic roundings lies within 4 standard
// errors of the expected value that the exact probability gives.
func TestStochasticMean(t *testing.T) {
	draws := (&arithmetic{seed: 17}).draws(0)
	f, err := quant.ParseFormat("bf16")
	if err != nil {
		t.Fatal(err)
	}
	o, err := oracleOf(f)
	if err != nil {
		t.Fatal(err)
	}
	const n = 20000
	for i, x := range []float64{1.001, -3.1, 0x1.0101p-130, 255.7} {
		for bits := uint8(4); bits <= 32; bits += 7 {
			p := quant.Point{Format: f, Rounding: quant.Rounding{Mode: quant.Stochastic, Bits: bits, Variant: quant.CentredEven}}
			away := 0
			toward, up, _ := o.Neighbours(ratOf(x))
			for k := range uint64(n) {
				v, _ := p.Round(quant.Exactly(x), draws.Word(uint64(i)*n+k))
				if ratOf(math.Abs(v)).Cmp(up) == 0 {
					away++
				} else if ratOf(math.Abs(v)).Cmp(toward) != 0 {
					t.Fatalf("%v became %v", x, v)
				}
			}
			chance, _ := o.Chance(ratOf(x), oracle.Rounding{Mode: "stochastic", Bits: uint(bits), Variant: "centred-even"}).Float64()
			if d := math.Abs(float64(away)/n - chance); d > 4*math.Sqrt(chance*(1-chance)/n)+1e-12 {
				t.Errorf("%v with %d bits: %d of %d away from zero, chance %v", x, bits, away, n, chance)
			}
		}
	}
}
