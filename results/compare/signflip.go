package compare

import (
	"math"
	"math/bits"
	"math/rand/v2"
	"slices"
)

// Flips: all 2^n of them up to exactFlips pairs, else so many at random.
const (
	exactFlips  = 20
	randomFlips = 100_000
	flipSeed    = 1935 // the year of Fisher's Design of Experiments, where the test is
)

// signFlip is the interval of the centre of symmetric differences that inverts
// the sign-flip permutation test: under a centre c every sign of every x - c is as
// likely as its opposite. Flipping a set of them leaves the sum as large as it is
// or larger exactly when the set's mean is at most c, so the ends are order
// statistics of the means of subsets (Hartigan, J. Amer. Statist. Assoc. 64, 1969,
// 1303-1317; from memory), and no search is needed. It holds exactly for any
// symmetric distribution, heavy tails or not; for a skewed one it is no interval
// of the mean. An end is infinite when fewer than one flip in 2/(1-confidence) is
// what was seen: below 6 pairs at 95 %.
func signFlip(xs []float64, confidence float64) (low, high float64) {
	if len(xs) == 0 {
		return math.NaN(), math.NaN()
	}
	var means []float64
	if len(xs) <= exactFlips {
		means = subsetMeans(xs)
	} else {
		means = randomMeans(xs)
	}
	slices.Sort(means)
	// what was seen is one of the flips: that of no difference
	flips := float64(len(means) + 1)
	return orderEnds(means, int(math.Floor((1-confidence)/2*flips*(1+1e-12))))
}

// orderEnds are the c-th smallest and the c-th largest of ascending values;
// infinite if there are none.
func orderEnds(values []float64, c int) (low, high float64) {
	if c < 1 || c > len(values) {
		return math.Inf(-1), math.Inf(1)
	}
	return values[c-1], values[len(values)-c]
}

// subsetMeans are the means of all 2^n - 1 subsets that are not empty. Each sum
// is that of a smaller subset and one more value, so no error builds up.
func subsetMeans(xs []float64) []float64 {
	sums := make([]float64, 1<<len(xs))
	for set := 1; set < len(sums); set++ {
		first := bits.TrailingZeros(uint(set))
		sums[set] = sums[set&(set-1)] + xs[first]
	}
	for set := 1; set < len(sums); set++ {
		sums[set] /= float64(bits.OnesCount(uint(set)))
	}
	return sums[1:]
}

// randomMeans are the means of random subsets, each value in or out with the
// chance of one half; the same ones every time.
func randomMeans(xs []float64) []float64 {
	rng := rand.New(rand.NewPCG(flipSeed, uint64(len(xs))))
	means := make([]float64, 0, randomFlips)
	for len(means) < randomFlips {
		var sum float64
		n := 0
		for i := 0; i < len(xs); i += 64 {
			for word, x := rng.Uint64(), xs[i:min(i+64, len(xs))]; len(x) > 0; word, x = word>>1, x[1:] {
				if word&1 == 1 {
					sum += x[0]
					n++
				}
			}
		}
		if n > 0 {
			means = append(means, sum/float64(n))
		}
	}
	return means
}
