package draw

import (
	"math"
	"sort"
)

// Spread moves wanted places apart until neighbours are at least gap from each
// other, all within lo..hi, and as little as possible otherwise: the moves have
// the least sum of squares (pool adjacent violators; Ayer, Brunk, Ewing, Reid
// and Silverman, Ann. Math. Statist. 26, 1955). The order is kept; places that
// are not finite are treated as hi. When the range is too short for all, the gap
// shrinks. The result is in the order of the argument.
func Spread(want []float64, gap, lo, hi float64) []float64 {
	n := len(want)
	out := make([]float64, n)
	if n == 0 {
		return out
	}
	if n > 1 {
		gap = math.Min(gap, math.Max(0, (hi-lo)/float64(n-1)))
	}
	order := make([]int, n)
	at := make([]float64, n)
	for i, w := range want {
		order[i], at[i] = i, w
		if !finite(w) {
			at[i] = hi
		}
	}
	sort.SliceStable(order, func(a, b int) bool { return at[order[a]] < at[order[b]] })
	// In u = place - rank*gap the condition is that u does not fall.
	u := make([]float64, n)
	for r, i := range order {
		u[r] = at[i] - float64(r)*gap
	}
	u = rising(u)
	top := hi - float64(n-1)*gap
	for r, i := range order {
		out[i] = math.Max(lo, math.Min(top, u[r])) + float64(r)*gap
	}
	return out
}

// rising is the sequence that does not fall and is nearest to u in least squares.
func rising(u []float64) []float64 {
	type pool struct {
		mean  float64
		count int
	}
	var pools []pool
	for _, v := range u {
		pools = append(pools, pool{v, 1})
		for k := len(pools) - 1; k > 0 && pools[k-1].mean > pools[k].mean; k-- {
			a, b := pools[k-1], pools[k]
			c := a.count + b.count
			pools[k-1] = pool{(a.mean*float64(a.count) + b.mean*float64(b.count)) / float64(c), c}
			pools = pools[:k]
		}
	}
	out := make([]float64, 0, len(u))
	for _, p := range pools {
		for range p.count {
			out = append(out, p.mean)
		}
	}
	return out
}
