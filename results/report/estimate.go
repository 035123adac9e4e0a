package report

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/stat/distuv"
)

// estimate is a mean with its interval and n. With n < 2 the bounds are NaN.
type estimate struct {
	Mean, Low, High float64
	N               int
}

// tInterval is the mean of the finite values and its two-sided t interval.
func tInterval(values []float64, confidence float64) estimate {
	var x []float64
	for _, v := range values {
		if !math.IsNaN(v) && !math.IsInf(v, 0) {
			x = append(x, v)
		}
	}
	e := estimate{math.NaN(), math.NaN(), math.NaN(), len(x)}
	if e.N == 0 {
		return e
	}
	e.Mean = mean(x)
	if e.N < 2 || !(confidence > 0 && confidence < 1) {
		return e
	}
	ss := 0.0 // sum of squared deviations
	for _, v := range x {
		ss += (v - e.Mean) * (v - e.Mean)
	}
	n := float64(e.N)
	q := distuv.StudentsT{Mu: 0, Sigma: 1, Nu: n - 1}.Quantile(0.5 + confidence/2)
	half := q * math.Sqrt(ss/(n-1)/n)
	e.Low, e.High = e.Mean-half, e.Mean+half
	return e
}

// mean is the arithmetic mean, formed around the first value so that equal
// values have exactly their own mean.
func mean(x []float64) float64 {
	d := 0.0
	for _, v := range x {
		d += v - x[0]
	}
	return x[0] + d/float64(len(x))
}

// middle is the median and the quartiles of values, infinities counting as the
// largest; NaN values are left out. Quartiles are the order statistics
// floor((n-1)/4) from either end, so they are always values that occurred.
func middle(values []float64) (lo, mid, hi float64, n int) {
	var x []float64
	for _, v := range values {
		if !math.IsNaN(v) {
			x = append(x, v)
		}
	}
	n = len(x)
	if n == 0 {
		return math.NaN(), math.NaN(), math.NaN(), 0
	}
	slices.Sort(x)
	q := (n - 1) / 4
	a, b := x[(n-1)/2], x[n/2]
	mid = a/2 + b/2
	if math.IsInf(b, 1) {
		mid = b
	}
	return x[q], mid, x[n-1-q], n
}
