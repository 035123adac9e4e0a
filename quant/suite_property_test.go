package quant

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"pgregory.net/rapid"
)

// anyScalar draws a format of any scalar family.
func anyScalar(t *rapid.T) Format {
	number := func(name string, lo, hi int) int { return rapid.IntRange(lo, hi).Draw(t, name) }
	var f Format
	var err error
	switch number("family", 0, 6) {
	case 0:
		return anyPoint(t).Format
	case 1:
		i := number("integer", 1, 20)
		f, err = NewFixed(i, number("fraction", 1, 30), rapid.Bool().Draw(t, "unsigned"), FormatDefault)
	case 2:
		f, err = NewPosit(number("width", 3, 32))
	case 3:
		f, err = NewLogarithmic(number("integer", 1, 8), number("fraction", 1, 9), FormatDefault)
	case 4:
		width := number("width", 3, 8)
		f, err = NewDraft(width, number("precision", 1, width-1), Overflow(number("overflow", 0, 3)))
	case 5:
		return PowerScale{}
	default:
		values := rapid.SliceOfNDistinct(rapid.Float64Range(-100, 100), 2, 12, func(x float64) float64 { return x + 0 }).Draw(t, "values")
		slices.Sort(values)
		f, err = NewTable("", values, FormatDefault)
	}
	if err != nil {
		t.Skip(err)
	}
	return f
}

// anyRounding draws a rounding.
func anyRounding(t *rapid.T) Rounding {
	all := suiteRoundings()
	return all[rapid.IntRange(0, len(all)-1).Draw(t, "rounding")]
}

// anyReal draws a number in or about the range of a format.
func anyReal(t *rapid.T, l Limits) float64 {
	least := max(l.MinSubnormal, 0x1p-200)
	most := max(math.Abs(l.Max), math.Abs(l.Lowest))
	e := rapid.IntRange(min(exponentOf(least), exponentOf(most))-3, exponentOf(most)+2).Draw(t, "exponent")
	return math.Ldexp(rapid.Float64Range(-2, 2).Draw(t, "significand"), e)
}

// crosses reports whether a number lies in the gap around a zero that the format
// lacks, where stochastic rounding takes f from the far side on both sides of zero.
func crosses(f Format, x float64) bool {
	return f.Limits().NoZero && f.Bracket(Exactly(x)).Toward < 0
}

// TestFamilyProperties: rounding is monotone for one random word, idempotent, gives
// values of the format and, where the format is, is symmetric in sign.
func TestFamilyProperties(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		f := anyScalar(t)
		p := Point{Format: f, Rounding: anyRounding(t)}
		l := f.Limits()
		x, y := anyReal(t, l), anyReal(t, l)
		word := rapid.Uint32().Draw(t, "word")
		rx, event := p.Round(Exactly(x), word)
		ry, _ := p.Round(Exactly(y), word)
		random := p.Rounding.Mode == Stochastic && (crosses(f, x) || crosses(f, y))
		if !random && (x <= y && rx > ry || x >= y && rx < ry) {
			t.Fatalf("%v is not monotone: %v -> %v, %v -> %v", p, x, rx, y, ry)
		}
		if again, e := p.Round(Exactly(rx), word); math.Abs(rx) <= math.MaxFloat64 && (!same(again, rx) || e != NoEvent) {
			t.Fatalf("%v is not idempotent: %v -> %v -> %v", p, x, rx, again)
		}
		if rx == rx {
			code, ok := f.(Coded).Encode(rx)
			if !ok || !same(f.(Coded).Decode(code), rx) {
				t.Fatalf("%v: %v -> %v, code %x %v", p, x, rx, code, ok)
			}
		}
		symmetric := -l.Lowest == l.Max
		if fixed, ok := f.(Fixed); ok && fixed.lo < 0 {
			symmetric = math.Abs(x) < l.Max
		}
		if _, table := f.(Table); table || !symmetric {
			return
		}
		opposite := p
		switch p.Rounding.Mode {
		case Up:
			opposite.Rounding.Mode = Down
		case Down:
			opposite.Rounding.Mode = Up
		}
		if r, e := opposite.Round(Exactly(-x), word); e != event || r != -rx && rx == rx {
			t.Fatalf("%v is not symmetric: %v -> %v, %v -> %v", p, x, rx, -x, r)
		}
	})
}

