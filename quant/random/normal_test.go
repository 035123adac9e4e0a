package random

import (
	"math"
	"slices"
	"testing"

	"ulpine/quant/elementary/nofusion"
)

// Bounds below are mostly five standard deviations of the statistic; the
// streams are fixed, so the tests either always pass or never do.

// moments returns mean, variance, skewness and kurtosis (3 for a normal law).
func moments(x []float64) (mean, variance, skew, kurtosis float64) {
	n := float64(len(x))
	for _, v := range x {
		mean += v / n
	}
	var m3, m4 float64
	for _, v := range x {
		d := v - mean
		variance += d * d / n
		m3 += d * d * d / n
		m4 += d * d * d * d / n
	}
	return mean, variance, m3 / math.Pow(variance, 1.5), m4 / (variance * variance)
}

// kolmogorov returns sqrt(n) times the largest distance between the empirical
// distribution and cdf. Its limit law exceeds 1.95 once in a thousand (N. Smirnov
// 1948: 2 sum of (-1)^(k-1) exp(-2 k^2 x^2)).
func kolmogorov(x []float64, cdf func(float64) float64) float64 {
	sorted := slices.Sorted(slices.Values(x))
	n := float64(len(sorted))
	worst := 0.0
	for i, v := range sorted {
		p := cdf(v)
		worst = max(worst, float64(i+1)/n-p, p-float64(i)/n)
	}
	return worst * math.Sqrt(n)
}

func normalCDF(x float64) float64 { return math.Erfc(-x/math.Sqrt2) / 2 }

func draw(n int, f func(uint64) float64) []float64 {
	x := make([]float64, n)
	for i := range x {
		x[i] = f(uint64(i))
	}
	return x
}

func near(t *testing.T, what string, got, want, tolerance float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tolerance) {
		t.Errorf("%s: %.6f, want %.6f +- %.6f", what, got, want, tolerance)
	}
}

const sampleSize = 200000

// testDraws are streams that differ in every address field.
var testDraws = []Draws{
	{Seed: Derive(1, Data), Site: 3},
	{Seed: Derive(2, Weights), Step: 7, Site: 0x105, Phase: 2},
	{Seed: 0, Phase: 255},
}

func TestNormalMoments(t *testing.T) {
	root := math.Sqrt(sampleSize)
	for _, d := range testDraws {
		x := draw(sampleSize, d.Normal)
		mean, variance, skew, kurtosis := moments(x)
		near(t, "mean", mean, 0, 5/root)
		near(t, "variance", variance, 1, 5*math.Sqrt2/root)
		near(t, "skewness", skew, 0, 5*math.Sqrt(6)/root)
		near(t, "kurtosis", kurtosis, 3, 5*math.Sqrt(24)/root)
		if k := kolmogorov(x, normalCDF); k > 1.95 {
			t.Errorf("%+v: Kolmogorov-Smirnov statistic %.3f", d, k)
		}
	}
}

func TestUniformMoments(t *testing.T) {
	root := math.Sqrt(sampleSize)
	for _, d := range testDraws {
		x := draw(sampleSize, d.Uniform)
		mean, variance, _, kurtosis := moments(x)
		near(t, "mean", mean, 0.5, 5*math.Sqrt(1.0/12)/root)
		near(t, "variance", variance, 1.0/12, 5*math.Sqrt(1.0/180)/root)
		near(t, "kurtosis", kurtosis, 1.8, 0.02)
		if k := kolmogorov(x, func(v float64) float64 { return v }); k > 1.95 {
			t.Errorf("%+v: Kolmogorov-Smirnov statistic %.3f", d, k)
		}
		if slices.Min(x) < 0 || slices.Max(x) >= 1 {
			t.Errorf("%+v: draws outside [0, 1)", d)
		}
	}
}

// TestTestsCanFail: the statistic sees a variance off by two per cent.
func TestTestsCanFail(t *testing.T) {
	x := draw(sampleSize, func(n uint64) float64 { return 1.02 * testDraws[0].Normal(n) })
	if k := kolmogorov(x, normalCDF); k < 1.95 {
		t.Errorf("Kolmogorov-Smirnov statistic %.3f of a distorted sample", k)
	}
}

