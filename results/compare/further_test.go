package compare

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"
)

// depression holds Hamilton scale factors of nine patients before and after a
// tranquilliser (Hollander and Wolfe, Nonparametric Statistical Methods, 1973,
// table 3.1; also in R's help of wilcox.test).
var depression = func() []float64 {
	before := []float64{1.83, 0.50, 1.62, 2.48, 1.68, 1.88, 1.55, 3.06, 1.30}
	after := []float64{0.878, 0.647, 0.598, 2.05, 1.06, 1.29, 1.06, 3.14, 1.29}
	d := make([]float64, len(before))
	for i := range d {
		d[i] = after[i] - before[i]
	}
	return d
}()

// TestHodgesLehmann holds the estimate and its interval to the book's worked
// examples 3.3 and 3.4: -0.46, and -0.786 to -0.010 at 96.1 % (from memory).
func TestHodgesLehmann(t *testing.T) {
	middle, low, high := signedRank(depression, 0.96)
	near(t, "estimate", middle, -0.46, 5e-4)
	near(t, "low", low, -0.786, 1e-9)
	near(t, "high", high, -0.010, 1e-9)
	// the book's table of Wilcoxon's test: P(T+ >= 40) = 0.020 for n = 9
	p := rankSums(9)
	var upper float64
	for _, x := range p[40:] {
		upper += x
	}
	near(t, "p", upper, 10.0/512, 1e-15)
}

// TestRankCut: published critical values of the signed-rank test, two-sided 5 %
// (from memory): reject at or below 0, 2, 3, 5, 8, 25, 52 for n = 6 ... 20.
func TestRankCut(t *testing.T) {
	for n, critical := range map[int]int{6: 0, 7: 2, 8: 3, 9: 5, 10: 8, 15: 25, 20: 52} {
		if got := rankCut(n, 0.025); got != critical+1 {
			t.Errorf("n = %d: cut %d, want %d", n, got, critical+1)
		}
	}
	if got := rankCut(5, 0.025); got != 0 {
		t.Errorf("five values: cut %d", got)
	}
	exact, approximate := rankCut(exactRanks, 0.025), rankCut(exactRanks+1, 0.025)
	if step := approximate - exact; step < 30 || step > 60 { // grows by about n/2 a value
		t.Errorf("from %d to %d where counting ends", exact, approximate)
	}
}

// TestSignFlipIsTheTest compares the interval with the permutation test itself:
// a centre inside is not rejected, one outside is, both by counting all flips.
func TestSignFlipIsTheTest(t *testing.T) {
	rng := rand.New(rand.NewPCG(7, 0))
	for range 40 {
		n := 6 + rng.IntN(5)
		xs := normals(rng, n, 0.3, 1)
		low, high := signFlip(xs, 0.95)
		for range 30 {
			centre := 1.5 * rng.NormFloat64()
			inside := centre > low && centre < high
			if got := !(flipShare(xs, centre, 1) <= 0.025) && !(flipShare(xs, centre, -1) <= 0.025); got != inside {
				t.Fatalf("%v at %v: interval %v to %v, test keeps it %v", xs, centre, low, high, got)
			}
		}
	}
}

// flipShare is the share of all flips of x - centre whose sum, times sign, is
// that of what was seen or more.
func flipShare(xs []float64, centre, sign float64) float64 {
	hits := 0
	for flips := range 1 << len(xs) {
		var less float64 // what flipping takes from the sum, halved
		for i, x := range xs {
			if flips>>i&1 == 1 {
				less += sign * (x - centre)
			}
		}
		if less <= 0 {
			hits++
		}
	}
	return float64(hits) / float64(int(1)<<len(xs))
}

// TestSignFlipOfSleep: six pairs and more have ends; a random draw of flips comes
// close to all of them.
func TestSignFlipOfSleep(t *testing.T) {
	if low, high := signFlip(sleep[:5], 0.95); !math.IsInf(low, -1) || !math.IsInf(high, 1) {
		t.Errorf("five pairs: %v to %v", low, high)
	}
	if low, high := signFlip(sleep[:6], 0.95); low != 0 || high != 2.4 { // the extremes: 1 flip of 64 lies below 2.5 %
		t.Errorf("six pairs: %v to %v", low, high)
	}
	low, high := signFlip(sleep, 0.95)
	means := randomMeans(sleep)
	slices.Sort(means)
	randomLow, randomHigh := orderEnds(means, len(means)/40)
	near(t, "low", randomLow, low, 0.02)
	near(t, "high", randomHigh, high, 0.02)
	same := []float64{0.25, 0.25, 0.25, 0.25, 0.25, 0.25, 0.25}
	if low, high = signFlip(same, 0.95); low != 0.25 || high != 0.25 {
		t.Errorf("equal values: %v to %v", low, high)
	}
}

// TestStudentised: for many normal values it is the t interval; with a long tail
// downwards it reaches further down; few values leave it unbounded.
func TestStudentised(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 0))
	xs := normals(rng, 200, 5, 2)
	m, sd := mean(xs), deviation(xs)
	low, high := studentised(xs, 0.95)
	wantLow, wantHigh := interval(m, sd, len(xs), 0.95)
	near(t, "low", low, wantLow, 0.03)
	near(t, "high", high, wantHigh, 0.03)

	tail := make([]float64, 12)
	for i := range tail {
		tail[i] = -math.Exp(rng.NormFloat64())
	}
	low, high = studentised(tail, 0.95)
	tLow, tHigh := interval(mean(tail), deviation(tail), len(tail), 0.95)
	if !(low < tLow && high < tHigh) {
		t.Errorf("long lower tail: %v to %v, t %v to %v", low, high, tLow, tHigh)
	}
	if low, high = studentised([]float64{1, 2}, 0.95); !math.IsInf(low, -1) || !math.IsInf(high, 1) {
		t.Errorf("two values: %v to %v", low, high)
	}
	if low, high = studentised([]float64{0.1, 0.1, 0.1}, 0.95); low != 0.1 || high != 0.1 {
		t.Errorf("equal values: %v to %v", low, high)
	}
}
