package datasets

import (
	"fmt"
	"math"

	"ulpine/quant/random"
)

// regression is y = w . x/sqrt(n) + sigma z: standard normal inputs x, weights w
// drawn once a replicate, z standard normal. sigma is the noise floor: no
// predictor has an expected squared error below sigma^2 on new examples.
type regression struct {
	features int
	sigma    float64
	hundreds int // sigma in hundredths, as the plan has it
}

func newRegression(r *reader) Source {
	sizes := readInvented(r, 2000, 2000)
	n := r.whole("features", 16, 1, 4096)
	// Whole hundredths: what is canonical is what was written.
	percent := r.whole("noise_percent", 10, 0, 1000)
	return &inventedSource{sizes, &regression{n, float64(percent) / 100, percent}}
}

func (t *regression) name() string          { return "noisy-regression" }
func (t *regression) shape() []int          { return []int{t.features} }
func (t *regression) targetNames() []string { return outputNames(1) }
func (t *regression) recipe() string {
	return fmt.Sprintf("features=%d noise_percent=%d", t.features, t.hundreds)
}

func (t *regression) words() string {
	return fmt.Sprintf("linear regression on %d features, noise floor %g RMSE", t.features, t.sigma)
}

func (t *regression) start(key uint64) func(x, y []float64, d random.Draws) {
	w := normals(random.Draws{Seed: key, Phase: sharedPhase}, drawWeight, t.features)
	root := math.Sqrt(float64(t.features))
	return func(x, y []float64, d random.Draws) {
		copy(x, normals(d, drawInput, len(x)))
		z := normals(d, drawFloor, 1)[0]
		y[0] = dot(w, x)/root + float64(t.sigma*z)
	}
}