// TestNeighboursIndependent correlates draws of one block and of neighbouring
// blocks: products of independent standard normal draws have mean 0, variance 1.
func TestNeighboursIndependent(t *testing.T) {
	x := draw(sampleSize, testDraws[0].Normal)
	squares := make([]float64, len(x))
	for i, v := range x {
		squares[i] = v*v - 1
	}
	for lag := 1; lag <= 5; lag++ {
		sum, sumSquares := 0.0, 0.0
		for i := lag; i < len(x); i++ {
			sum += x[i] * x[i-lag]
			sumSquares += squares[i] * squares[i-lag]
		}
		near(t, "correlation", sum/sampleSize, 0, 5/math.Sqrt(sampleSize))
		near(t, "correlation of squares", sumSquares/sampleSize, 0, 10/math.Sqrt(sampleSize))
	}
}

// TestUniformWords holds Uniform to the words its comment names.
func TestUniformWords(t *testing.T) {
	d := testDraws[1]
	for _, n := range []uint64{0, 1, 2, 3, 17, 1 << 33, 1<<33 + 1, 1<<62 + 5} {
		a, b := d.Word(2*n), d.Word(2*n+1)
		want := (float64(a>>5)*(1<<26) + float64(b>>6)) / (1 << 53)
		if got := d.Uniform(n); got != want {
			t.Errorf("Uniform(%d) = %x, want %x", n, got, want)
		}
	}
}

// TestUniformExtremes: all ones stays below 1, all zeros is 0.
func TestUniformExtremes(t *testing.T) {
	if got := uniform(math.MaxUint32, math.MaxUint32); got != 1-0x1p-53 {
		t.Errorf("all ones give %x", got)
	}
	if got := uniform(31, 63); got != 0 {
		t.Errorf("bits that are not used give %x", got)
	}
}

// TestNormalGolden pins the bits, so that a machine that differs fails. Recorded
// from this code; the moments above and the comparison below say they are right.
func TestNormalGolden(t *testing.T) {
	d := Draws{Seed: 0x0123456789ABCDEF, Step: 1, Site: 2, Phase: 3}
	for n, want := range goldenNormal {
		got := d.Normal(uint64(n))
		if math.Float64bits(got) != want {
			t.Errorf("Normal(%d) = %x (%#016x), want %#016x", n, got, math.Float64bits(got), want)
		}
		// The same by the standard library, which may differ in the last bits.
		u, v := d.Uniform(uint64(n&^1)), d.Uniform(uint64(n|1))
		radius := math.Sqrt(-2 * math.Log1p(-u))
		sin, cos := math.Sincos(2 * math.Pi * v)
		near(t, "Box-Muller", got, radius*[]float64{cos, sin}[n&1], 1e-14)
	}
	h := uint64(14695981039346656037) // FNV-1a over the bits of many draws
	for n := range uint64(10000) {
		h = (h ^ math.Float64bits(d.Normal(n))) * 1099511628211
	}
	if h != goldenNormalHash {
		t.Errorf("hash of 10000 draws %#016x, want %#016x", h, uint64(goldenNormalHash))
	}
}

var goldenNormal = [8]uint64{
	0x3FE151F63B1AF87C, 0x3FFC67A2CC75D796, 0x3FE23B491208DB41, 0xBFE9101BC4E10E70,
	0xBFC680346835A0F3, 0x3FD2767D7E3736CE, 0xBFD976C29E742450, 0xBFF6B46DC35EB3F5,
}

const goldenNormalHash = 0xC39ECD291FE0A2A6

func BenchmarkNormal(b *testing.B) {
	d := testDraws[0]
	n := uint64(0)
	for b.Loop() {
		sink += d.Normal(n)
		n++
	}
}

var sink float64

// TestNoFusion reads the source of the draws.
func TestNoFusion(t *testing.T) {
	faults, products, err := nofusion.Check("normal.go")
	if err != nil || len(faults) > 0 || products < 5 {
		t.Errorf("%d products seen, faults %q, error %v", products, faults, err)
	}
}
