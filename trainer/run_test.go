package trainer

import (
	"context"
	"errors"
	"math"
	"strings"
	"testing"

	"ulpine/quant"
)

// convJob is a small job with every kind of layer.
func convJob(t testing.TB, arm func(layers int) Arm) Job {
	net := network(t, []int{1, 9, 9}, "conv2d out=3 size=3 pad=1", "relu", "maxpool size=3 stride=2",
		"conv2d out=4 size=2", "relu", "avgpool size=3 stride=1", "flatten", "dense 3")
	training := sgdTraining(4, 2)
	training.Shuffle = true
	training.EvaluateTest, training.EvaluateValidation = EveryEpoch, EveryEpoch
	return Job{
		Network: net, Arm: arm(len(net.Layers)), Training: training, Seed: 3,
		Train: dataset(9, net.Input, 3, 1), Validation: dataset(5, net.Input, 3, 2), Test: dataset(7, net.Input, 3, 3),
	}
}

// rough is an arm with stochastic bf16 storage, sets of its own for every
// operand, and stochastic chunked sums.
func rough(t testing.TB) func(int) Arm {
	return func(layers int) Arm {
		arm := storageArm(t, stochastic(t, "bf16", 16), layers)
		inside, outer, operand := stochastic(t, "E6M9", 9), point(t, "fp32"), stochastic(t, "E5M5", 8)
		sums := quant.Accumulate{Product: &inside, Sum: inside, Outer: &outer, Order: quant.Order{Kind: quant.Chunk, K: 4}}
		for i := range arm.Layers {
			l := &arm.Layers[i]
			l.Forward = sums
			l.InputGradient = Backward{First: &operand, Gradient: &operand, Sums: sums, Result: l.InputGradient.Result}
			l.WeightGradient = Backward{First: &operand, Gradient: &operand, Sums: sums, Result: l.WeightGradient.Result}
		}
		return arm
	}
}

func TestRunRepeatsItself(t *testing.T) {
	job := convJob(t, rough(t))
	first := mustRun(t, job)
	sameOutcome(t, mustRun(t, job), first)
	job.Seed++
	other := mustRun(t, job)
	if other.Initial[0].Values[0] == first.Initial[0].Values[0] || other.Steps[0] == first.Steps[0] {
		t.Error("another seed draws the same weights")
	}
}

// TestContainersChangeNoBit trains binary32-sized formats in float64 memory.
func TestContainersChangeNoBit(t *testing.T) {
	for _, arm := range []func(int) Arm{rough(t), func(n int) Arm { return baseline(t, n) }} {
		job := convJob(t, arm)
		p, err := job.check()
		if err != nil {
			t.Fatal(err)
		}
		if p.double {
			t.Fatal("binary32 formats do not need float64 memory")
		}
		narrow, err := runIn[float32](context.Background(), &job, nil, p)
		if err != nil {
			t.Fatal(err)
		}
		double, err := runIn[float64](context.Background(), &job, nil, p)
		if err != nil {
			t.Fatal(err)
		}
		sameOutcome(t, double, narrow)
	}
}

func TestContainersFollowTheFormats(t *testing.T) {
	wide := point(t, "fp64")
	set := func(change func(a *Arm)) (double, w bool) {
		arm := baseline(t, 2)
		change(&arm)
		net := network(t, []int{4}, "dense 3", "relu")
		return net.containers(&arm)
	}
	cases := []struct {
		what         string
		change       func(a *Arm)
		double, wide bool
	}{
		{"baseline", func(*Arm) {}, false, false},
		{"binary64 sums", func(a *Arm) { a.Layers[0].Forward.Sum = wide }, true, false},
		{"binary64 products", func(a *Arm) { a.Layers[0].WeightGradient.Sums.Product = &wide }, true, false},
		{"binary64 master", func(a *Arm) { a.Layers[0].Master = wide }, true, true},
		{"binary64 operand", func(a *Arm) { a.Layers[0].InputGradient.Gradient = &wide }, true, true},
		{"binary64 where nothing is computed", func(a *Arm) { a.Layers[1].Master = wide }, false, false},
	}
	for _, c := range cases {
		if double, w := set(c.change); double != c.double || w != c.wide {
			t.Errorf("%s: double %v, wide %v; want %v, %v", c.what, double, w, c.double, c.wide)
		}
	}
}

