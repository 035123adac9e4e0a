package quant

import (
	"math"
	"math/big"
	"math/rand/v2"
	"testing"

	"pgregory.net/rapid"
)

// rat returns a finite real without its sticky rest as a rational.
func (a Real) rat() *big.Rat {
	sig := new(big.Int).Or(new(big.Int).Lsh(new(big.Int).SetUint64(a.Hi), 64), new(big.Int).SetUint64(a.Lo))
	r := timesPower(new(big.Rat).SetInt(sig), a.Exp)
	if a.Neg {
		r.Neg(r)
	}
	return r
}

// timesPower returns r 2^exp.
func timesPower(r *big.Rat, exp int) *big.Rat {
	p := new(big.Int).Lsh(big.NewInt(1), uint(max(exp, -exp)))
	f := new(big.Rat).SetInt(p)
	if exp < 0 {
		f.Inv(f)
	}
	return new(big.Rat).Mul(r, f)
}

// stands reports whether a stands for the exact x: normalised, equal to it, or,
// when sticky, less than one unit of its last place below it in magnitude.
func (a Real) stands(x *big.Rat) bool {
	if x.Sign() == 0 {
		return a.IsZero() && !a.Sticky
	}
	if a.Kind != Finite || a.Hi>>63 == 0 || a.Neg != (x.Sign() < 0) {
		return false
	}
	rest := new(big.Rat).Sub(new(big.Rat).Abs(x), new(big.Rat).Abs(a.rat()))
	if !a.Sticky {
		return rest.Sign() == 0
	}
	return rest.Sign() > 0 && rest.Cmp(timesPower(big.NewRat(1, 1), a.Exp)) < 0
}

// anyFloat draws finite binary64 numbers of all exponents, near one another often.
func anyFloat(r *rand.Rand) float64 {
	switch r.IntN(6) {
	case 0:
		return math.Float64frombits(r.Uint64() & (1<<63 | 1<<52 - 1)) // subnormal
	case 1:
		return float64(r.IntN(7) - 3)
	case 2:
		return math.Ldexp(1+math.Ldexp(float64(r.IntN(5)-2), -52), r.IntN(140)-70)
	case 3:
		return math.Ldexp(r.NormFloat64(), r.IntN(260)-130)
	}
	for {
		if x := math.Float64frombits(r.Uint64()); math.Abs(x) <= math.MaxFloat64 {
			return x
		}
	}
}

func ratOf(x float64) *big.Rat { return new(big.Rat).SetFloat64(x) }

// TestRealArithmetic holds products, quotients, sums of two numbers and of a number
// and a product to exact rationals.
func TestRealArithmetic(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 4))
	n := 20000
	if testing.Short() {
		n = 2000
	}
	for range n {
		a, b, c := anyFloat(r), anyFloat(r), anyFloat(r)
		if !Exactly(a).stands(ratOf(a)) {
			t.Fatalf("%x: %+v", a, Exactly(a))
		}
		ab := new(big.Rat).Mul(ratOf(a), ratOf(b))
		p := ExactProduct(a, b)
		if !p.stands(ab) {
			t.Fatalf("%x x %x: %+v", a, b, p)
		}
		if s := p.Add(Exactly(c)); !s.stands(new(big.Rat).Add(ab, ratOf(c))) {
			t.Fatalf("%x x %x + %x: %+v", a, b, c, s)
		}
		if s := Exactly(a).Add(Exactly(b)); !s.stands(new(big.Rat).Add(ratOf(a), ratOf(b))) {
			t.Fatalf("%x + %x: %+v", a, b, s)
		}
		// Cancellation down to the rest of a product.
		if s := p.Add(Exactly(-a * b)); math.Abs(a*b) <= math.MaxFloat64 && !s.stands(new(big.Rat).Sub(ab, ratOf(a*b))) {
			t.Fatalf("rest of %x x %x: %+v", a, b, s)
		}
		if b != 0 {
			if q := ExactQuotient(a, b); !q.stands(new(big.Rat).Quo(ratOf(a), ratOf(b))) {
				t.Fatalf("%x / %x: %+v", a, b, q)
			}
		}
		if got, want := p.Compare(Exactly(c)), ab.Cmp(ratOf(c)); got != want {
			t.Fatalf("compare %x x %x with %x: %d, want %d", a, b, c, got, want)
		}
	}
}

