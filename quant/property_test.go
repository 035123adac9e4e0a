package quant

import (
	"math"
	"math/rand/v2"
	"testing"

	"pgregory.net/rapid"
)

// anyPoint draws a format of any layout with a rounding and a policy.
func anyPoint(t *rapid.T) Point {
	for {
		b := rapid.IntRange(-40, 200).Draw(t, "bias")
		s := FloatSpec{
			Exponent: rapid.IntRange(0, 9).Draw(t, "exponent"), Fraction: rapid.IntRange(0, 30).Draw(t, "fraction"),
			Flush: rapid.Bool().Draw(t, "flush"), Top: Top(rapid.IntRange(0, 2).Draw(t, "top")),
			Overflow: Overflow(rapid.IntRange(0, 3).Draw(t, "overflow")),
		}
		if s.Exponent == 0 || rapid.Bool().Draw(t, "own bias") {
			s.Bias = &b
		}
		f, err := NewFloat(s)
		if err != nil {
			continue
		}
		p := Point{Format: f, Rounding: Rounding{Mode: Mode(rapid.IntRange(0, int(Stochastic)).Draw(t, "mode"))}}
		if p.Rounding.Mode == Stochastic {
			p.Rounding.Bits = uint8(rapid.IntRange(1, 32).Draw(t, "bits"))
			p.Rounding.Variant = Variant(rapid.IntRange(0, 2).Draw(t, "variant"))
		}
		return p
	}
}

// near the format's range: a random significand and an exponent around it.
func anyValue(t *rapid.T, f Float) float64 {
	l := f.Limits()
	e := rapid.IntRange(exponentOf(l.MinSubnormal)-3, exponentOf(l.Max)+2).Draw(t, "exponent of the value")
	x := math.Ldexp(rapid.Float64Range(1, 2).Draw(t, "significand"), e)
	if rapid.Bool().Draw(t, "negative") {
		x = -x
	}
	return x
}

// TestRoundingProperties: rounding is monotone, idempotent and, but for up and
// down, which change places, symmetric in sign; its results are values; and the
// quick rounding agrees with the reference.
func TestRoundingProperties(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		p := anyPoint(t)
		f := p.Format.(Float)
		x, y := anyValue(t, f), anyValue(t, f)
		word := rapid.Uint32().Draw(t, "word")
		rx, ex := p.Round(Exactly(x), word)
		ry, _ := p.Round(Exactly(y), word)
		if x <= y && rx > ry || x >= y && rx < ry {
			t.Fatalf("%v is not monotone: %v -> %v, %v -> %v", p, x, rx, y, ry)
		}
		if again, e := p.Round(Exactly(rx), word); math.Abs(rx) <= math.MaxFloat64 && (!same(again, rx) || e != NoEvent) {
			t.Fatalf("%v is not idempotent: %v -> %v -> %v", p, x, rx, again)
		}
		if rx == rx {
			if _, ok := f.Encode(rx); !ok {
				t.Fatalf("%v: %v -> %v has no code", p, x, rx)
			}
		}
		opposite := p
		switch p.Rounding.Mode {
		case Up:
			opposite.Rounding.Mode = Down
		case Down:
			opposite.Rounding.Mode = Up
		}
		if r, e := opposite.Round(Exactly(-x), word); e != ex || !same(r, -rx) {
			t.Fatalf("%v is not symmetric: %v -> %v, %v -> %v", p, x, rx, -x, r)
		}
		q := newQuick(&p)
		if q.kind != quickNone {
			if r, e := q.round(x, word); !same(r, rx) || e != ex {
				t.Fatalf("%v: quick %v -> %v %d, want %v %d", p, x, r, e, rx, ex)
			}
		}
		block := []float64{x}
		var n, want Counts
		want.Count(ex)
		w := words{on: true, valid: true, four: [4]uint32{word}}
		if q.block(block, &w, 0, &n) && (!same(block[0], rx) || n != want) {
			t.Fatalf("%v: block %v -> %v %+v, want %v %d", p, x, block[0], n, rx, ex)
		}
	})
}

// TestBracketProperties: Toward and Away are neighbours that enclose the number.
func TestBracketProperties(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		f := anyPoint(t).Format.(Float)
		x := math.Abs(anyValue(t, f))
		b := f.Bracket(Exactly(x))
		if !(b.Toward <= x && x < b.Away) || b.Exact != (b.Toward == x) {
			t.Fatalf("%v: %v in %+v", f, x, b)
		}
		if f.flush || b.Away > f.Limits().Max {
			return
		}
		lo, ok1 := f.Encode(b.Toward)
		hi, ok2 := f.Encode(b.Away)
		if !ok1 || !ok2 || hi != lo+1 || b.Odd != (lo&1 == 1) {
			t.Fatalf("%v: %v in %+v, codes %x %v and %x %v", f, x, b, lo, ok1, hi, ok2)
		}
	})
}

// TestOrderProperties: chunks of one term in outer = sum, and one lane, are
// sequential sums; a chunk as long as the sum adds one rounding that does nothing;
// two terms are the same in every order but wide and chunk; the columns of a
// product do not depend on how many there are.
func TestOrderProperties(t *testing.T) {
	r := rand.New(rand.NewPCG(31, 32))
	for _, text := range []string{"fp16", "bf16", "E4M3", "fp32", "fp16 toward-zero", "E5M2 stochastic(8)"} {
		for range 20 {
			data := kindsOfData[r.IntN(6)]
			k := r.IntN(30)
			p := randomProduct[float32](r, 2, 9, k, data.draw, data.draw)
			p.Scale = nil
			p.Bias = nil
			form := func(order string, p Product[float32]) []float32 {
				p.C = make([]float32, p.I*p.J)
				m, err := NewMultiplier[float32](mustAccumulate(t, "product "+text+"; sum "+text+"; "+order))
				if err != nil {
					t.Fatal(err)
				}
				m.Mul(p, nil, nil)
				return p.C
			}
			equal := func(name string, a, b []float32) {
				t.Helper()
				for i := range a {
					if !same(float64(a[i]), float64(b[i])) {
						t.Fatalf("%s, %s, %d terms: %v and %v", text, name, k, a, b)
					}
				}
			}
			seq := form("sequential", p)
			equal("lanes(1)", form("lanes(1)", p), seq)
			equal("one chunk", form("chunk(30)", p), seq)
			if m, _ := ParsePoint(text); m.Rounding.Mode != Stochastic {
				// chunk(1) draws for its terms and for its outer additions.
				equal("chunk(1)", form("chunk(1)", p), seq)
			}
			// The right half alone, with its own column numbers.
			half := p
			half.J, half.FirstJ = 4, p.FirstJ+5
			half.B = shifted[float32]{p.B, 5}
			right := form("sequential", half)
			for i := range 2 {
				equal("the last columns alone", right[i*4:][:4], seq[i*9+5:][:4])
			}
		}
	}
}

// shifted is the columns of b from column by on.
type shifted[T Element] struct {
	b  Columns[T]
	by int
}

func (s shifted[T]) Padded(k, j int) bool { return s.b.Padded(k, j+s.by) }

func (s shifted[T]) Pack(dst []T, width, k0, k1, j0, j1 int) {
	s.b.Pack(dst, width, k0, k1, j0+s.by, j1+s.by)
}