// TestEvaluationKnowsNoBatch evaluates a stochastic arm whole, in batches, and
// one by one: the losses and answers must not differ.
func TestEvaluationKnowsNoBatch(t *testing.T) {
	job := convJob(t, rough(t))
	loss := func(capacity int) (float64, *Scores) {
		e := engineFor[float32](t, &job)
		e.edges, e.layers, e.params = nil, nil, nil
		if err := e.buildLayers(capacity, nil); err != nil {
			t.Fatal(err)
		}
		if err := e.start(nil); err != nil {
			t.Fatal(err)
		}
		set, err := job.Network.open("test", job.Test, 3, false)
		if err != nil {
			t.Fatal(err)
		}
		scores := newScores(3, false)
		loss, err := e.evaluate(context.Background(), set, phaseTest, 5, scores)
		if err != nil {
			t.Fatal(err)
		}
		return loss, scores
	}
	want, answers := loss(7)
	for _, capacity := range []int{1, 2, 3, 64} {
		got, other := loss(capacity)
		sameBits(t, "loss", []float64{got}, []float64{want})
		if other.Right != answers.Right || other.Ties != answers.Ties {
			t.Errorf("capacity %d: %+v, want %+v", capacity, other, answers)
		}
	}
}

// TestEvaluationDisturbsNothing: losses of training do not depend on what is
// evaluated, and evaluations are not counted.
func TestEvaluationDisturbsNothing(t *testing.T) {
	job := convJob(t, rough(t))
	with := mustRun(t, job)
	job.Training.EvaluateTest, job.Training.EvaluateValidation = Never, Never
	without := mustRun(t, job)
	sameBits(t, "losses", without.Steps, with.Steps)
	for i := range with.Counters {
		if with.Counters[i] != without.Counters[i] {
			t.Errorf("counters %+v, without evaluation %+v", with.Counters[i], without.Counters[i])
		}
	}
	if without.Test != nil || !math.IsNaN(without.Epochs[1].TestLoss) || !math.IsNaN(without.Epochs[1].ValidationAccuracy) {
		t.Error("something was evaluated that should not have been")
	}
	if with.Test == nil || with.Test.Examples != 7 || math.IsNaN(with.Epochs[0].TestLoss) || math.IsNaN(with.Epochs[0].ValidationLoss) {
		t.Error("something was not evaluated that should have been")
	}
	job.Training.EvaluateTest = ""
	last := mustRun(t, job)
	if !math.IsNaN(last.Epochs[0].TestLoss) || last.Epochs[1].TestLoss != with.Epochs[1].TestLoss {
		t.Error("evaluation at the last epoch is not that of every epoch")
	}
}

// TestStepAllocatesNothing, in every kind of arm, after the first step.
func TestStepAllocatesNothing(t *testing.T) {
	arms := map[string]func(int) Arm{
		"baseline": func(n int) Arm { return baseline(t, n) },
		"bf16":     func(n int) Arm { return storageArm(t, point(t, "bf16"), n) },
		"blocks":   func(n int) Arm { return operandArm(t, "MXFP8(E4M3)", n) },
		"integers": func(n int) Arm { return operandArm(t, "INT8(scale=99%)", n) },
		"channels": func(n int) Arm {
			a := baseline(t, n)
			rows, columns := point(t, "INT8(per=channel)"), point(t, "INT8")
			for i := range a.Layers {
				l := &a.Layers[i]
				l.Weight, l.Operand = rows, &columns
				l.InputGradient.First, l.InputGradient.Gradient = &rows, &columns
				l.WeightGradient.First, l.WeightGradient.Gradient = &columns, &rows
			}
			return a
		},
		"dynamic": func(n int) Arm {
			a := storageArm(t, point(t, "fp16"), n)
			a.LossScale.Kind = DynamicScale
			return a
		},
	}
	for name, arm := range arms {
		job := convJob(t, arm)
		e := engineFor[float32](t, &job)
		batch := []int32{3, 1, 4, 2}
		e.step(batch, 0.05)
		if n := testing.AllocsPerRun(5, func() { e.step(batch, 0.05) }); n != 0 {
			t.Errorf("%s: %v allocations a step", name, n)
		}
	}
}

