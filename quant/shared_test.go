package quant

import (
	"math"
	"math/big"
	"math/rand/v2"
	"testing"
)

func mustShared(t testing.TB, name string) Blocked {
	t.Helper()
	f, err := ParseFormat(name)
	if err != nil {
		t.Fatal(err)
	}
	return f.(Blocked)
}

// TestBlockExample: one short block in the four kinds of element, codes and scale by
// the floor rule, recomputed with exact rationals outside of this project. 7.9 is
// beyond the largest element in E4M3 and E2M1: the floor rule loses the maximum.
func TestBlockExample(t *testing.T) {
	v := []float64{1, -0.5, 0.3, 7.9, 0.01, -3.1, 0, 2.5}
	for _, c := range []struct {
		name  string
		scale uint64
		codes []uint64
	}{
		{"MXFP8(E4M3)", 0x79, []uint64{0x68, 0xe0, 0x5a, 0x7e, 0x32, 0xf4, 0, 0x72}},
		{"MXFP4", 0x7f, []uint64{2, 9, 1, 7, 0, 0xd, 0, 4}},
		{"MXFP6(E2M3)", 0x7f, []uint64{8, 0x24, 2, 0x1f, 0, 0x34, 0, 0x12}},
		{"MXINT8", 0x81, []uint64{0x10, 0xf8, 5, 0x7e, 0, 0xce, 0, 0x28}},
	} {
		b := mustShared(t, c.name).(Block)
		p := Point{Format: b}
		scale, codes, ok := b.EncodeBlock(v, Scaling{Factor: 1}, &p, nil)
		if !ok || scale != c.scale {
			t.Errorf("%s: scale %x %v, want %x", c.name, scale, ok, c.scale)
		}
		for i := range codes {
			if codes[i] != c.codes[i] {
				t.Errorf("%s: %v has code %x, want %x", c.name, v[i], codes[i], c.codes[i])
			}
		}
	}
}

// TestBlockBits: bits per value, the scale shared by a full block.
func TestBlockBits(t *testing.T) {
	for name, want := range map[string]float64{"MXFP4": 4.25, "MXFP8": 8.25, "MXFP6(E2M3)": 6.25, "MXINT8": 8.25, "MXFP4(block=16,scale=E4M3)": 4.5} {
		if got := mustShared(t, name).(Block).BitsPerValue(); got != want {
			t.Errorf("%s: %v bits per value, want %v", name, got, want)
		}
	}
}

// sharedNames are block formats of many kinds.
var sharedNames = []string{
	"MXFP8(E4M3)", "MXFP8(E5M2)", "MXFP6(E3M2)", "MXFP6(E2M3,block=5)", "MXFP4(block=4)", "MXINT8(block=7)",
	"MXFP4(block=4,rule=up)", "MXFP8(E4M3,rule=nearest,block=3)", "MXFP4(rule=least-error,block=8)", "MXINT8(rule=least-error,block=8)",
	"MXFP4(block=16,scale=E4M3,rule=nearest,tensor=binary32)", "MXFP4(block=6,scale=E4M3,rule=least-error,tensor=binary32)",
	"block(E3M4,block=4,scale=E5M2,rule=up)", "block(Q4.0,block=4,scale=E5M3,rule=nearest)", "block(posit8,block=8)",
	"block(table(-1,-0.25,0,0.25,1),block=4,rule=up)",
}

