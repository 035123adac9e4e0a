package quant

import (
	"math"
	"math/rand/v2"
	"testing"

	"github.com/x448/float16"
)

// slicePoints are the inner points and some that only elementwise operations have.
func slicePoints(t testing.TB) []*Point {
	p := innerPoints(t)
	for _, text := range []string{
		"bf16 stochastic(32)", "fp32 stochastic(32)", "fp32 stochastic(32,centred)", "E4M3 stochastic(32,centred-even)",
		"E5M10(subnormals=flush) stochastic(24)", "E0M7(bias=0,top=finite)", "E8M0(top=ieee) to-odd",
	} {
		x, err := ParsePoint(text)
		if err != nil {
			t.Fatal(err)
		}
		p = append(p, &x)
	}
	return p
}

// TestSlices holds the four elementwise operations to Point.Round of the exact
// result, word for word, over all points and kinds of data, lengths around the
// block length, float32 and float64 sources.
func TestSlices(t *testing.T) {
	r := rand.New(rand.NewPCG(21, 22))
	for n, p := range slicePoints(t) {
		if !Fits32(p.Format) {
			continue // see TestSlicesOfBinary64
		}
		for m, data := range kindsOfData {
			length := [...]int{0, 1, 5, blockLength - 1, blockLength, blockLength + 3, 2*blockLength + 1}[(n+m)%7]
			a, b := make([]float64, length), make([]float64, length)
			a32, b32 := make([]float32, length), make([]float32, length)
			for i := range a {
				a[i], b[i] = data.draw(r), data.draw(r)*math.Ldexp(1, -r.IntN(40))
				a32[i], b32[i] = float32(a[i]), float32(b[i])
			}
			s := sliceTest{t: t, p: p, d: Draws{Seed: r.Uint64(), Step: r.Uint32(), Site: r.Uint32()}, name: data.name}
			alpha := []float64{1, 0.1, -0x1p-10, 0x1p60, 0, float64(float32(0.9)), math.Inf(1)}[r.IntN(7)]
			first := r.Uint64N(1 << 40)
			checkSlice(s, first, length, func(dst []float32, n *Counts) { RoundSlice(dst, a, p, s.d, first, n) }, func(i int) Real { return Exactly(a[i]) })
			checkSlice(s, first, length, func(dst []float32, n *Counts) { RoundSlice(dst, a32, p, s.d, first, n) }, func(i int) Real { return Exactly(float64(a32[i])) })
			checkSlice(s, first, length, func(dst []float64, n *Counts) { RoundSlice(dst, a, p, s.d, first, n) }, func(i int) Real { return Exactly(a[i]) })
			checkSlice(s, 0, length, func(dst []float32, n *Counts) { ScaleSlice(dst, alpha, a32, p, s.d, n) }, func(i int) Real { return ExactProduct(alpha, float64(a32[i])) })
			checkSlice(s, 0, length, func(dst []float64, n *Counts) { ScaleSlice(dst, alpha, a, p, s.d, n) }, func(i int) Real { return ExactProduct(alpha, a[i]) })
			checkSlice(s, 0, length, func(dst []float32, n *Counts) { AddSlice(dst, a32, b32, p, s.d, n) }, func(i int) Real { return Exactly(float64(a32[i])).Add(Exactly(float64(b32[i]))) })
			checkSlice(s, 0, length, func(dst []float64, n *Counts) { SubSlice(dst, a, b32, p, s.d, n) }, func(i int) Real { return Exactly(a[i]).Add(Exactly(float64(b32[i])).Negated()) })
		}
	}
}

type sliceTest struct {
	t    *testing.T
	p    *Point
	d    Draws
	name string
}

// checkSlice compares one operation, bits and counts.
func checkSlice[D Element](s sliceTest, first uint64, length int, do func([]D, *Counts), exact func(int) Real) {
	s.t.Helper()
	dst := make([]D, length)
	var got, want Counts
	do(dst, &got)
	for i, v := range dst {
		w, e := s.p.Round(exact(i), s.d.Word(first+uint64(i)))
		want.Count(e)
		if math.Float64bits(float64(v)) != math.Float64bits(w) {
			s.t.Fatalf("%v, %s: element %d: %v, want %v (of %+v)", *s.p, s.name, i, v, w, exact(i))
		}
	}
	if got != want {
		s.t.Fatalf("%v, %s: counts %+v, want %+v", *s.p, s.name, got, want)
	}
}

