package quant

import (
	"math"
	"math/big"
	"testing"
)

// TestFewRandomBits: the probability of rounding up with N = 2 random bits at the
// fractions 1/8, 3/8 and 7/8 of the gap, and the mean bias over a grid of finer
// fractions, for the three variants (IEEE P3109 interim report 4.0, section 4.7.4,
// after Fitzgibbon and Felix, ARITH 2025; the biases recomputed). The centred rule
// there adds half a unit of the last random bit: floor(2^(N+1) f) + 2R + 1 >=
// 2^(N+1) is floor(2^N f + 1/2) + R >= 2^N.
func TestFewRandomBits(t *testing.T) {
	const n = 2
	up := map[Variant][3]float64{
		Truncated:   {0, 0.25, 0.75},
		Centred:     {0.25, 0.5, 1},
		CentredEven: {0, 0.5, 1},
	}
	for v, want := range up {
		r := Rounding{Mode: Stochastic, Bits: n, Variant: v}
		for i, eighths := range []uint64{1, 3, 7} {
			if got := probability(r, Bracket{Fraction: eighths << 61}); got != want[i] {
				t.Errorf("%v at %d/8: up with probability %v, want %v", r, eighths, got, want[i])
			}
		}
	}
	// Bias in gaps over fractions uniform on a grid of b bits, b > N.
	for b := n + 1; b <= 10; b++ {
		for v, want := range map[Variant]float64{
			Truncated: -0.5 * (math.Ldexp(1, -n) - math.Ldexp(1, -b)), Centred: 0.5 * math.Ldexp(1, -b), CentredEven: 0,
		} {
			r := Rounding{Mode: Stochastic, Bits: n, Variant: v}
			bias := 0.0
			for i := range uint64(1) << b {
				bias += probability(r, Bracket{Fraction: i << (64 - b), Exact: i == 0}) - math.Ldexp(float64(i), -b)
			}
			if bias = math.Ldexp(bias, -b); math.Abs(bias-want) > 1e-12 {
				t.Errorf("%v, %d-bit fractions: bias %v, want %v", r, b, bias, want)
			}
		}
	}
	// With as many random bits as the fraction has, all are unbiased.
	for v := range up {
		r := Rounding{Mode: Stochastic, Bits: 8, Variant: v}
		for i := range uint64(256) {
			if got := probability(r, Bracket{Fraction: i << 56, Exact: i == 0}); got != float64(i)/256 {
				t.Errorf("%v at %d/256: %v", r, i, got)
			}
		}
	}
}

// probability goes through all random numbers.
func probability(r Rounding, b Bracket) float64 {
	up := 0
	for u := range uint32(1) << r.Bits {
		if r.away(b, false, u<<(32-r.Bits)) {
			up++
		}
	}
	return math.Ldexp(float64(up), -int(r.Bits))
}

// TestOneFractionalBit: 0.2 lies 0.4 of the gap between 0 and 0.5: stochastic
// rounding to one fractional bit goes down 60 % of the time, up 40 %, and has the
// mean 0.2 (common practice).
func TestOneFractionalBit(t *testing.T) {
	f := mustFormat(t, "E0M3(bias=-1,top=finite)") // multiples of 2^(1-bias-3)
	if f.Limits().MinSubnormal != 0.5 {
		t.Fatalf("the grid is %v", f.Limits().MinSubnormal)
	}
	p := Point{Format: f, Rounding: Rounding{Mode: Stochastic, Bits: 32}}
	const n = 100000
	src, dst := make([]float64, n), make([]float64, n)
	for i := range src {
		src[i] = 0.2
	}
	RoundSlice(dst, src, &p, Draws{Seed: 42}, 0, nil)
	up, sum := 0, 0.0
	for _, v := range dst {
		if v != 0 && v != 0.5 {
			t.Fatalf("0.2 became %v", v)
		}
		if v > 0 {
			up++
		}
		sum += v
	}
	near(t, "share of up", float64(up)/n, 0.4, math.Sqrt(0.4*0.6/n))
	near(t, "mean", sum/n, 0.2, 0.5*math.Sqrt(0.4*0.6/n))
}

// near checks a statistic against its expectation within 4 standard errors.
func near(t *testing.T, name string, got, want, se float64) {
	t.Helper()
	if math.Abs(got-want) > 4*se {
		t.Errorf("%s: %v is %.1f standard errors from %v", name, got, (got-want)/se, want)
	}
}

// TestStochasticMeans: over formats, variants with enough bits and values, the mean
// of many roundings is the value within 4 standard errors, and so is the mean of
// stochastic sums of terms that nearest-even loses entirely.
func TestStochasticMeans(t *testing.T) {
	const n = 40000
	dst, src := make([]float32, n), make([]float32, n)
	for _, text := range []string{"bf16 stochastic", "fp16 stochastic(32)", "E4M3 stochastic(12,centred)", "E5M2 stochastic(16,centred-even)"} {
		p, err := ParsePoint(text)
		if err != nil {
			t.Fatal(err)
		}
		for step, x := range []float32{1.01, -1.99, 0.3001, 3.1e-5, 100.7, -0.0041} {
			for i := range src {
				src[i] = x
			}
			RoundSlice(dst, src, &p, Draws{Seed: 7, Step: uint32(step)}, 0, nil)
			mean, square := 0.0, 0.0
			for _, v := range dst {
				mean += float64(v) / n
				square += float64(v) * float64(v) / n
			}
			se := math.Sqrt(math.Max(square-mean*mean, 0)/n) + 1e-9*math.Abs(float64(x))
			// The truncated variants may lean toward zero by half of 2^-r of a gap.
			gap := math.Abs(float64(dst[0])) * math.Ldexp(1, -p.Format.(Float).fraction)
			near(t, text, mean, float64(x), se+gap*math.Ldexp(1, -int(p.Rounding.Bits)))
		}
	}
}