// ratScale is the scale of a block in rationals: of all positive scales, listed, the
// one that the rule names.
func ratScale(b Block, scales []float64, block []float64, tensor *big.Rat) float64 {
	s := b.Spec()
	m := new(big.Rat)
	for _, v := range block {
		if a := math.Abs(v); v-v == 0 && m.Cmp(exactOf(a)) < 0 {
			m = exactOf(a)
		}
	}
	m.Quo(m, tensor)
	last := 0 // the largest scale in use
	limit := exactOf(math.MaxFloat32)
	e := s.Element.Limits()
	for i, x := range scales {
		if new(big.Rat).Mul(exactOf(x), exactOf(max(e.Max, -e.Lowest))).Cmp(limit) <= 0 {
			last = i
		}
	}
	scales = scales[:last+1]
	if m.Sign() == 0 {
		m = exactOf(1)
		return nearestScale(scales, m)
	}
	most := exactOf(e.Max)
	floor := power(log2Floor(m) - log2Floor(most))
	full := new(big.Rat).Quo(m, most)
	lo, hi := scales[0], scales[last]
	for _, x := range scales {
		if exactOf(x).Cmp(floor) <= 0 {
			lo = x
		}
	}
	for i := last; i >= 0; i-- {
		if exactOf(scales[i]).Cmp(full) >= 0 {
			hi = scales[i]
		}
	}
	switch s.Rule {
	case ScaleFloor:
		return lo
	case ScaleUp:
		return hi
	case ScaleNearest:
		return nearestScale(scales, full)
	}
	best, least := lo, math.Inf(1)
	factor, _ := tensor.Float64()
	for _, x := range scales {
		if x < lo || x > hi {
			continue
		}
		sum := 0.0
		for _, v := range block {
			if v-v != 0 {
				continue
			}
			q := new(big.Rat).Quo(exactOf(v), new(big.Rat).Mul(exactOf(x), tensor))
			r := nearestElement(s.Element, q)
			d := v - float64(r*float64(x*factor))
			sum += float64(d * d)
		}
		if sum < least {
			best, least = x, sum
		}
	}
	return best
}

// log2Floor returns floor(log2 x) of a positive rational.
func log2Floor(x *big.Rat) int {
	e := x.Num().BitLen() - x.Denom().BitLen()
	if power(e).Cmp(x) > 0 {
		e--
	}
	return e
}

// nearestScale is the nearest of ascending scales, of two the one with an even code,
// which is that of an even place in formats without zero and of an odd one in others.
func nearestScale(scales []float64, x *big.Rat) float64 {
	best := 0
	for i := range scales {
		d := new(big.Rat).Sub(exactOf(scales[i]), x)
		c := d.Abs(d).Cmp(new(big.Rat).Abs(new(big.Rat).Sub(exactOf(scales[best]), x)))
		even := i%2 == 1
		if scales[0] == 0x1p-127 {
			even = i%2 == 0
		}
		if c < 0 || c == 0 && even {
			best = i
		}
	}
	return scales[best]
}

// nearestElement rounds a rational to the nearest value of an element format, the
// code telling even, saturating.
func nearestElement(f Format, x *big.Rat) float64 {
	best, code := math.NaN(), uint64(0)
	var least *big.Rat
	for c := range uint64(1) << f.Limits().Bits {
		v := f.(Coded).Decode(c)
		if v-v != 0 {
			continue
		}
		d := new(big.Rat).Sub(exactOf(v), x)
		d.Abs(d)
		if least == nil || d.Cmp(least) < 0 || d.Cmp(least) == 0 && code&1 == 1 {
			best, code, least = v, c, d
		}
	}
	return best
}

// positiveValues lists the positive values of a scale format.
func positiveValues(f Format) []float64 {
	var all []float64
	for c := range uint64(1) << f.Limits().Bits {
		if v := f.(Coded).Decode(c); v > 0 && v <= math.MaxFloat64 {
			all = append(all, v)
		}
	}
	return all
}

