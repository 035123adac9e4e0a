package trainer

import (
	"context"
	"math"
	"testing"

	"gorgonia.org/tensor"

	"ulpine/quant"
	"ulpine/quant/random"
)

// point is a rounding point with a format by name, nearest-even.
func point(t testing.TB, format string) quant.Point {
	t.Helper()
	f, err := quant.ParseFormat(format)
	if err != nil {
		t.Fatal(err)
	}
	return quant.Point{Format: f}
}

// stochastic is the same with stochastic rounding of r bits.
func stochastic(t testing.TB, format string, r uint8) quant.Point {
	p := point(t, format)
	p.Rounding = quant.Rounding{Mode: quant.Stochastic, Bits: r}
	return p
}

// baseline is the arm where everything is binary32.
func baseline(t testing.TB, layers int) Arm { return Everything(point(t, "fp32"), layers, 1) }

// storageArm stores every tensor at p and sums in binary32.
func storageArm(t testing.TB, p quant.Point, layers int) Arm {
	arm := Everything(p, layers, 1)
	single := point(t, "fp32")
	sums := quant.Accumulate{Product: &single, Sum: single}
	for i := range arm.Layers {
		l := &arm.Layers[i]
		l.Forward, l.InputGradient.Sums, l.WeightGradient.Sums = sums, sums, sums
	}
	return arm
}

// network parses layers that must be right.
func network(t testing.TB, input []int, layers ...string) Network {
	t.Helper()
	n, err := ParseLayers(layers, input)
	if err != nil {
		t.Fatal(err)
	}
	return n
}

// uniform fills a slice with numbers of [-1, 1) from a stream of its own.
func uniform(n int, seed uint64) []float32 {
	out := make([]float32, n)
	d := random.Draws{Seed: seed, Site: 0xfeed}
	for i := range out {
		out[i] = float32(int32(d.Word(uint64(i)))>>8) / (1 << 23)
	}
	return out
}

// dataset draws n examples of a shape with labels that depend on the inputs, so
// that there is something to learn.
func dataset(n int, shape []int, classes int, seed uint64) Set {
	per := volume(shape)
	inputs := uniform(n*per, seed)
	labels := make([]int32, n)
	for i := range labels {
		x := inputs[i*per:][:per]
		class := 0
		for c := range classes {
			if x[c%per]+float32(c/per) > x[class%per]+float32(class/per) {
				class = c
			}
		}
		labels[i] = int32(class)
	}
	return Set{tensor.New(tensor.WithShape(append([]int{n}, shape...)...), tensor.WithBacking(inputs)), labels, nil}
}

// sgdTraining is a short training without shuffling.
func sgdTraining(batch, epochs int) Training {
	return Training{
		Optimizer:    Optimizer{Kind: "sgd", Momentum: 0.9},
		LearningRate: Schedule{Start: 0.05},
		Batch:        batch, Epochs: epochs,
	}
}

// mustRun runs a job that must not fail.
func mustRun(t testing.TB, job Job) Outcome {
	t.Helper()
	out, err := Run(context.Background(), job, nil)
	if err != nil {
		t.Fatal(err)
	}
	return out
}

// engineFor builds an engine without running it.
func engineFor[T quant.Element](t testing.TB, job *Job) *engine[T] {
	t.Helper()
	p, err := job.check()
	if err != nil {
		t.Fatal(err)
	}
	e, err := newEngine[T](job, p.train, p)
	if err != nil {
		t.Fatal(err)
	}
	if err := e.start(job.Start); err != nil {
		t.Fatal(err)
	}
	return e
}

// sameBits compares slices of numbers bit by bit.
func sameBits(t testing.TB, what string, got, want []float64) {
	t.Helper()
	if len(got) != len(want) {
		t.Fatalf("%s: %d values, want %d", what, len(got), len(want))
	}
	for i := range got {
		if math.Float64bits(got[i]) != math.Float64bits(want[i]) {
			t.Fatalf("%s: value %d is %x, want %x", what, i, got[i], want[i])
		}
	}
}

// sameOutcome compares everything an outcome holds, bit by bit.
func sameOutcome(t testing.TB, got, want Outcome) {
	t.Helper()
	sameBits(t, "losses", got.Steps, want.Steps)
	for i := range want.Final {
		sameBits(t, "initial "+want.Final[i].Name, got.Initial[i].Values, want.Initial[i].Values)
		sameBits(t, "final "+want.Final[i].Name, got.Final[i].Values, want.Final[i].Values)
	}
	for i, w := range want.Epochs {
		g := got.Epochs[i]
		sameBits(t, "epoch", g.numbers(), w.numbers())
	}
	for i, w := range want.Counters {
		if got.Counters[i] != w {
			t.Fatalf("counters: %+v, want %+v", got.Counters[i], w)
		}
	}
	if got.Diverged != want.Diverged || got.DivergedStep != want.DivergedStep || got.Stalled != want.Stalled {
		t.Fatalf("ended %q %d %v, want %q %d %v", got.Diverged, got.DivergedStep, got.Stalled, want.Diverged, want.DivergedStep, want.Stalled)
	}
}

func (e Epoch) numbers() []float64 {
	return []float64{
		e.TrainLoss, e.TrainAccuracy, e.ValidationLoss, e.ValidationAccuracy, e.TestLoss, e.TestAccuracy,
		float64(e.Ties), e.LossScale, float64(e.Skipped),
	}
}
