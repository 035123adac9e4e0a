package compare

import (
	"math"

	"gonum.org/v1/gonum/stat/distuv"
)

// mean adds in the order given. Equal values have exactly themselves as mean.
func mean(xs []float64) float64 {
	if allEqual(xs) {
		return xs[0]
	}
	var sum float64
	for _, x := range xs {
		sum += x
	}
	return sum / float64(len(xs))
}

// deviation is the standard deviation with divisor n-1; exactly zero for equal
// values, whose mean may not be exact.
func deviation(xs []float64) float64 {
	if allEqual(xs) {
		return 0
	}
	return math.Sqrt(moment(xs, 2) / float64(len(xs)-1))
}

// moment is the sum of the k-th powers of the distances from the mean.
func moment(xs []float64, k int) (sum float64) {
	m := mean(xs)
	for _, x := range xs {
		power := 1.0
		for range k {
			power *= x - m
		}
		sum += power
	}
	return sum
}

func allEqual(xs []float64) bool {
	for _, x := range xs {
		if x != xs[0] {
			return false
		}
	}
	return true
}

// skewness is the adjusted Fisher-Pearson coefficient G1 = sqrt(n(n-1))/(n-2) g1
// (Joanes and Gill, The Statistician 47, 1998, 183-189; from memory); NaN for
// fewer than three values, 0 for equal ones.
func skewness(xs []float64) float64 {
	n := float64(len(xs))
	switch {
	case n < 3:
		return math.NaN()
	case allEqual(xs):
		return 0
	}
	variance := moment(xs, 2) / n
	g1 := moment(xs, 3) / n / (variance * math.Sqrt(variance))
	return math.Sqrt(n*(n-1)) / (n - 2) * g1
}

// skewnessError is the standard error of G1 for n normal values (Fisher 1930, as
// in Joanes and Gill; from memory).
func skewnessError(n int) float64 {
	x := float64(n)
	return math.Sqrt(6 * x * (x - 1) / ((x - 2) * (x + 1) * (x + 3)))
}

// student is the t distribution with n-1 degrees of freedom.
func student(n int) distuv.StudentsT {
	return distuv.StudentsT{Mu: 0, Sigma: 1, Nu: float64(n - 1)}
}

// interval is the two-sided t interval of the mean of n >= 2 differences. It has
// no width when they are all equal.
func interval(mean, sd float64, n int, confidence float64) (low, high float64) {
	if sd == 0 {
		return mean, mean
	}
	half := student(n).Quantile((1+confidence)/2) * sd / math.Sqrt(float64(n))
	return mean - half, mean + half
}

// pValues are the one-sided p-values of n >= 2 differences: p against "the true
// mean is -margin or less", worse against "-margin or more". Without spread they
// are 0 or 1, and both 1/2 on the margin.
func pValues(mean, sd float64, n int, margin float64) (p, worse float64) {
	distance := mean + margin
	if sd == 0 {
		switch {
		case distance > 0:
			return 0, 1
		case distance < 0:
			return 1, 0
		}
		return 0.5, 0.5
	}
	t := distance / (sd / math.Sqrt(float64(n)))
	// by symmetry, so that small values of either keep all their digits
	return student(n).CDF(-t), student(n).CDF(t)
}

// maxPairs is beyond what anybody will run: a mean that needs more sits on the
// margin.
const maxPairs = 1_000_000

// pairsNeeded is the least number of pairs, more than n, at which an interval
// end with tail probability tail would leave the margin behind if mean and SD
// stayed; 0 if that cannot be said.
func pairsNeeded(mean, sd float64, n int, margin, tail float64) int {
	distance := math.Abs(mean + margin)
	settled := func(pairs int) bool {
		return student(pairs).Quantile(1-tail)*sd/math.Sqrt(float64(pairs)) < distance
	}
	if n < 2 || !(distance > 0) || math.IsNaN(sd) || !settled(maxPairs) {
		return 0
	}
	low, high := n, maxPairs // settled(high), and the half-width falls with pairs
	for high-low > 1 {
		if middle := (low + high) / 2; settled(middle) {
			high = middle
		} else {
			low = middle
		}
	}
	return high
}
