package compare

import (
	"cmp"
	"slices"
)

// Holm adjusts p-values for their number: reject what stays below the level, and
// the chance of one or more false rejections among all is at most the level. The
// smallest p is multiplied by their number m, the next by m-1, and so on; none
// may fall below the one before, none exceeds 1 (Holm, Scandinavian Journal of
// Statistics 6, 1979, 65-70). NaN counts as 1: it is in the family and never
// rejected. The argument is left as it is.
func Holm(p []float64) []float64 {
	known := make([]float64, len(p))
	order := make([]int, len(p))
	for i, x := range p {
		known[i], order[i] = x, i
		if x != x {
			known[i] = 1
		}
	}
	slices.SortStableFunc(order, func(i, j int) int { return cmp.Compare(known[i], known[j]) })
	adjusted := make([]float64, len(p))
	highest := 0.0
	for rank, i := range order {
		highest = max(highest, min(1, float64(len(p)-rank)*known[i]))
		adjusted[i] = highest
	}
	return adjusted
}
