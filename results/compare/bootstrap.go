package compare

import (
	"math"
	"math/rand/v2"
	"slices"

	"gonum.org/v1/gonum/stat/distuv"
)

// resamples is enough for the ends of a 95 % interval to move by about 1 % of
// its width with the seed; bootstrapSeed is fixed, so that a report comes out
// the same every time.
const (
	resamples     = 10_000
	bootstrapSeed = 1979 // the year of Efron's first paper on it
)

// bootstrap is the bias-corrected and accelerated interval (BCa) of a statistic
// of independent values: Efron, J. Amer. Statist. Assoc. 82, 1987, 171-185; as in
// Efron and Tibshirani, An Introduction to the Bootstrap, 1993, section 14.3
// (from memory). It has no width when all values are equal.
func bootstrap(xs []float64, statistic func([]float64) float64, confidence float64) (low, high float64) {
	if allEqual(xs) {
		at := statistic(xs)
		return at, at
	}
	draws := resample(xs, statistic)
	z0 := biasCorrection(draws, statistic(xs))
	a := acceleration(xs, statistic)
	tail := (1 - confidence) / 2
	return quantile(draws, adjust(tail, z0, a)), quantile(draws, adjust(1-tail, z0, a))
}

// resample is the statistic of many samples drawn from xs with replacement, in
// ascending order.
func resample(xs []float64, statistic func([]float64) float64) []float64 {
	rng := rand.New(rand.NewPCG(bootstrapSeed, uint64(len(xs))))
	sample := make([]float64, len(xs))
	draws := make([]float64, resamples)
	for i := range draws {
		for j := range sample {
			sample[j] = xs[rng.IntN(len(xs))]
		}
		draws[i] = statistic(sample)
	}
	slices.Sort(draws)
	return draws
}

// biasCorrection is z0: where the estimate lies among the draws, as a normal
// quantile. Draws equal to it count half, since few different values make them
// common.
func biasCorrection(draws []float64, estimate float64) float64 {
	var below float64
	for _, d := range draws {
		switch {
		case d < estimate:
			below++
		case d == estimate:
			below += 0.5
		}
	}
	share := below / float64(len(draws))
	edge := 0.5 / float64(len(draws))
	return distuv.UnitNormal.Quantile(min(max(share, edge), 1-edge))
}

// acceleration is a, from the statistic with one value left out at a time.
func acceleration(xs []float64, statistic func([]float64) float64) float64 {
	left := make([]float64, len(xs))
	rest := make([]float64, 0, len(xs)-1)
	for i := range xs {
		rest = append(append(rest[:0], xs[:i]...), xs[i+1:]...)
		left[i] = statistic(rest)
	}
	squares := moment(left, 2)
	if squares == 0 {
		return 0
	}
	return -moment(left, 3) / (6 * squares * math.Sqrt(squares))
}

// adjust turns a nominal probability into the one to be read off the draws.
func adjust(p, z0, a float64) float64 {
	z := z0 + distuv.UnitNormal.Quantile(p)
	scale := 1 - a*z
	if scale <= 0 { // beyond the reach of the method: the extreme draw
		return math.Round(p)
	}
	return distuv.UnitNormal.CDF(z0 + z/scale)
}

// quantile reads ascending draws at probability p, between neighbours in
// proportion.
func quantile(draws []float64, p float64) float64 {
	at := p * float64(len(draws)-1)
	i := min(max(int(at), 0), len(draws)-2)
	part := min(max(at-float64(i), 0), 1)
	if part == 0 || draws[i] == draws[i+1] || math.IsInf(draws[i], 0) {
		return draws[i] // also where infinities would make a NaN
	}
	return draws[i] + part*(draws[i+1]-draws[i])
}

// studentised is the bootstrap-t interval of the mean: the quantiles of Student's
// t are replaced by those of (mean* - mean) / (SD* / sqrt(n)) over the resamples
// (Efron and Tibshirani, section 12.5, from memory; Hall, Ann. Statist. 16, 1988,
// 927-953, on why it is second-order right for skewed values). A resample of
// equal values counts as infinite, so ends are infinite for very few values. It
// has no width when all values are equal.
func studentised(xs []float64, confidence float64) (low, high float64) {
	m, error1 := mean(xs), deviation(xs)/math.Sqrt(float64(len(xs)))
	if error1 == 0 {
		return m, m
	}
	t := resample(xs, func(sample []float64) float64 { return tStatistic(sample, m) })
	tail := (1 - confidence) / 2
	return m - error1*quantile(t, 1-tail), m - error1*quantile(t, tail)
}

// tStatistic is Student's t of values against a mean; two passes, since it is
// taken of very many samples.
func tStatistic(xs []float64, against float64) float64 {
	var sum, squares float64
	for _, x := range xs {
		sum += x
	}
	n := float64(len(xs))
	m := sum / n
	for _, x := range xs {
		squares += (x - m) * (x - m)
	}
	switch distance := m - against; {
	case squares > 1e-28*m*m*n: // equal values differ from their mean by rounding alone
		return distance / math.Sqrt(squares/(n-1)/n)
	case math.Abs(distance) <= 1e-14*math.Abs(m):
		return 0
	default:
		return math.Copysign(math.Inf(1), distance)
	}
}
