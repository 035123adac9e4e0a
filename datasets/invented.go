package datasets

import (
	"fmt"

	"ulpine/quant/random"
)

// invented is what the generators of invented regressions share: sizes, a seed,
// and a pure function of (data seed, replicate's seed, split, number in the split)
// for every example, so that none changes with the sizes of the sets.
type invented struct {
	Train, Validation, Test int // examples; Train at least 1
	DataSeed                uint64
}

// A generated task is one kind of them.
type generated interface {
	name() string
	shape() []int
	targetNames() []string
	recipe() string // the options besides sizes and seed, canonical
	words() string  // the task in words, for the description
	// start draws what all examples of a replicate share and returns the function
	// that fills one example's inputs x and targets y.
	start(key uint64) func(x, y []float64, d random.Draws)
}

// Draws of different quantities; Site of random.Draws. Those that all examples
// share have the phase sharedPhase, which is no split's.
const (
	drawInput uint32 = iota + 1
	drawFloor
	drawWeight
	drawLayer2
	drawLevel
	drawDrift

	sharedPhase = 3
)

func readInvented(r *reader, train, test int) invented {
	return invented{
		Train:      r.count("train", train, 1),
		Validation: r.count("validation", 0, 0),
		Test:       r.count("test", test, 0),
		DataSeed:   r.seed("data_seed", 1),
	}
}

// inventedSource makes a Source of a generated task.
type inventedSource struct {
	invented
	task generated
}

// Canonical implements Source.
func (s *inventedSource) Canonical() string {
	return fmt.Sprintf("%s train=%d validation=%d test=%d data_seed=%d %s", s.task.name(), s.Train, s.Validation, s.Test, s.DataSeed, s.task.recipe())
}

func (s *inventedSource) description() string {
	return fmt.Sprintf("%s: %d training, %d validation, %d test examples of invented data, new in every replicate", s.task.words(), s.Train, s.Validation, s.Test)
}

// check finds sets that hold more values than one file of data may.
func (s *inventedSource) check() error {
	per := volume(s.task.shape())
	if n := max(s.Train, s.Validation, s.Test); n > maxValues/per {
		return &OptionError{"train", fmt.Sprintf("%d examples of %d values are too many", n, per), fmt.Sprintf("give every set at most %d", maxValues/per)}
	}
	return nil
}

// Facts implements Source.
func (s *inventedSource) Facts() (Facts, error) {
	if err := s.check(); err != nil {
		return Facts{}, err
	}
	return Facts{
		Shape: s.task.shape(), TargetNames: s.task.targetNames(),
		Train: s.Train, Validation: s.Validation, Test: s.Test,
		PerReplicate: true, Description: s.description(),
	}, nil
}

// Load implements Source. Inputs are used as they are drawn: the recipes give
// them the scale they are to have.
func (s *inventedSource) Load(replicateSeed uint64) (*Data, error) {
	if err := s.check(); err != nil {
		return nil, err
	}
	key := pumpKey(s.DataSeed, replicateSeed)
	fill := s.task.start(key)
	raw := &examples{
		shape: s.task.shape(), targetNames: s.task.targetNames(),
		train:      s.draw(key, fill, 0, s.Train),
		validation: s.draw(key, fill, 1, s.Validation),
		test:       s.draw(key, fill, 2, s.Test),
	}
	return raw.finish(AsIs, s.description(), false)
}

// draw generates the n examples of a split.
func (s *inventedSource) draw(key uint64, fill func(x, y []float64, d random.Draws), split uint32, n int) rawSet {
	per, outputs := volume(s.task.shape()), len(s.task.targetNames())
	values, targets := make([]float64, int(n*per)), make([]float64, int(n*outputs))
	for i := range n {
		d := random.Draws{Seed: key, Step: uint32(i), Phase: split}
		fill(values[int(i*per):][:per], targets[int(i*outputs):][:outputs], d)
	}
	return rawSet{at: slice(values), targets: targets}
}

// normals are n standard normal numbers of a quantity.
func normals(d random.Draws, quantity uint32, n int) []float64 {
	d.Site = quantity
	out := make([]float64, n)
	for i := range out {
		out[i] = d.Normal(uint64(i))
	}
	return out
}

// dot is the sum of products in ascending order.
func dot(a, b []float64) float64 {
	var sum float64
	for i, x := range a {
		sum += float64(x * b[i])
	}
	return sum
}

// outputNames are "output 1" and so on.
func outputNames(n int) []string {
	names := make([]string, n)
	for i := range names {
		names[i] = fmt.Sprintf("output %d", i+1)
	}
	return names
}
