package compare

import (
	"math/rand/v2"
	"testing"
)

// BenchmarkTwoWay is one two-way interval of ten replicates on ten thousand shared
// examples, one in twenty of which flips.
func BenchmarkTwoWay(b *testing.B) {
	rng := rand.New(rand.NewPCG(validitySeed, 9))
	tab := &table{aggregate: func(x float64) float64 { return x }, linear: true, sign: 1, resamples: resamples}
	for range 10 {
		arm := make([]float64, 10_000)
		for i := range arm {
			if i%20 == 0 {
				arm[i] = float64(rng.IntN(3) - 1)
			}
		}
		tab.arm, tab.against = append(tab.arm, arm), append(tab.against, make([]float64, len(arm)))
	}
	for b.Loop() {
		tab.crossed(0.95)
	}
}