// TestBlocksAgainstRationals: scales of every rule and elements to nearest-even,
// along the lines of a tensor, under the scale of the tensor.
func TestBlocksAgainstRationals(t *testing.T) {
	r := rand.New(rand.NewPCG(61, 62))
	for _, name := range sharedNames {
		b := mustShared(t, name).(Block)
		p := Point{Format: b}
		if err := p.CheckOperand(); err != nil {
			t.Fatal(err)
		}
		scales := positiveValues(b.Spec().Scale)
		for round := range 6 {
			line := make([]float64, 1+r.IntN(20))
			for i := range line {
				line[i] = float64(float32(math.Ldexp(r.NormFloat64(), r.IntN(12)-6)))
				switch r.IntN(12) {
				case 0:
					line[i] = 0
				case 1:
					line[i] = math.Ldexp(1, r.IntN(8))
				}
				if round == 1 {
					line[i] = math.Ldexp(line[i], -130) // small scales
				}
			}
			s := b.Scaling(line)
			got := append([]float64(nil), line...)
			b.RoundLine(got, s, &p, nil, nil)
			size := b.Spec().Size
			for at := 0; at < len(line); at += size {
				block := line[at:min(at+size, len(line))]
				x := ratScale(b, scales, block, exactOf(s.Factor))
				for i, v := range block {
					q := new(big.Rat).Quo(exactOf(v), new(big.Rat).Mul(exactOf(x), exactOf(s.Factor)))
					want := nearestElement(b.Spec().Element, q) * x
					if _, never := b.Spec().Element.(Posit); never && v != 0 && want == 0 {
						want = math.Copysign(0x1p-24*x, v)
					} else if never {
						e := Point{Format: Posit{8}} // its ties are held elsewhere
						r, _ := e.Round(ExactQuotient(v, float64(x*s.Factor)), 0)
						want = r * x
					}
					if got[at+i] != want {
						t.Fatalf("%s, factor %v, scale %v: %v -> %v, want %v (block %v)", name, s.Factor, x, v, got[at+i], want, block)
					}
				}
			}
		}
	}
}

// TestTensorScale: two levels, worked by hand. The largest magnitude, 2688, over 6 x
// 448 is 1; block scales are the nearest E4M3 numbers to m/6.
func TestTensorScale(t *testing.T) {
	p := Point{Format: mustShared(t, "MXFP4(block=2,scale=E4M3,rule=nearest,tensor=binary32)")}
	src := []float32{2688, 1344, 6.6, 3, -0.01, 0.001}
	dst := make([]float32, len(src))
	if f := RoundTensor(dst, src, Shape{1, 6, 1}, &p, Draws{}, 0, nil); f != 1 {
		t.Errorf("factor %v", f)
	}
	// 6.6/6 = 1.1 -> 1.125; 6.6/1.125 = 5.87 -> 6; 3/1.125 = 2.67 -> 3. 0.01/6 = 0.00167
	// -> 2^-9 = 0.00195; 0.01/2^-9 = 5.12 -> 6; 0.001/2^-9 = 0.512 -> 0.5.
	for i, want := range []float32{2688, 1344, 6.75, 3.375, -6 * 0x1p-9, 0.5 * 0x1p-9} {
		if dst[i] != want {
			t.Errorf("%v -> %v, want %v", src[i], dst[i], want)
		}
	}
	for i := range src {
		src[i] *= 0x1p-20
	}
	again := make([]float32, len(src))
	if f := RoundTensor(again, src, Shape{1, 6, 1}, &p, Draws{}, 0, nil); f != 0x1p-20 {
		t.Errorf("factor %v", f)
	}
	for i := range dst {
		if again[i] != dst[i] {
			t.Errorf("scaled by 2^-20: %v became %v, want %v", src[i], again[i], dst[i])
		}
	}
}

