package compare

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"pgregory.net/rapid"
)

// sleep is Student's example: additional hours of sleep by the second of two
// drugs over the first, ten patients (Biometrika 6, 1908, 1-25; the differences
// as in R's data set "sleep").
var sleep = []float64{1.2, 2.4, 1.3, 1.3, 0, 1, 1.8, 0.8, 4.6, 1.4}

func near(t *testing.T, what string, got, want, tolerance float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tolerance) {
		t.Errorf("%s: %v, want %v within %v", what, got, want, tolerance)
	}
}

// TestStudentsSleep holds mean, SD, t interval and p-value to what R's
// t.test(extra ~ group, paired = TRUE) prints for this data (from memory):
// t = 4.0621, df = 9, p-value = 0.002833, 95 % interval 0.7001142 to 2.4598858,
// mean 1.58; Student himself has mean 1.58 and, with divisor n, SD 1.17.
func TestStudentsSleep(t *testing.T) {
	m, sd := mean(sleep), deviation(sleep)
	near(t, "mean", m, 1.58, 1e-12)
	near(t, "Student's SD", sd*math.Sqrt(0.9), 1.17, 0.005)
	near(t, "t", m/(sd/math.Sqrt(10)), 4.0621, 5e-5)
	low, high := interval(m, sd, 10, 0.95)
	near(t, "low", low, 0.7001142, 5e-8)
	near(t, "high", high, 2.4598858, 5e-8)
	p, worse := pValues(m, sd, 10, 0)
	near(t, "two-sided p", 2*p, 0.002833, 5e-7)
	near(t, "sum of the one-sided p-values", p+worse, 1, 1e-12)
}

// TestPValueMeetsInterval: the lower end lies above the margin exactly when p is
// below the tail, the upper end below it exactly when worse is.
func TestPValueMeetsInterval(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		n := rapid.IntRange(2, 40).Draw(t, "n")
		m := rapid.Float64Range(-1, 1).Draw(t, "mean")
		sd := rapid.Float64Range(1e-3, 2).Draw(t, "sd")
		margin := rapid.Float64Range(1e-3, 1).Draw(t, "margin")
		confidence := rapid.Float64Range(0.6, 0.999).Draw(t, "confidence")
		low, high := interval(m, sd, n, confidence)
		p, worse := pValues(m, sd, n, margin)
		a := (1 - confidence) / 2
		if math.Abs(low+margin) > 1e-9 && (low > -margin) != (p < a) {
			t.Fatalf("low %v, p %v, a %v", low, p, a)
		}
		if math.Abs(high+margin) > 1e-9 && (high < -margin) != (worse < a) {
			t.Fatalf("high %v, p %v, a %v", high, worse, a)
		}
	})
}

func TestWithoutSpread(t *testing.T) {
	tenth := []float64{0.1, 0.1, 0.1} // their sum is not exactly 0.3
	if m, sd := mean(tenth), deviation(tenth); m != 0.1 || sd != 0 {
		t.Errorf("mean %v, SD %v", m, sd)
	}
	if low, high := interval(0.1, 0, 3, 0.95); low != 0.1 || high != 0.1 {
		t.Errorf("interval %v to %v", low, high)
	}
	if low, high := bootstrap(tenth, mean, 0.95); low != 0.1 || high != 0.1 {
		t.Errorf("bootstrap %v to %v", low, high)
	}
	for m, want := range map[float64][2]float64{0: {0, 1}, -0.02: {1, 0}, -0.01: {0.5, 0.5}} {
		if p, worse := pValues(m, 0, 3, 0.01); p != want[0] || worse != want[1] {
			t.Errorf("mean %v: %v, %v", m, p, worse)
		}
	}
	if g := skewness(tenth); g != 0 {
		t.Errorf("skewness of equal values %v", g)
	}
}

func TestSkewness(t *testing.T) {
	// by hand: mean 1/4, m2 = 3/16, m3 = 3/32, g1 = 2/sqrt 3, G1 = sqrt 12/2 g1 = 2
	near(t, "skewness", skewness([]float64{0, 0, 1, 0}), 2, 1e-12)
	near(t, "symmetric", skewness([]float64{-3, -1, 0, 1, 3}), 0, 1e-12)
	if !math.IsNaN(skewness([]float64{1, 2})) {
		t.Error("two values have a skewness")
	}
	// the SD of G1 over many normal samples is its standard error
	const n, trials, seed = 10, 4000, 3
	rng := rand.New(rand.NewPCG(seed, 0))
	var squares float64
	for range trials {
		g := skewness(normals(rng, n, 0, 1))
		squares += g * g
	}
	near(t, "standard error of skewness", math.Sqrt(squares/trials), skewnessError(n), 0.03)
}