// counter of progress; it can stop the run.
type watcher struct {
	done, total int
	stopAt      int
	stop        context.CancelFunc
}

func (w *watcher) Progress(done, total int) {
	if done != w.done+1 {
		w.stop()
	}
	w.done, w.total = done, total
	if done == w.stopAt {
		w.stop()
	}
}

func TestCancellingStopsWithinAStep(t *testing.T) {
	job := convJob(t, func(n int) Arm { return baseline(t, n) })
	ctx, cancel := context.WithCancel(context.Background())
	w := &watcher{stopAt: 2, stop: cancel}
	_, err := Run(ctx, job, w)
	if !errors.Is(err, context.Canceled) || w.done != 2 || w.total != 6 {
		t.Errorf("stopped with %v after %d of %d steps", err, w.done, w.total)
	}
	w = &watcher{stop: cancel}
	ctx, cancel = context.WithCancel(context.Background())
	late := &watcher{stopAt: 3, stop: cancel} // the last step of an epoch: evaluation is next
	if _, err := Run(ctx, job, late); !errors.Is(err, context.Canceled) || !strings.Contains(err.Error(), "evaluating validation data after epoch 1") {
		t.Errorf("stopped with %v", err)
	}
	if out, err := Run(context.Background(), job, w); err != nil || w.done != 6 || len(out.Steps) != 6 {
		t.Errorf("%v, %d steps of 6 reported", err, w.done)
	}
}

// TestShortLastBatch: nine examples in batches of four end with one example,
// whose error is divided by one.
func TestShortLastBatch(t *testing.T) {
	job := convJob(t, func(n int) Arm { return baseline(t, n) })
	out := mustRun(t, job)
	if len(out.Steps) != 6 {
		t.Fatalf("%d steps, want 6", len(out.Steps))
	}
	weighted := (4*out.Steps[3] + 4*out.Steps[4] + out.Steps[5]) / 9
	if got := out.Epochs[1].TrainLoss; math.Abs(got-weighted) > 1e-15 {
		t.Errorf("epoch loss %v, want %v", got, weighted)
	}
	job.Training.Batch = 100 // more than there are: one step an epoch
	if out := mustRun(t, job); len(out.Steps) != 2 {
		t.Errorf("%d steps, want 2", len(out.Steps))
	}
}

func TestStartFromParameters(t *testing.T) {
	job := convJob(t, func(n int) Arm { return baseline(t, n) })
	first := mustRun(t, job)
	job.Start = first.Final
	second := mustRun(t, job)
	for i := range first.Final {
		sameBits(t, "start", second.Initial[i].Values, first.Final[i].Values)
	}
	if got, want := second.Initial[0].Name, "layer0.weight"; got != want {
		t.Errorf("parameter called %s, want %s", got, want)
	}
	job.Start = append([]Param(nil), first.Final...)
	job.Start[0].Shape = []int{3, 9}
	if _, err := Run(context.Background(), job, nil); err == nil || !strings.Contains(err.Error(), "shape 3x9, the network's layer0.weight has 3x1x3x3") {
		t.Errorf("start of the wrong shape: %v", err)
	}
	job.Start = job.Start[1:]
	if _, err := Run(context.Background(), job, nil); err == nil || !strings.Contains(err.Error(), "5 parameters for a network that has 6") {
		t.Errorf("start of the wrong length: %v", err)
	}
}