// TestRealSumsOfWideSignificands adds full 128-bit significands at every distance.
func TestRealSumsOfWideSignificands(t *testing.T) {
	r := rand.New(rand.NewPCG(5, 6))
	for d := range 400 {
		for range 20 {
			a := Real{Neg: r.IntN(2) == 0, Hi: r.Uint64() | 1<<63, Lo: r.Uint64()}
			b := Real{Neg: r.IntN(2) == 0, Hi: r.Uint64() | 1<<63, Lo: r.Uint64(), Exp: -d}
			switch r.IntN(4) {
			case 0:
				a.Hi, a.Lo = 1<<63, 0 // a power of two: one bit of cancellation
			case 1:
				b.Hi, b.Lo = math.MaxUint64, math.MaxUint64
			}
			want := new(big.Rat).Add(a.rat(), b.rat())
			if s := a.Add(b); !s.stands(want) {
				t.Fatalf("%+v + %+v = %+v", a, b, s)
			}
			if s := b.Add(a); !s.stands(want) {
				t.Fatalf("%+v + %+v = %+v", b, a, s)
			}
		}
	}
}

// TestRealSpecials: infinities, NaN and the signs of zero.
func TestRealSpecials(t *testing.T) {
	inf, nan, zero, minus := Exactly(math.Inf(1)), Exactly(math.NaN()), Exactly(0), Exactly(math.Copysign(0, -1))
	for _, c := range []struct {
		name      string
		got, want Real
	}{
		{"inf + inf", inf.Add(inf), inf},
		{"inf - inf", inf.Add(inf.Negated()), nan},
		{"inf + 1", inf.Add(Exactly(1)), inf},
		{"1 - inf", Exactly(1).Add(inf.Negated()), inf.Negated()},
		{"nan + 1", nan.Add(Exactly(1)), nan},
		{"inf x 0", ExactProduct(math.Inf(1), 0), nan},
		{"-0 x inf", ExactProduct(math.Copysign(0, -1), math.Inf(1)), nan},
		{"inf x -2", ExactProduct(math.Inf(1), -2), inf.Negated()},
		{"nan x 0", ExactProduct(math.NaN(), 0), nan},
		{"0 + -0", zero.Add(minus), zero},
		{"-0 + -0", minus.Add(minus), minus},
		{"1 - 1", Exactly(1).Add(Exactly(-1)), zero},
		{"-1 + 1", Exactly(-1).Add(Exactly(1)), zero},
		{"-0 x 3", ExactProduct(math.Copysign(0, -1), 3), minus},
		{"0 x -3", ExactProduct(0, -3), minus},
		{"inf / 2", ExactQuotient(math.Inf(1), 2), inf},
		{"-0 / 2", ExactQuotient(math.Copysign(0, -1), 2), minus},
	} {
		if c.got != c.want {
			t.Errorf("%s = %+v, want %+v", c.name, c.got, c.want)
		}
	}
}

// TestRealCompareSticky: a rest decides between reals cut at the same place.
func TestRealCompareSticky(t *testing.T) {
	third := ExactQuotient(1, 3)
	cut := third
	cut.Sticky = false
	for _, c := range []struct {
		a, b Real
		want int
	}{
		{third, cut, 1},
		{cut, third, -1},
		{third.Negated(), cut.Negated(), -1},
		{cut.Negated(), third.Negated(), 1},
		{cut, cut, 0},
		{Real{}, third, -1},
		{third, Real{}, 1},
		{Real{}, third.Negated(), 1},
		{Real{}, Real{Neg: true}, 0},
		{third, third.Negated(), 1},
		{third.Negated(), third, -1},
		{Exactly(2), Exactly(3), -1},
		{Exactly(-2), Exactly(-3), 1},
	} {
		if got := c.a.Compare(c.b); got != c.want {
			t.Errorf("compare %+v with %+v: %d, want %d", c.a, c.b, got, c.want)
		}
	}
}