func normals(rng *rand.Rand, n int, mean, sd float64) []float64 {
	xs := make([]float64, n)
	for i := range xs {
		xs[i] = mean + sd*rng.NormFloat64()
	}
	return xs
}

// spatial is variable A of the spatial test data, 26 children (Efron and
// Tibshirani, An Introduction to the Bootstrap, 1993, table 14.1; from memory).
var spatial = []float64{
	48, 36, 20, 29, 42, 42, 20, 42, 22, 41, 45, 14, 6,
	0, 33, 28, 34, 4, 32, 24, 47, 41, 24, 26, 30, 41,
}

// TestBCa holds the bootstrap to the book's 90 % interval of the variance with
// divisor n: 115.8 to 259.6 about 171.5 (table 14.2; from memory). The book used
// 2000 resamples, whose ends move by a few per cent with the seed.
func TestBCa(t *testing.T) {
	variance := func(xs []float64) float64 { return moment(xs, 2) / float64(len(xs)) }
	near(t, "variance", variance(spatial), 171.5, 0.05)
	near(t, "acceleration", acceleration(spatial, variance), 0.061, 0.0005) // the book's figure
	low, high := bootstrap(spatial, variance, 0.90)
	near(t, "low", low, 115.8, 0.03*115.8)
	near(t, "high", high, 259.6, 0.03*259.6)
}

func TestBootstrapIsRepeatable(t *testing.T) {
	before := slices.Clone(sleep)
	low, high := bootstrap(sleep, mean, 0.95)
	low2, high2 := bootstrap(sleep, mean, 0.95)
	if low != low2 || high != high2 {
		t.Error("two calls differ")
	}
	if !slices.Equal(before, sleep) {
		t.Error("the differences were altered")
	}
	if !(low > 0.7 && low < mean(sleep) && high > 2.2 && high < 3.5) {
		t.Errorf("interval %v to %v of %v", low, high, mean(sleep))
	}
}

// TestBootstrapCoverage: of samples of 30 normal values, a 90 % interval misses
// the true mean in about one of ten (a few per cent more for this few values).
func TestBootstrapCoverage(t *testing.T) {
	trials := 300
	if testing.Short() {
		trials = 60
	}
	const seed = 5
	rng := rand.New(rand.NewPCG(seed, 0))
	missed := 0
	for range trials {
		if low, high := bootstrap(normals(rng, 30, 2, 1), mean, 0.90); low > 2 || high < 2 {
			missed++
		}
	}
	share := float64(missed) / float64(trials)
	near(t, "share of intervals that miss", share, 0.115, 4*math.Sqrt(0.1*0.9/float64(trials)))
}

func TestPairsNeeded(t *testing.T) {
	for _, c := range []struct {
		mean, sd, margin, tail float64
		n                      int
	}{
		{0.001, 0.01, 0.005, 0.025, 5},
		{-0.004, 0.01, 0.005, 0.025, 10},
		{-0.02, 0.03, 0.005, 0.0125, 10},
		{-0.009, 0.01, 0.01, 0.025, 10},
		{0, 0.5, 0.01, 0.05, 3},
	} {
		want := 0
		for n := c.n + 1; want == 0; n++ { // the formula, one n after another
			half := student(n).Quantile(1-c.tail) * c.sd / math.Sqrt(float64(n))
			if half < math.Abs(c.mean+c.margin) {
				want = n
			}
		}
		if got := pairsNeeded(c.mean, c.sd, c.n, c.margin, c.tail); got != want {
			t.Errorf("%+v: %d pairs, want %d", c, got, want)
		}
	}
	for _, c := range []struct{ mean, sd float64 }{
		{-0.01, 0.01}, // on the margin
		{math.Nextafter(-0.01, 0), 0.01},
		{math.NaN(), math.NaN()},
		{0, math.NaN()},
	} {
		if got := pairsNeeded(c.mean, c.sd, 10, 0.01, 0.025); got != 0 {
			t.Errorf("mean %v: %d pairs, want 0", c.mean, got)
		}
	}
	if got := pairsNeeded(0, 0.1, 1, 0.01, 0.025); got != 0 {
		t.Errorf("one pair: %d", got)
	}
}
