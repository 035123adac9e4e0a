package quant

import (
	"math"
	"math/big"
	"slices"
	"sync"
	"testing"
)

// smallFormats are formats of at most 8 bits of every scalar family.
func smallFormats(t testing.TB) []*listed {
	return []*listed{
		listFloat(t, "E4M3", 4, 3, 7, TopNaNOnly, Saturate),
		listFloat(t, "E4M3(overflow=nan)", 4, 3, 7, TopNaNOnly, ToNaN),
		listFloat(t, "E4M3(top=ieee)", 4, 3, 7, TopIEEE, ToInfinity),
		listFloat(t, "E5M2", 5, 2, 15, TopIEEE, Saturate),
		listFloat(t, "E5M2(overflow=infinity)", 5, 2, 15, TopIEEE, ToInfinity),
		listFloat(t, "E3M2", 3, 2, 3, TopFinite, Saturate),
		listFloat(t, "E2M3", 2, 3, 1, TopFinite, Saturate),
		listFloat(t, "E2M1", 2, 1, 1, TopFinite, Saturate),
		listFixed(t, "Q2.6", 8, 6, false),
		listFixed(t, "UQ0.8", 8, 8, true),
		listFixed(t, "Q5.0", 5, 0, false),
		listPosit(t, 3),
		listPosit(t, 6),
		listPosit(t, 8),
		listLog(t, 4, 3),
		listLog(t, 3, 0),
		listDraft(t, 8, 4),
		listDraft(t, 8, 3),
		listDraft(t, 5, 1),
		listPowers(t),
		listTable(t, -1, -0.6961928, -0.5250731, -0.39491749, -0.28444138, -0.18477343, -0.09105004, 0,
			0.0795803, 0.1609302, 0.2461123, 0.33791524, 0.44070983, 0.562617, 0.72295684, 1),
		listTable(t, -1, 1),
		listTable(t, 0.5, 0.75, 3),
		listTable(t, -3, -2, 0x1p-30, 7),
		listADC(t, "ADC5(from=-40,to=85)", 5, -40, 85),
		listADC(t, "ADC8(from=-3.3,to=3.3)", 8, -3.3, 3.3),
	}
}

// wideFormats have 16 bits; listed once.
func wideFormats(t testing.TB) []*listed {
	wide.Do(func() {
		wideLists = []*listed{
			listFixed(t, "Q2.14", 16, 14, false),
			listFixed(t, "UQ0.16", 16, 16, true),
			listPosit(t, 16),
			listLog(t, 5, 10),
		}
	})
	return wideLists
}

var (
	wide      sync.Once
	wideLists []*listed
)

// TestSuiteCodes: every code of every family decodes to the value of its definition,
// and every value, special and zero encodes to its code. binary16 and bfloat16 are
// among them here.
func TestSuiteCodes(t *testing.T) {
	all := slices.Concat(smallFormats(t), wideFormats(t))
	all = append(all, listFloat(t, "fp16", 5, 10, 15, TopIEEE, ToInfinity), listFloat(t, "bf16", 8, 7, 127, TopIEEE, ToInfinity))
	for _, l := range all {
		codes := map[uint64]bool{}
		check := func(code uint64, want float64, canonical bool) {
			codes[code] = true
			if got := l.format.Decode(code); !same(got, want) {
				t.Errorf("%s: code %x is %v, want %v", l.name, code, got, want)
			}
			if back, ok := l.format.Encode(want); canonical && (!ok || back != code) {
				t.Errorf("%s: %v has code %x %v, want %x", l.name, want, back, ok, code)
			}
		}
		for _, e := range l.at {
			if e.inside {
				check(e.code, e.x, true)
			}
		}
		for code := range l.nan {
			check(code, math.NaN(), len(l.nan) == 1 && l.format.Limits().HasNaN)
		}
		for code, x := range l.infinite {
			check(code, x, true)
		}
		for code := range l.minusZero {
			check(code, math.Copysign(0, -1), true)
		}
		if bits := l.format.Limits().Bits; len(codes) != 1<<bits {
			t.Errorf("%s: %d codes known of %d", l.name, len(codes), 1<<bits)
		}
	}
}