// TestSlicesOfBinary64: points of binary64, whose arithmetic is the machine's.
func TestSlicesOfBinary64(t *testing.T) {
	r := rand.New(rand.NewPCG(23, 24))
	for _, text := range []string{"fp64", "fp64 stochastic", "fp64 nearest-even saturate", "E11M40", "E10M20 up", "E10M45 stochastic(7)", "E10M46 stochastic(5,centred)", "E10M45 stochastic(6,centred-even)"} {
		p, err := ParsePoint(text)
		if err != nil {
			t.Fatal(err)
		}
		for range 20 {
			a, b := make([]float64, 50), make([]float64, 50)
			for i := range a {
				a[i], b[i] = anyFloat(r), anyFloat(r)
				if r.IntN(2) == 0 { // sums with a rest
					a[i], b[i] = r.NormFloat64(), r.NormFloat64()*math.Ldexp(1, -r.IntN(60))
				}
				if r.IntN(10) == 0 {
					a[i] = kindsOfData[7].draw(r)
				}
			}
			s := sliceTest{t: t, p: &p, d: Draws{Seed: 3}, name: text}
			checkSlice(s, 0, 50, func(dst []float64, n *Counts) { RoundSlice(dst, a, &p, s.d, 0, n) }, func(i int) Real { return Exactly(a[i]) })
			checkSlice(s, 0, 50, func(dst []float64, n *Counts) { ScaleSlice(dst, b[0], a, &p, s.d, n) }, func(i int) Real { return ExactProduct(b[0], a[i]) })
			checkSlice(s, 0, 50, func(dst []float64, n *Counts) { AddSlice(dst, a, b, &p, s.d, n) }, func(i int) Real { return Exactly(a[i]).Add(Exactly(b[i])) })
			checkSlice(s, 0, 50, func(dst []float64, n *Counts) { SubSlice(dst, a, b, &p, s.d, n) }, func(i int) Real { return Exactly(a[i]).Add(Exactly(b[i]).Negated()) })
		}
	}
}

// TestSlicesInPlace: the source may be the destination; nil counts are allowed.
func TestSlicesInPlace(t *testing.T) {
	x := []float32{0.1, -0.1, 70000, 1e-9, 0}
	p := Point{Format: Binary16}
	RoundSlice(x, x, &p, Draws{}, 0, nil)
	want := []float32{0.099975586, -0.099975586, float32(math.Inf(1)), 0, 0}
	for i := range x {
		if x[i] != want[i] {
			t.Errorf("element %d: %v, want %v", i, x[i], want[i])
		}
	}
}

// TestSignsOfZero pins what elementwise operations make of zeros.
func TestSignsOfZero(t *testing.T) {
	minus := math.Copysign(0, -1)
	for _, mode := range []string{"nearest-even", "down", "up", "to-odd", "stochastic"} {
		p, err := ParsePoint("fp16 " + mode)
		if err != nil {
			t.Fatal(err)
		}
		check := func(name string, got []float64, want float64) {
			t.Helper()
			if math.Float64bits(got[0]) != math.Float64bits(want) {
				t.Errorf("%s, %s: %v, want %v", mode, name, got[0], want)
			}
		}
		dst := []float64{7}
		RoundSlice(dst, []float64{minus}, &p, Draws{}, 0, nil)
		check("R(-0)", dst, minus)
		AddSlice(dst, []float64{1}, []float64{-1}, &p, Draws{}, nil)
		check("1 + -1", dst, 0)
		SubSlice(dst, []float64{0}, []float64{0}, &p, Draws{}, nil)
		check("0 - 0", dst, 0)
		SubSlice(dst, []float64{minus}, []float64{0}, &p, Draws{}, nil)
		check("-0 - 0", dst, minus)
		AddSlice(dst, []float64{minus}, []float64{minus}, &p, Draws{}, nil)
		check("-0 + -0", dst, minus)
		ScaleSlice(dst, -3, []float64{0}, &p, Draws{}, nil)
		check("-3 x 0", dst, minus)
	}
	p := Point{Format: Binary16}
	dst := []float64{7}
	RoundSlice(dst, []float64{-0x1p-30}, &p, Draws{}, 0, nil)
	if dst[0] != 0 || !math.Signbit(dst[0]) {
		t.Errorf("-2^-30 becomes %v", dst[0])
	}
}