// TestExactSum adds thousands of products of every exponent, and their negatives
// but for a rest, and holds the total to rationals.
func TestExactSum(t *testing.T) {
	r := rand.New(rand.NewPCG(7, 8))
	for range 30 {
		var s exactSum
		want := new(big.Rat)
		for range 60 {
			a, b := anyFloat(r), anyFloat(r)
			if r.IntN(2) == 0 { // cancels the whole sum so far, but for its rest
				v, _ := new(big.Rat).Neg(want).Float64()
				if math.Abs(v) <= math.MaxFloat64 {
					a, b = v, 1
				}
			}
			s.add(ExactProduct(a, b))
			want.Add(want, new(big.Rat).Mul(ratOf(a), ratOf(b)))
			copied := s
			if total := copied.total(); !total.stands(want) {
				t.Fatalf("sum %+v, want %v", total, want)
			}
		}
	}
	var s exactSum
	s.add(ExactProduct(math.SmallestNonzeroFloat64, -math.SmallestNonzeroFloat64))
	s.add(ExactProduct(math.MaxFloat64, math.MaxFloat64))
	if x := s.total(); !x.Sticky || x.Neg || x.Exp+127 != 2047 {
		t.Errorf("largest and least product: %+v", x)
	}
	s.add(Exactly(math.Inf(-1)))
	if x := s.total(); x.Kind != Infinite || !x.Neg {
		t.Errorf("with an infinity: %+v", x)
	}
	s.add(Exactly(math.Inf(1)))
	if x := s.total(); x.Kind != NotANumber {
		t.Errorf("with both infinities: %+v", x)
	}
}

// TestExactSumCarries: digits that have taken many additions still add up.
func TestExactSumCarries(t *testing.T) {
	var s exactSum
	x := Exactly(math.Nextafter(2, 1))
	for n := 1; n <= 1<<12; n++ {
		s.add(x)
		if n%1000 == 0 {
			s.additions = 1<<30 - 1 // the next one brings the carry forward
		}
	}
	want := new(big.Rat).Mul(ratOf(math.Nextafter(2, 1)), big.NewRat(1<<12, 1))
	if total := s.total(); !total.stands(want) {
		t.Errorf("%+v", total)
	}
}

// TestOddFold: rounding to odd at 53 bits and then to fewer bits in any mode is the
// rounding of the exact sum.
func TestOddFold(t *testing.T) {
	points := innerPoints(t)
	rapid.Check(t, func(t *rapid.T) {
		a := rapid.Float64Range(-1e30, 1e30).Draw(t, "a")
		e := rapid.IntRange(-120, 10).Draw(t, "e")
		b := float64(math.Ldexp(rapid.Float64Range(-1, 1).Draw(t, "b"), e) * math.Abs(a)) // not fused with a + b below
		p := *points[rapid.IntRange(0, len(points)-1).Draw(t, "point")]
		word := rapid.Uint32().Draw(t, "word")
		// Half of the time a is a value or a midpoint of the format.
		if rapid.Bool().Draw(t, "value") {
			if v, _ := p.Round(Exactly(a), word); math.Abs(v) <= math.MaxFloat64 {
				a = v
			}
		}
		x := a + b
		folded := oddFold(x, twoSumRest(x, a, b))
		if q := oddFoldQuick(x, twoSumRest(x, a, b)); q != folded {
			t.Fatalf("folds differ: %x %x", q, folded)
		}
		exact := Exactly(a).Add(Exactly(b))
		want, event := p.Round(exact, word)
		if got, e := p.Round(Exactly(folded), word); !same(got, want) || e != event {
			t.Fatalf("%v: %x + %x: %v %d, want %v %d", p, a, b, got, e, want, event)
		}
		q := newQuick(&p)
		if q.kind == quickNone {
			return // the reference serves it
		}
		if got, e := q.round(folded, word); !same(got, want) || e != event {
			t.Fatalf("%v: quick %x + %x: %v %d, want %v %d", p, a, b, got, e, want, event)
		}
	})
}
