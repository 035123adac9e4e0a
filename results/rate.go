package results

import "math"

// ExactRate is the two-sided interval of a rate from k of n events, after Clopper
// and Pearson (Biometrika 26, 1934, 404-413): at the lower end k or more have the
// probability (1-confidence)/2, at the upper end k or fewer. It never covers the
// true rate less often than it says. NaN without a sensible question: n = 0,
// k > n, or a confidence outside (0, 1).
func ExactRate(k, n uint64, confidence float64) (low, high float64) {
	if n == 0 || k > n || !(confidence > 0 && confidence < 1) {
		return math.NaN(), math.NaN()
	}
	tail := (1 - confidence) / 2
	// k or fewer of n at rate p are n-k or more of n at rate 1-p
	return lowerRate(k, n, tail), 1 - lowerRate(n-k, n, tail)
}

// lowerRate is the rate at which k or more of n have the probability tail; that
// probability rises with the rate.
func lowerRate(k, n uint64, tail float64) float64 {
	if k == 0 {
		return 0
	}
	low, high := 0.0, 1.0
	for {
		middle := low + (high-low)/2
		if middle <= low || middle >= high { // neighbours
			return low
		}
		if atLeast(k, n, middle) < tail {
			low = middle
		} else {
			high = middle
		}
	}
}

// atLeast is P(X >= k) of a binomial count, the terms of the shorter side of the
// mean added from k outwards until they no longer matter.
func atLeast(k, n uint64, p float64) float64 {
	if float64(k) > float64(n)*p { // beyond the mean: terms fall from k on
		term := binomial(k, n, p)
		sum := term
		for i := k; i < n && term > sum*0x1p-60; i++ {
			term *= float64(n-i) / float64(i+1) * (p / (1 - p))
			sum += term
		}
		return min(1, sum)
	}
	return 1 - atLeast(n-k+1, n, 1-p) // k-1 or fewer
}

// binomial is P(X = k).
func binomial(k, n uint64, p float64) float64 {
	logFactorial := func(i uint64) float64 {
		v, _ := math.Lgamma(float64(i) + 1)
		return v
	}
	return math.Exp(logFactorial(n) - logFactorial(k) - logFactorial(n-k) +
		float64(k)*math.Log(p) + float64(n-k)*math.Log1p(-p))
}