// TestSuiteLimits: the extremes are those of the list.
func TestSuiteLimits(t *testing.T) {
	for _, l := range slices.Concat(smallFormats(t), wideFormats(t)) {
		least, most, positive, narrow := math.Inf(1), math.Inf(-1), math.Inf(1), true
		for _, e := range l.at {
			if e.inside {
				least, most = min(least, e.x), max(most, e.x)
				narrow = narrow && float64(float32(e.x)) == e.x
				if e.x > 0 {
					positive = min(positive, e.x)
				}
			}
		}
		f := l.format.Limits()
		if f.Max != most || f.Lowest != least || f.MinSubnormal != positive || f.Binary32 != narrow || f.HasInfinity != (len(l.infinite) > 0) {
			t.Errorf("%s: %+v, want %v to %v, least %v, binary32 %v", l.name, f, least, most, positive, narrow)
		}
	}
}

// suiteProbe is a real between two entries, i the number of the lower one or -1.
type suiteProbe struct {
	i int
	x Real
}

// suiteProbes are, for every gap and both ends, the lower value, the middle, the
// tie where the format has its own, their binary64 neighbours, and the middle with a
// rest cut off.
func (l *listed) suiteProbes() []suiteProbe {
	var all []suiteProbe
	put := func(i int, x Real) { all = append(all, suiteProbe{i, x}) }
	near := func(i int, lo, hi, x float64) {
		for _, y := range []float64{math.Nextafter(x, math.Inf(-1)), x, math.Nextafter(x, math.Inf(1))} {
			if x == 0 && y != 0 {
				y = math.Copysign(0x1p-300, y) // tiny, and not beyond the oracle's grain
			}
			if y >= lo && y < hi {
				put(i, Exactly(y))
			}
		}
	}
	for i := range len(l.at) - 1 {
		a, b := l.at[i].x, l.at[i+1].x
		near(i, a, b, a)
		if len(l.at) < 1000 {
			near(i, a, b, a+(b-a)/4)
		}
		near(i, a, b, b)
		middle := Exactly(a).Add(Exactly(b))
		if !middle.IsZero() {
			middle.Exp--
		}
		put(i, middle)
		if !middle.IsZero() && !middle.Neg {
			above := middle
			above.Sticky = true
			put(i, above)
		}
		near(i, a, b, (a+b)/2)
		if l.tie != nil && a > 0 && l.tie(l.at[i].code).Cmp(realGrains(middle)) != 0 {
			v, _ := new(big.Rat).SetFrac(l.tie(l.at[i].code), new(big.Int).Lsh(big.NewInt(1), grain)).Float64()
			near(i, a, b, v)
		}
	}
	last := len(l.at) - 1
	put(last, Exactly(math.Nextafter(l.at[last].x, math.Inf(1))))
	put(last, Exactly(4*math.Abs(l.at[last].x)))
	put(-1, Exactly(math.Nextafter(l.at[0].x, math.Inf(-1))))
	put(-1, Exactly(-4*math.Abs(l.at[0].x)))
	return all
}

// suiteRoundings are those of the package with the rounding of equal probability.
func suiteRoundings() []Rounding {
	return append(roundings(), Rounding{Mode: Stochastic, Bits: 1, Variant: Equal}, Rounding{Mode: Stochastic, Bits: 16, Variant: Equal})
}

// compare holds the reference to the list for a probe.
func (l *listed) compare(t *testing.T, p Point, probe suiteProbe, word uint32) {
	t.Helper()
	want, event := l.roundAt(probe.i, realGrains(probe.x), probe.x.Neg, p, word)
	got, e := p.Round(probe.x, word)
	if !same(got, want) || e != event {
		t.Fatalf("%v: %+v (word %08x): %v %d, want %v %d", p, probe.x, word, got, e, want, event)
	}
}

// TestSuiteRounding: every rounding and overflow policy of every small format over
// every value, quarter, middle, tie and their neighbours of every gap.
func TestSuiteRounding(t *testing.T) {
	for _, l := range smallFormats(t) {
		t.Run(l.name, func(t *testing.T) {
			t.Parallel()
			probes := l.suiteProbes()
			for _, r := range suiteRoundings() {
				for _, o := range []Overflow{FormatDefault, ToInfinity, Saturate, ToNaN} {
					p := Point{l.format, r, o}
					if p.Check() != nil {
						continue
					}
					for i, x := range probes {
						if o == FormatDefault || i < 20 || i >= len(probes)-20 {
							l.compare(t, p, x, testWords[i%len(testWords)])
						}
					}
				}
			}
		})
	}
}

