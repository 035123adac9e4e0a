package datasets

import (
	"fmt"
	"math"

	"ulpine/quant/random"
)

// teacher has a fixed network give the targets: standard normal inputs x, hidden
// values h = relu(A x/sqrt(n) + a) and outputs y = B h sqrt(2/width), with A, a, B
// standard normal and drawn once a replicate. A student "dense width", "relu",
// "dense outputs" can equal it exactly, so the floor of its error is 0.
type teacher struct{ features, width, outputs int }

func newTeacher(r *reader) Source {
	sizes := readInvented(r, 2000, 2000)
	return &inventedSource{sizes, &teacher{
		r.whole("features", 16, 1, 4096), r.whole("width", 8, 1, 4096), r.whole("outputs", 1, 1, maxClasses),
	}}
}

func (t *teacher) name() string          { return "teacher" }
func (t *teacher) shape() []int          { return []int{t.features} }
func (t *teacher) targetNames() []string { return outputNames(t.outputs) }
func (t *teacher) recipe() string {
	return fmt.Sprintf("features=%d width=%d outputs=%d", t.features, t.width, t.outputs)
}

func (t *teacher) words() string {
	return fmt.Sprintf("answers of a teacher, a random network %d-%d-%d with relu", t.features, t.width, t.outputs)
}

func (t *teacher) start(key uint64) func(x, y []float64, d random.Draws) {
	shared := random.Draws{Seed: key, Phase: sharedPhase}
	n := t.features + 1 // the last one of each row is the bias
	first := normals(shared, drawWeight, int(t.width*n))
	second := normals(shared, drawLayer2, int(t.outputs*t.width))
	root, gain := math.Sqrt(float64(t.features)), math.Sqrt(2/float64(t.width))
	return func(x, y []float64, d random.Draws) {
		copy(x, normals(d, drawInput, len(x)))
		h := make([]float64, t.width)
		for i := range h {
			row := first[int(i*n):][:n]
			h[i] = max(0, dot(row[:t.features], x)/root+row[t.features])
		}
		for k := range y {
			y[k] = float64(dot(second[int(k*t.width):][:t.width], h) * gain)
		}
	}
}