// TestFamilyMeans: over many draws the mean of stochastic rounding is within four
// standard errors of the exact number where the fraction of the gap has no more bits
// than are drawn, of the middle of the gap with equal probability.
func TestFamilyMeans(t *testing.T) {
	r := rand.New(rand.NewPCG(71, 72))
	const n = 20000
	for at, name := range []string{"Q4.4", "posit8", "LNS4.3", "binary8p3", "table(-1,-0.5,0.25,1)", "table(-1,1)", "E4M3", "E8M0"} {
		f := mustFormatOf(name)
		for try := range 6 {
			x := r.Float64()*1.6 - 0.8
			if name == "E8M0" {
				x = math.Abs(x) + 0.1
			}
			b := f.Bracket(Exactly(x))
			lo, hi := b.Toward, b.Away
			if x < 0 {
				lo, hi = -lo, -hi
			}
			for _, c := range []struct {
				r    Rounding
				want float64
			}{
				{Rounding{Mode: Stochastic, Bits: 32}, x},
				{Rounding{Mode: Stochastic, Bits: 24, Variant: CentredEven}, x},
				{Rounding{Mode: Stochastic, Bits: 8, Variant: Equal}, (lo + hi) / 2},
			} {
				p := Point{Format: f, Rounding: c.r}
				d := Draws{Seed: uint64(100*at + try), Site: uint32(c.r.Variant)}
				sum := 0.0
				for i := range uint64(n) {
					v, _ := p.Round(Exactly(x), c.r.Word(d, i))
					sum += v
				}
				share := (c.want - lo) / (hi - lo)
				if b.Exact {
					share, c.want = 0, x
				}
				near(t, name+" "+c.r.String(), sum/n, c.want, math.Abs(hi-lo)*math.Sqrt(share*(1-share)/n)+1e-9)
			}
		}
	}
}

// TestFamilyOrders: in every family with a zero chunks of one term, and one lane, are
// sequential sums. (Without a zero an empty chunk, +0, is rounded when it is added.)
func TestFamilyOrders(t *testing.T) {
	r := rand.New(rand.NewPCG(73, 74))
	for _, text := range []string{
		"Q4.4", "Q4.4(overflow=wrap) toward-zero", "UQ2.6 to-odd", "posit8", "posit16 up", "binary8p4 nearest-away",
		"table(-4,-2,-1,-0.5,0,0.5,1,2,4)", "LNS4.3", "LNS4.3 stochastic(8)", "Q4.4 stochastic(4,equal)", "posit8 stochastic(8,share=2)",
	} {
		p, err := ParsePoint(text)
		if err != nil {
			t.Fatal(err)
		}
		for range 15 {
			k := r.IntN(14)
			form := func(order string) []float64 {
				q := randomProduct[float64](rand.New(rand.NewPCG(uint64(k), 9)), 2, 5, k, kindsOfData[0].draw, kindsOfData[0].draw)
				q.Scale, q.Bias = nil, nil
				o, err := ParseOrder(order)
				if err != nil {
					t.Fatal(err)
				}
				m, err := NewMultiplier[float64](Accumulate{Product: &p, Sum: p, Order: o})
				if err != nil {
					t.Fatal(err)
				}
				m.Mul(q, nil, nil)
				return q.C
			}
			seq := form("sequential")
			if !slices.EqualFunc(form("lanes(1)"), seq, same) {
				t.Fatalf("%v, %d terms: lanes(1) is not sequential", p, k)
			}
			if p.Rounding.Mode != Stochastic && !slices.EqualFunc(form("chunk(1)"), seq, same) {
				t.Fatalf("%v, %d terms: chunk(1) is not sequential: %v and %v", p, k, form("chunk(1)"), seq)
			}
		}
	}
}

// TestFamilySlices: elementwise operations round as the reference does.
func TestFamilySlices(t *testing.T) {
	r := rand.New(rand.NewPCG(75, 76))
	for _, text := range []string{"Q2.14", "Q2.14 stochastic(16)", "posit16", "posit8 stochastic(8,centred)", "LNS5.4", "binary8p4", "table(-1,0,1)", "E8M0", "fp16 stochastic(8,equal)"} {
		p, err := ParsePoint(text)
		if err != nil {
			t.Fatal(err)
		}
		a, b, dst := make([]float64, 300), make([]float64, 300), make([]float64, 300)
		for i := range a {
			a[i], b[i] = r.NormFloat64(), r.NormFloat64()
		}
		d := Draws{Seed: 12}
		check := func(what string, exact func(i int) Real) {
			t.Helper()
			for i := range dst {
				if want, _ := p.Round(exact(i), p.Rounding.Word(d, uint64(i))); !same(dst[i], want) {
					t.Fatalf("%v, %s, element %d: %v, want %v", p, what, i, dst[i], want)
				}
			}
		}
		RoundSlice(dst, a, &p, d, 0, nil)
		check("round", func(i int) Real { return Exactly(a[i]) })
		AddSlice(dst, a, b, &p, d, nil)
		check("add", func(i int) Real { return Exactly(a[i]).Add(Exactly(b[i])) })
		ScaleSlice(dst, 0.3, a, &p, d, nil)
		check("scale", func(i int) Real { return ExactProduct(0.3, a[i]) })
	}
}
