package compare

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/stat/distuv"
)

// exactRanks is up to how many values the signed ranks are counted; beyond, the
// normal law stands in for the count, which by then errs by less than a rank.
const exactRanks = 100

// signedRank is the Hodges-Lehmann estimate of the centre of symmetric
// differences, the median of the means of all pairs of them, each with itself
// too (Hodges and Lehmann, Ann. Math. Statist. 34, 1963, 598-611), and its
// interval by Wilcoxon's signed ranks: order statistics of those means (Tukey's
// method; Hollander and Wolfe, Nonparametric Statistical Methods, section 3.3,
// from memory). Outliers hardly move either. Where the differences are skewed the
// centre is not the mean, and no claim about the mean follows. Ends are infinite
// where the values are too few.
func signedRank(xs []float64, confidence float64) (middle, low, high float64) {
	n := len(xs)
	if n == 0 {
		return math.NaN(), math.NaN(), math.NaN()
	}
	walsh := make([]float64, 0, n*(n+1)/2)
	for i, x := range xs {
		for _, y := range xs[i:] {
			walsh = append(walsh, x/2+y/2)
		}
	}
	slices.Sort(walsh)
	m := len(walsh)
	low, high = orderEnds(walsh, rankCut(n, (1-confidence)/2))
	return walsh[(m-1)/2]/2 + walsh[m/2]/2, low, high
}

// rankCut is the largest c for which the sum of the ranks with positive signs is
// below c with at most the probability tail, were the centre zero.
func rankCut(n int, tail float64) int {
	sums := float64(n) * float64(n+1) / 2
	if n > exactRanks {
		sd := math.Sqrt(sums * float64(2*n+1) / 12)
		return int(math.Floor(sums/2 + distuv.UnitNormal.Quantile(tail)*sd))
	}
	below := 0.0
	for c, p := range rankSums(n) {
		if below += p; below > tail*(1+1e-12) {
			return c
		}
	}
	return 0 // not reached: the probabilities add up to one
}

// rankSums is the distribution of that sum: each rank 1 ... n is in or out with
// the chance of one half.
func rankSums(n int) []float64 {
	p := make([]float64, n*(n+1)/2+1)
	p[0] = 1
	for rank := 1; rank <= n; rank++ {
		for s := rank * (rank + 1) / 2; s >= 0; s-- {
			p[s] /= 2
			if s >= rank {
				p[s] += p[s-rank] / 2
			}
		}
	}
	return p
}