// TestSuiteRounding16 does it for the formats of 16 bits: every gap to nearest-even,
// every 61st in the other roundings, from another start in each.
func TestSuiteRounding16(t *testing.T) {
	for _, l := range wideFormats(t) {
		t.Run(l.name, func(t *testing.T) {
			t.Parallel()
			probes := l.suiteProbes()
			step := 1
			if testing.Short() {
				step = 7
			}
			for i := 0; i < len(probes); i += step {
				l.compare(t, Point{Format: l.format}, probes[i], 0)
			}
			for n, r := range suiteRoundings()[1:] {
				for i := n; i < len(probes); i += 61 {
					l.compare(t, Point{Format: l.format, Rounding: r}, probes[i], testWords[i%len(testWords)])
				}
			}
		})
	}
}

// TestSuiteSpecials: NaN, infinities and zeros of both signs.
func TestSuiteSpecials(t *testing.T) {
	for _, l := range smallFormats(t) {
		lim := l.format.Limits()
		for _, o := range []Overflow{FormatDefault, ToInfinity, Saturate, ToNaN} {
			p := Point{Format: l.format, Overflow: o}
			if p.Check() != nil {
				continue
			}
			if o == FormatDefault {
				o = l.overflow
			}
			for _, neg := range []bool{false, true} {
				if v, e := p.Round(Real{Kind: NotANumber, Neg: neg}, 0); v == v || e != BecameNaN {
					t.Errorf("%v: NaN becomes %v %d", p, v, e)
				}
				want, event := math.NaN(), BecameNaN
				switch {
				case l.infinityNaN:
				case o == Saturate && neg:
					want, event = lim.Lowest, Saturated
				case o == Saturate:
					want, event = lim.Max, Saturated
				case o == ToInfinity:
					want, event = withSign(math.Inf(1), neg), NoEvent
				}
				if v, e := p.Round(Real{Kind: Infinite, Neg: neg}, 0); !same(v, want) || e != event {
					t.Errorf("%v: infinity (negative %v) becomes %v %d, want %v %d", p, neg, v, e, want, event)
				}
				want, event = l.round(new(big.Int), neg, p, 0)
				if v, e := p.Round(Real{Neg: neg}, 0); !same(v, want) || e != event {
					t.Errorf("%v: zero (negative %v) becomes %v %d, want %v %d", p, neg, v, e, want, event)
				}
			}
		}
	}
}

// TestSuitePairs: sums and products of every pair of finite values of every small
// format, to nearest-even and in another rounding that changes from pair to pair.
func TestSuitePairs(t *testing.T) {
	others := suiteRoundings()[1:]
	for _, l := range smallFormats(t) {
		t.Run(l.name, func(t *testing.T) {
			t.Parallel()
			step := 1
			if testing.Short() {
				step = 5
			}
			even := Point{Format: l.format}
			for i := range l.at {
				for j := i % step; j <= i; j += step {
					a, b := l.at[i], l.at[j]
					if !a.inside || !b.inside {
						continue
					}
					sum := new(big.Int).Add(a.v, b.v)
					product := new(big.Int).Mul(a.v, b.v)
					product = shiftInt(product, -grain)
					other := Point{Format: l.format, Rounding: others[(i+3*j)%len(others)]}
					word := testWords[(i+j)%len(testWords)]
					for _, p := range []Point{even, other} {
						l.compareSum(t, p, Exactly(a.x).Add(Exactly(b.x)), sum, word)
						l.compareSum(t, p, ExactProduct(a.x, b.x), product, word)
					}
				}
			}
		})
	}
}

// compareSum holds the rounding of x to that of v, which it is exactly.
func (l *listed) compareSum(t *testing.T, p Point, x Real, v *big.Int, word uint32) {
	t.Helper()
	want, event := l.round(v, x.Neg, p, word)
	if got, e := p.Round(x, word); !same(got, want) || e != event {
		t.Fatalf("%v: %+v (word %08x): %v %d, want %v %d", p, x, word, got, e, want, event)
	}
}