// TestStochasticSumsDoNotStagnate: bf16 1 + 1000 x 2^-12 is 1.244 exactly. Rounded
// to nearest it stays 1; stochastically its mean over results is right, with the
// standard deviation of independent roundings (theory: 0.043; 200 runs of an
// independent program: mean 1.2407, sd 0.045).
func TestStochasticSumsDoNotStagnate(t *testing.T) {
	const k, i, j = 1001, 10, 60
	a, b := make([]float32, k), ones(k*j)
	for n := range a {
		a[n] = 0x1p-12
	}
	a[0] = 1
	c := make([]float32, i*j)
	for _, text := range []string{"product exact; sum bf16 stochastic(8)", "product bf16; sum bf16 stochastic; through binary32"} {
		m, err := NewMultiplier[float32](mustAccumulate(t, text))
		if err != nil {
			t.Fatal(err)
		}
		m.Mul(Product[float32]{
			I: i, J: j, K: k, A: Matrix[float32]{a, 0, 1}, B: Matrix[float32]{b, j, 1}, C: c,
			Sums: Streams{Draws{Seed: 3, Site: 1}, Draws{Seed: 3, Site: 2}},
		}, nil, nil)
		mean, square := 0.0, 0.0
		for _, v := range c {
			mean += float64(v) / (i * j)
			square += float64(v) * float64(v) / (i * j)
		}
		sd := math.Sqrt(square - mean*mean)
		near(t, text+": mean", mean, 1+1000*0x1p-12, 0.043/math.Sqrt(i*j))
		near(t, text+": standard deviation", sd, 0.043, 0.043/math.Sqrt(2*i*j))
	}
	if got := dot(t, mustAccumulate(t, "sum bf16"), a, ones(k)); got != 1 {
		t.Errorf("nearest-even: %v, want 1", got)
	}
	// Too few random bits to see 1/32 of a gap: truncated never moves, centred
	// moves with probability 1/16 (computed: 1.488).
	for text, want := range map[string]float32{"sum bf16 stochastic(4)": 1, "sum bf16 stochastic(3,centred-even)": 1} {
		if got := dot(t, mustAccumulate(t, text), a, ones(k)); got != want {
			t.Errorf("%s: %v, want %v", text, got, want)
		}
	}
}

// TestStochasticFrequencies: near 0 and near 1 of the gap, how often sums round
// away is the fraction's share of all 16-bit numbers, over many results.
func TestStochasticFrequencies(t *testing.T) {
	const i, j = 100, 400
	m, err := NewMultiplier[float32](mustAccumulate(t, "product exact; sum bf16 stochastic"))
	if err != nil {
		t.Fatal(err)
	}
	c, b := make([]float32, i*j), ones(j)
	for n, f := range []float64{1.0 / 256, 1.0 / 16, 0.5, 15.0 / 16, 255.0 / 256} {
		a := make([]float32, i)
		for r := range a {
			a[r] = float32(1 + f*0x1p-7)
		}
		m.Mul(Product[float32]{
			I: i, J: j, K: 1, A: Matrix[float32]{a, 1, 1}, B: Matrix[float32]{b, j, 1}, C: c,
			Sums: Streams{Draws{Seed: 9, Step: uint32(n), Site: 1}, Draws{Seed: 9, Step: uint32(n), Site: 2}},
		}, nil, nil)
		up := 0
		for _, v := range c {
			if v > 1 {
				up++
			}
		}
		near(t, "share of up", float64(up)/(i*j), f, math.Sqrt(f*(1-f)/(i*j)))
	}
}

// TestThresholdAgainstRationals: T of all variants and random bits against floor
// and nearest-even of f 2^r in integers of math/big.
func TestThresholdAgainstRationals(t *testing.T) {
	for _, fraction := range []uint64{1, 1 << 31, 1<<31 | 1, 1 << 32, 1<<32 | 1<<31, 1 << 62, 1 << 63, 1<<63 - 1, 3 << 62, math.MaxUint64, 0x123456789abcdef0} {
		for _, rest := range []bool{false, true} {
			for bits := uint8(1); bits <= 32; bits++ {
				b := Bracket{Fraction: fraction, Rest: rest}
				// f in units of 2^-65, the rest being half of the last but one.
				over := new(big.Int).Lsh(new(big.Int).SetUint64(fraction), 1)
				if rest {
					over.Add(over, big.NewInt(1))
				}
				at := place{over: over, gap: new(big.Int).Lsh(big.NewInt(1), 65)}
				for v := Truncated; v <= CentredEven; v++ {
					r := Rounding{Mode: Stochastic, Bits: bits, Variant: v}
					for _, word := range testWords {
						if got, want := r.away(b, false, word), awayFromZero(at, false, r, word); got != want {
							t.Fatalf("%v, fraction %x rest %v, word %08x: %v", r, fraction, rest, word, got)
						}
					}
				}
			}
		}
	}
}