// TestArmsShareTheirDraws: binary64 and binary32 arms start from the same drawn
// weights and see the same batches.
func TestArmsShareTheirDraws(t *testing.T) {
	narrow := mustRun(t, convJob(t, func(n int) Arm { return baseline(t, n) }))
	wide := mustRun(t, convJob(t, func(n int) Arm { return Everything(point(t, "fp64"), n, 1) }))
	if narrow.Initial[0].Wide || !wide.Initial[0].Wide {
		t.Error("only the binary64 arm has wide parameters")
	}
	for i, v := range wide.Initial[0].Values {
		if float64(float32(v)) != narrow.Initial[0].Values[i] {
			t.Fatalf("initial weight %d: %v and %v", i, v, narrow.Initial[0].Values[i])
		}
	}
	for i := range wide.Steps {
		if math.Abs(wide.Steps[i]-narrow.Steps[i]) > 1e-5 {
			t.Errorf("step %d: loss %v in binary64, %v in binary32", i, wide.Steps[i], narrow.Steps[i])
		}
	}
}

func TestBadJobsAreRefused(t *testing.T) {
	good := func() Job { return convJob(t, func(n int) Arm { return baseline(t, n) }) }
	cases := []struct {
		change func(j *Job)
		want   string
	}{
		{func(j *Job) { j.Train.Labels[2] = 3 }, "example 2 has label 3, but the network has 3 outputs"},
		{func(j *Job) { j.Test.Inputs.Float32s()[90] = float32(math.NaN()) }, "test data: example 1 holds NaN"},
		{func(j *Job) { j.Train = Set{} }, "training data: no examples"},
		{func(j *Job) { j.Validation.Labels = j.Validation.Labels[:4] }, "do not hold 4 examples of 1x9x9"},
		{func(j *Job) { j.Training.Batch = 0 }, "batch 0, epochs 2"},
		{func(j *Job) { j.Training.Optimizer.Kind = "sdg" }, `unknown optimizer "sdg"; write one of sgd, nesterov, adam, adamw`},
		{func(j *Job) { j.Training.Optimizer.Momentum = 1 }, "momentum is 1"},
		{func(j *Job) { j.Training.Optimizer.Momentum = 0 }, "sets 1 state tensors, the optimizer keeps 0"},
		{func(j *Job) { j.Training.Loss = "hinge" }, `unknown loss "hinge"`},
		{func(j *Job) { j.Training.LearningRate.Start = 1e-60 }, "learning rate 1e-60"},
		{func(j *Job) { j.Training.LearningRate.AtEpochs = []int{2} }, "multiplied by 0"},
		{func(j *Job) { j.Training.EvaluateTest = "always" }, `evaluation of test data at "always"`},
		{func(j *Job) { j.Arm.Layers = j.Arm.Layers[1:] }, "the arm sets 7 layers, the network has 8"},
		{func(j *Job) { j.Arm.Layers[3].Step.Format = nil }, "layer 4 (conv2d out=4 size=2 stride=1 pad=0), update.step: point without a format"},
		{func(j *Job) { j.Arm.LossScale = LossScale{Kind: FixedScale, Value: -1} }, "loss scale of -1"},
		{func(j *Job) { j.Arm.LossScale = LossScale{Kind: DynamicScale, CutBy: 2} }, "cut by a factor of 2"},
		{func(j *Job) { j.Arm.Layers[3].Forward.Order = quant.Order{Kind: quant.Chunk} }, "layer 4"},
		{func(j *Job) { j.Network = Network{} }, "nothing to train"},
	}
	for _, c := range cases {
		job := good()
		c.change(&job)
		if _, err := Run(context.Background(), job, nil); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("error %v, want one with %q", err, c.want)
		}
	}
}