// TestCanonicalNaN: whatever the payload, NaN leaves as the one canonical code.
func TestCanonicalNaN(t *testing.T) {
	src := []float32{math.Float32frombits(0xffffffff), math.Float32frombits(0x7f800001), math.Float32frombits(0x7fffffff)}
	for _, p := range slicePoints(t) {
		if !Fits32(p.Format) {
			continue
		}
		dst32, dst64 := make([]float32, 3), make([]float64, 3)
		RoundSlice(dst32, src, p, Draws{}, 0, nil)
		RoundSlice(dst64, src, p, Draws{}, 0, nil)
		for i := range src {
			if math.Float32bits(dst32[i]) != 0x7fc00000 || math.Float64bits(dst64[i]) != 0x7ff8000000000000 {
				t.Errorf("%v: NaN leaves as %08x and %016x", *p, math.Float32bits(dst32[i]), math.Float64bits(dst64[i]))
			}
		}
		acc := Accumulate{Product: p, Sum: *p}
		if acc.Check() != nil {
			continue
		}
		for _, order := range testOrders {
			acc.Order = order
			if got := dot(t, acc, src, []float32{1, 1, 1}); math.Float32bits(got) != 0x7fc00000 {
				t.Errorf("%v: NaN leaves as %08x", acc, math.Float32bits(got))
			}
		}
	}
}

// TestBinary16AgainstFloat16 compares with an independent implementation of
// binary16 (github.com/x448/float16): every code's value, and the rounding to
// nearest-even of every value, midpoint and neighbour, and of random binary32.
func TestBinary16AgainstFloat16(t *testing.T) {
	var src []float32
	for code := range 1 << 16 {
		x := float16.Frombits(uint16(code)).Float32()
		if v := Binary16.Decode(uint64(code)); !same(v, float64(x)) {
			t.Fatalf("code %04x is %v, want %v", code, v, x)
		}
		if x != x || math.IsInf(float64(x), 0) {
			continue
		}
		next := float16.Frombits(uint16(code + 1)).Float32()
		if code&0x7fff == 0x7bff {
			next = float32(math.Copysign(65536, float64(x)))
		}
		mid := x/2 + next/2
		src = append(src, x, mid, math.Nextafter32(mid, next), math.Nextafter32(mid, x), math.Nextafter32(x, next))
	}
	r := rand.New(rand.NewPCG(1, 1))
	for range 100000 {
		src = append(src, math.Float32frombits(r.Uint32()))
	}
	p := Point{Format: Binary16}
	dst := make([]float32, len(src))
	RoundSlice(dst, src, &p, Draws{}, 0, nil)
	for i, x := range src {
		want := float16.Fromfloat32(x).Float32()
		if !same(float64(dst[i]), float64(want)) {
			t.Fatalf("%x becomes %x, want %x", x, dst[i], want)
		}
	}
}

// TestSlicePanics: a programmer's mistakes in shapes and types.
func TestSlicePanics(t *testing.T) {
	p, wide := Point{Format: Binary16}, Point{Format: Binary64}
	for name, f := range map[string]func(){
		"lengths":        func() { RoundSlice(make([]float32, 2), make([]float32, 3), &p, Draws{}, 0, nil) },
		"lengths of sum": func() { AddSlice(make([]float32, 2), make([]float32, 2), make([]float32, 3), &p, Draws{}, nil) },
		"narrow result":  func() { RoundSlice(make([]float32, 2), make([]float64, 2), &wide, Draws{}, 0, nil) },
		"sticky sum":     func() { ExactQuotient(1, 3).Add(Exactly(1)) },
		"quotient":       func() { ExactQuotient(1, 0) },
		"short result": func() {
			m, _ := NewMultiplier[float32](Accumulate{Sum: p})
			m.Mul(Product[float32]{I: 2, J: 2, C: make([]float32, 3), B: Matrix[float32]{}}, nil, nil)
		},
	} {
		func() {
			defer func() {
				if recover() == nil {
					t.Errorf("%s: no panic", name)
				}
			}()
			f()
		}()
	}
}
