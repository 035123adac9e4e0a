package datasets

import "ulpine/quant/random"

// energySamples is the length of a window; a mean square is a sum of as many terms.
const energySamples = 4096

// energy is windows of noise whose mean square is asked for. Each half of a
// window has a level of its own, uniform in [0.25, 2): what comes late in a loud
// window adds little to a sum that is already large. The input is the squares of
// the samples, shape [1, 4096], as a detector before the network would give them;
// "avgpool size=4096" then is the mean square and has the sum whose arithmetic is
// in question. The target is the mean of the very inputs, formed in binary64.
type energy struct{}

func newEnergy(r *reader) Source { return &inventedSource{readInvented(r, 256, 256), energy{}} }

func (energy) name() string          { return "window-energy" }
func (energy) shape() []int          { return []int{1, energySamples} }
func (energy) targetNames() []string { return []string{"mean square"} }
func (energy) recipe() string        { return "samples=4096" }
func (energy) words() string         { return "mean square of windows of 4096 samples" }

func (energy) start(uint64) func(x, y []float64, d random.Draws) {
	return func(x, y []float64, d random.Draws) {
		z := normals(d, drawInput, len(x))
		d.Site = drawLevel
		levels := [2]float64{0.25 + float64(1.75*d.Uniform(0)), 0.25 + float64(1.75*d.Uniform(1))}
		var sum float64
		for i := range x {
			v := float64(levels[int(2*i)/len(x)] * z[i])
			x[i] = float64(float32(float64(v * v)))
			sum += x[i]
		}
		y[0] = sum / float64(len(x))
	}
}
