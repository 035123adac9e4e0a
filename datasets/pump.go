package datasets

import (
	"fmt"

	"ulpine/quant/random"
)

// The two mountings of the accelerometer.
const (
	Mounted   = "mounted"
	Remounted = "remounted"
)

// PumpVibration generates windows of an accelerometer on a pump in one of five
// states. The data are invented: a recipe (pumpsignal.go), no measurement. Every
// window is a pure function of (DataSeed, replicate's seed, split, number in the
// split), so it does not change with the sizes of the sets, and no two windows
// share random words. The two variants draw the same words: window i is the same
// pump, heard through another mounting.
//
// Example i has class i mod 5, so classes are equal to within one example. The
// shape of an example is [1, 128]: one channel, 128 samples at 2560 Hz.
type PumpVibration struct {
	Train, Validation, Test int // windows; Train at least 1
	DataSeed                uint64
	Variant                 string // Mounted (or empty) or Remounted
	Scale                   string // Standardise (or empty): mean and deviation of the training set; AsIs: in g
}

// pumpClasses are the states; a label is an index.
var pumpClasses = []string{"sound", "unbalance", "misalignment", "bearing", "cavitation"}

func newPumpVibration(r *reader) Source {
	return &PumpVibration{
		Train:      r.count("train", 2000, 1),
		Validation: r.count("validation", 500, 0),
		Test:       r.count("test", 2000, 0),
		DataSeed:   r.seed("data_seed", 1),
		Variant:    r.word("variant", Mounted, Remounted),
		Scale:      r.word("scale", Standardise, AsIs),
	}
}

// check makes the errors of New of a literal's fields.
func (p *PumpVibration) check() error {
	r := &reader{options: Options{Values: map[string]any{
		"train": p.Train, "validation": p.Validation, "test": p.Test,
	}}}
	r.count("train", 0, 1)
	r.count("validation", 0, 0)
	r.count("test", 0, 0)
	r.options.Values["variant"] = p.variant()
	r.word("variant", Mounted, Remounted)
	r.options.Values["scale"] = p.scale()
	r.word("scale", Standardise, AsIs)
	return r.finish("pump-vibration")
}

func (p *PumpVibration) variant() string { return orElse(p.Variant, Mounted) }
func (p *PumpVibration) scale() string   { return orElse(p.Scale, Standardise) }

// Canonical implements Source.
func (p *PumpVibration) Canonical() string {
	return fmt.Sprintf("pump-vibration train=%d validation=%d test=%d data_seed=%d variant=%s scale=%s",
		p.Train, p.Validation, p.Test, p.DataSeed, p.variant(), p.scale())
}

// Facts implements Source.
func (p *PumpVibration) Facts() (Facts, error) {
	if err := p.check(); err != nil {
		return Facts{}, err
	}
	return Facts{
		Shape: []int{1, pumpSamples}, ClassNames: pumpClasses,
		Train: p.Train, Validation: p.Validation, Test: p.Test,
		PerReplicate: true, Description: p.description(),
	}, nil
}

func (p *PumpVibration) description() string {
	return fmt.Sprintf("pump vibration, %s: %d training, %d validation, %d test windows of invented accelerometer data, new in every replicate",
		p.variant(), p.Train, p.Validation, p.Test)
}

// Load implements Source.
func (p *PumpVibration) Load(replicateSeed uint64) (*Data, error) {
	if err := p.check(); err != nil {
		return nil, err
	}
	key := pumpKey(p.DataSeed, replicateSeed)
	raw := &examples{
		shape: []int{1, pumpSamples}, classNames: pumpClasses,
		train:      p.windows(key, 0, p.Train),
		validation: p.windows(key, 1, p.Validation),
		test:       p.windows(key, 2, p.Test),
	}
	return raw.finish(p.scale(), p.description(), false)
}

// windows generates the windows of a split, in g.
func (p *PumpVibration) windows(key uint64, split uint32, n int) rawSet {
	values := make([]float64, int(n*pumpSamples))
	s := rawSet{at: slice(values), labels: make([]int32, n)}
	remounted := p.variant() == Remounted
	for i := range n {
		s.labels[i] = int32(i % len(pumpClasses))
		draws := random.Draws{Seed: key, Step: uint32(i), Phase: split}
		pumpWindow(values[int(i*pumpSamples):][:pumpSamples], pumpState(s.labels[i]), remounted, draws)
	}
	return s
}

// pumpKey joins both seeds into the key of all draws of a replicate's data.
func pumpKey(dataSeed, replicateSeed uint64) uint64 {
	counter := [4]uint32{uint32(replicateSeed), uint32(replicateSeed >> 32), 0x70756d70}
	w := random.Block(counter, random.Derive(dataSeed, random.Data))
	return uint64(w[0]) | uint64(w[1])<<32
}

func orElse(s, fallback string) string {
	if s == "" {
		return fallback
	}
	return s
}
