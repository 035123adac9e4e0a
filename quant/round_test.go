package quant

import (
	"fmt"
	"math"
	"testing"
)

// roundings are all the directions, and stochastic rounding in its variants.
func roundings() []Rounding {
	var r []Rounding
	for m := NearestEven; m < Stochastic; m++ {
		r = append(r, Rounding{Mode: m})
	}
	for v := Truncated; v <= CentredEven; v++ {
		for _, n := range []uint8{1, 2, 5, 16, 32} {
			r = append(r, Rounding{Mode: Stochastic, Bits: n, Variant: v})
		}
	}
	return r
}

// testWords are random words at the ends of the range, in the middle and between.
var testWords = []uint32{0, 1, 0x7fffffff, 0x80000000, 0xffffffff, 0x3c6ef372, 0xfffeffff, 0x0001ffff}

func bias(n int) *int { return &n }

// testSpecs are formats of every layout with few enough codes to go through all.
var testSpecs = []FloatSpec{
	{Exponent: 4, Fraction: 3, Top: TopNaNOnly, Overflow: Saturate},
	{Exponent: 4, Fraction: 3},
	{Exponent: 5, Fraction: 2},
	{Exponent: 5, Fraction: 2, Flush: true},
	{Exponent: 3, Fraction: 2, Top: TopFinite},
	{Exponent: 2, Fraction: 3, Top: TopFinite},
	{Exponent: 2, Fraction: 1, Top: TopFinite},
	{Exponent: 4, Fraction: 0},
	{Exponent: 4, Fraction: 0, Top: TopNaNOnly},
	{Exponent: 0, Fraction: 5, Bias: bias(3), Top: TopFinite},
	{Exponent: 1, Fraction: 4},
	{Exponent: 3, Fraction: 4, Bias: bias(-9), Top: TopNaNOnly, Overflow: ToNaN},
	{Exponent: 6, Fraction: 1, Bias: bias(40), Flush: true, Top: TopFinite},
}

// probes are the magnitudes that decide: every value, every midpoint, quarters,
// and the binary64 neighbours of all.
func (o *oracle) probes() []float64 {
	var p []float64
	for n := range len(o.grid) - 2 {
		a, b := o.float(n), o.float(n+1)
		for _, x := range []float64{a, a + (b-a)/4, (a + b) / 2, b - (b-a)/4} {
			p = append(p, x, math.Nextafter(x, math.Inf(1)))
			if x > 0 {
				p = append(p, math.Nextafter(x, 0))
			}
		}
	}
	return p
}

// everyPoint calls do with each rounding and overflow policy of a format.
func everyPoint(f Format, do func(Point)) {
	for _, r := range roundings() {
		for _, o := range []Overflow{FormatDefault, ToInfinity, Saturate, ToNaN} {
			if p := (Point{f, r, o}); p.Check() == nil {
				do(p)
			}
		}
	}
}

// TestRoundAgainstRationals holds the scalar reference, the quick rounding and the
// slice rounding to the oracle, in every format of testSpecs, every mode and
// policy, over every value, midpoint, quarter and their neighbours.
func TestRoundAgainstRationals(t *testing.T) {
	for _, spec := range testSpecs {
		f, err := NewFloat(spec)
		if err != nil {
			t.Fatal(err)
		}
		t.Run(f.String(), func(t *testing.T) {
			t.Parallel()
			o := newOracle(f, spec)
			probes := o.probes()
			top := probes[len(probes)-len(probes)/16-60:]
			everyPoint(f, func(p Point) {
				if p.Overflow == FormatDefault {
					o.compare(t, p, probes)
				} else {
					o.compare(t, p, top)
				}
			})
		})
	}
}

// compare checks the roundings of probes, of both signs.
func (o *oracle) compare(t *testing.T, p Point, probes []float64) {
	t.Helper()
	q := newQuick(&p)
	if q.kind == quickNone {
		t.Fatalf("%v has no quick rounding", p)
	}
	words := testWords
	if p.Rounding.Mode != Stochastic {
		words = words[:1]
	}
	for i, x := range probes {
		at := o.place(scaledInt(x))
		word := words[i%len(words)]
		for _, neg := range []bool{false, true} {
			want, event := o.round(at, neg, p, word)
			got, e := p.Round(Exactly(withSign(x, neg)), word)
			if !same(got, want) || e != event {
				t.Fatalf("%v: %v (negative %v, word %08x): %v %d, want %v %d", p, x, neg, word, got, e, want, event)
			}
			got, e = q.round(withSign(x, neg), word)
			if !same(got, want) || e != event {
				t.Fatalf("%v: quick %v (negative %v, word %08x): %v %d, want %v %d", p, x, neg, word, got, e, want, event)
			}
		}
	}
}

// TestRoundKnownFormats does the same for the named formats of 16 bits and some of
// their variants: every code, every midpoint and the neighbours.
func TestRoundKnownFormats(t *testing.T) {
	specs := []FloatSpec{
		{Exponent: 5, Fraction: 10},
		{Exponent: 8, Fraction: 7},
		{Exponent: 6, Fraction: 9, Flush: true},
	}
	for _, spec := range specs {
		f, err := NewFloat(spec)
		if err != nil {
			t.Fatal(err)
		}
		t.Run(f.String(), func(t *testing.T) {
			t.Parallel()
			o := newOracle(f, spec)
			probes := o.probes()
			for i, r := range roundings() {
				if testing.Short() && i > 0 {
					break
				}
				// Every probe in nearest-even, every 29th elsewhere, from
				// another start in each.
				some := probes
				if i > 0 {
					some = nil
					for n := i; n < len(probes); n += 29 {
						some = append(some, probes[n])
					}
				}
				o.compare(t, Point{f, r, FormatDefault}, some)
			}
		})
	}
}

func ExamplePoint_Round() {
	p := Point{Format: Binary16}
	v, _ := p.Round(Exactly(0.1), 0)
	fmt.Println(v)
	// Output: 0.0999755859375
}