// TestBlockAxes: blocks run along the axis of the shape and start anew in each line.
func TestBlockAxes(t *testing.T) {
	r := rand.New(rand.NewPCG(63, 64))
	b := mustShared(t, "MXFP4(block=3)")
	p := Point{Format: b, Rounding: Rounding{Mode: Stochastic, Bits: 8}}
	shape := Shape{2, 7, 3}
	src, dst := make([]float32, 42), make([]float32, 42)
	for i := range src {
		src[i] = float32(math.Ldexp(r.NormFloat64(), r.IntN(9)))
	}
	d := Draws{Seed: 5, Site: 77}
	var n Counts
	RoundTensor(dst, src, shape, &p, d, 1000, &n)
	var want Counts
	for outer := range 2 {
		for inner := range 3 {
			var line []float64
			var word []uint32
			for k := range 7 {
				at := (outer*7+k)*3 + inner
				line, word = append(line, float64(src[at])), append(word, d.Word(1000+uint64(at)))
			}
			b.RoundLine(line, Scaling{Factor: 1}, &p, word, &want)
			for k, v := range line {
				if got := dst[(outer*7+k)*3+inner]; float64(got) != v {
					t.Fatalf("line %d %d, element %d: %v, want %v", outer, inner, k, got, v)
				}
			}
		}
	}
	if n != want || n == (Counts{}) {
		t.Errorf("events %+v, want %+v", n, want)
	}
}

// TestBlockSpecials: zeros keep their sign, infinities and NaN stay out of the scale
// and follow the policy of the elements; terms of the largest numbers stay finite.
func TestBlockSpecials(t *testing.T) {
	inf, nan := math.Inf(1), math.NaN()
	round := func(name string, o Overflow, x ...float64) []float64 {
		p := Point{Format: mustShared(t, name), Overflow: o}
		if err := p.CheckOperand(); err != nil {
			t.Fatal(err)
		}
		p.Format.(Blocked).RoundLine(x, Scaling{Factor: 1}, &p, nil, nil)
		return x
	}
	for _, c := range []struct{ got, want []float64 }{
		{round("MXFP4", FormatDefault, 0, math.Copysign(0, -1)), []float64{0, math.Copysign(0, -1)}},
		{round("MXFP4", FormatDefault, inf, 1, -inf, nan), []float64{1.5, 1, -1.5, nan}}, // scale 1/4
		{round("MXFP4", ToNaN, inf, 1), []float64{nan, 1}},
		{round("MXFP8(E5M2)", ToInfinity, inf, 1, -inf), []float64{inf, 1, -inf}},
		{round("MXFP8(E4M3)", FormatDefault, inf, 0), []float64{448, 0}},
	} {
		for i := range c.want {
			if !same(c.got[i], c.want[i]) {
				t.Errorf("%v, want %v", c.got, c.want)
			}
		}
	}
	for _, name := range []string{"MXFP8(E4M3)", "MXFP8(E5M2)", "MXFP6", "MXFP4", "MXINT8", "MXFP8(rule=up)", "MXINT8(rule=up)", "MXFP4(rule=least-error)"} {
		p := Point{Format: mustShared(t, name)}
		src := []float32{math.MaxFloat32, -math.MaxFloat32, math.SmallestNonzeroFloat32, 1}
		dst := make([]float32, 4)
		RoundTensor(dst, src, Shape{1, 4, 1}, &p, Draws{}, 0, nil)
		RoundTensor(dst[2:3], src[2:3], Shape{1, 1, 1}, &p, Draws{}, 0, nil)
		if !finite(dst) || dst[0] < 1e38 || dst[1] > -1e38 {
			t.Errorf("%s: %v becomes %v", name, src, dst)
		}
	}
	if mustShared(t, "MXFP4(scale=fp32,rule=up)").Limits().Binary32 || !mustShared(t, "MXFP8(E5M2)").Limits().Binary32 {
		t.Error("which terms are binary32 numbers")
	}
}

// TestSharedRefused: points that round one number at a time refuse such formats.
func TestSharedRefused(t *testing.T) {
	for _, name := range []string{"MXFP4", "INT8"} {
		p := Point{Format: mustShared(t, name)}
		if p.Check() == nil || p.CheckOperand() != nil {
			t.Errorf("%s: %v, %v", name, p.Check(), p.CheckOperand())
		}
		func() {
			defer func() {
				if recover() == nil {
					t.Errorf("%s: RoundSlice does not panic", name)
				}
			}()
			RoundSlice(make([]float32, 1), []float32{1}, &p, Draws{}, 0, nil)
		}()
	}
}
