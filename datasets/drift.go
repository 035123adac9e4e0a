package datasets

import (
	"fmt"
	"math"

	"ulpine/quant/random"
)

// The two states of the sensors.
const (
	Fresh   = "fresh"
	Drifted = "drifted"
)

// drift is sensors whose gains and offsets change between a first training and the
// adaptation that follows. A plant has a hidden state u of k standard normal numbers.
// Sensor j reads x = a . u/sqrt(k) + sigma z and the target is y = w . u/sqrt(k), with
// a and w standard normal and drawn once a replicate, z standard normal. A drifted
// sensor gives (1 + d p) x + d q in place of x, with p and q standard normal, drawn once
// a replicate, and d the drift. Both variants have the same plant and other examples,
// so that one can be trained first and the other adapted to under one data_seed.
//
// Without noise, and with as many sensors as hidden numbers or more, a linear network
// can be exact on either variant, so the floor of its error is 0.
type drift struct {
	sensors, hidden       int
	noise, drift          float64
	noisePercent, percent int // as the plan has them
	drifted               bool
}

func newDrift(r *reader) Source {
	sizes := readInvented(r, 2000, 2000)
	t := &drift{sensors: r.whole("sensors", 8, 1, 4096), hidden: r.whole("hidden", 4, 1, 4096)}
	t.noisePercent, t.percent = r.whole("noise_percent", 5, 0, 1000), r.whole("drift_percent", 30, 0, 1000)
	t.noise, t.drift = float64(t.noisePercent)/100, float64(t.percent)/100
	t.drifted = r.word("variant", Fresh, Drifted) == Drifted
	return &inventedSource{sizes, t}
}

func (t *drift) variant() string {
	if t.drifted {
		return Drifted
	}
	return Fresh
}

func (t *drift) name() string          { return "sensor-drift" }
func (t *drift) shape() []int          { return []int{t.sensors} }
func (t *drift) targetNames() []string { return outputNames(1) }
func (t *drift) recipe() string {
	return fmt.Sprintf("sensors=%d hidden=%d noise_percent=%d drift_percent=%d variant=%s", t.sensors, t.hidden, t.noisePercent, t.percent, t.variant())
}

func (t *drift) words() string {
	return fmt.Sprintf("%d %s sensors on a plant with %d hidden numbers", t.sensors, t.variant(), t.hidden)
}

// driftedPhases is how far the phases of the drifted variant's examples lie behind
// those of the fresh one, and behind the phase that all share.
const driftedPhases = sharedPhase + 1

func (t *drift) start(key uint64) func(x, y []float64, d random.Draws) {
	shared := random.Draws{Seed: key, Phase: sharedPhase}
	rows := normals(shared, drawWeight, int(t.sensors*t.hidden))
	w := normals(shared, drawLayer2, t.hidden)
	change := normals(shared, drawDrift, int(2*t.sensors)) // p and q of sensor j in turn
	root := math.Sqrt(float64(t.hidden))
	return func(x, y []float64, d random.Draws) {
		if t.drifted {
			d.Phase += driftedPhases
		}
		u, z := normals(d, drawInput, t.hidden), normals(d, drawFloor, t.sensors)
		for j := range x {
			v := dot(rows[int(j*t.hidden):][:t.hidden], u)/root + float64(t.noise*z[j])
			if t.drifted {
				gain := 1 + float64(t.drift*change[int(2*j)])
				v = float64(gain*v) + float64(t.drift*change[int(2*j)+1])
			}
			x[j] = v
		}
		y[0] = dot(w, u) / root
	}
}
