package main

import (
	"context"
	"errors"
	"slices"
	"time"

	"gorgonia.org/tensor"

	"ulpine/experiments/plan"
	"ulpine/quant/random"
	"ulpine/trainer"
)

// timed is the number of arms that are timed for an estimate: the baseline and
// others at equal distances, as neighbours in a grid are alike.
const timed = 16

// An arm is timed for at least span and leastSteps steps, after warmUp of them, which
// meet cold caches and memory that is yet to grow.
const (
	span       = 50 * time.Millisecond
	leastSteps = 4
	warmUp     = 2
)

// measureRate times training steps of the arms and controls on invented numbers and
// returns multiply-adds a second of one worker, over all runs of the plan: the work of
// each arm at its own speed, or at that of the one timed before it in the plan.
func measureRate(ctx context.Context, p *plan.Plan) (float64, error) {
	var macs, seconds, speed, baseline float64
	add := func(t trainer.Training, task *plan.Task, speed float64) {
		work := float64(trainer.Describe(p.Network, nil, t, task.Sizes()).TotalMACs)
		macs, seconds = macs+work, seconds+work/speed
	}
	every := max(1, float64(len(p.Arms))/timed)
	next := 0.0
	for i, a := range slices.Concat(p.Arms, p.Controls) {
		if control := i >= len(p.Arms); control || float64(i) >= next {
			var err error
			if speed, err = armSpeed(ctx, p, &a); err != nil {
				return 0, err
			}
			next += every
		}
		if i == 0 {
			baseline = speed
		}
		add(a.Training, &p.Task, speed)
	}
	if p.Pretrain != nil {
		add(p.Pretrain.Training, &p.Pretrain.Task, baseline)
	}
	return macs / seconds, nil
}

// armSpeed is multiply-adds a second in training steps of one arm, by the faster half
// of the steps timed: others may need the processor for a while.
func armSpeed(ctx context.Context, p *plan.Plan, a *plan.Arm) (float64, error) {
	const batches, epochs = 4, 1 << 14 // more than are run
	t := a.Training
	t.Epochs, t.LearningRate = epochs, trainer.Schedule{Start: 1e-6} // nothing diverges
	n := batches * t.Batch
	job := trainer.Job{
		Network: p.Network, Arm: a.Arithmetic, Training: t, Seed: 1,
		Train: inventedSet(p.Network, n, t.Regression()),
	}
	inner, cancel := context.WithCancel(ctx)
	defer cancel()
	watch := &stopWatch{enough: cancel, last: time.Now()}
	if _, err := trainer.Run(inner, job, watch); err != nil && !errors.Is(err, context.Canceled) {
		return 0, err
	}
	if err := ctx.Err(); err != nil {
		return 0, err
	}
	step := trainer.Describe(p.Network, &job.Arm, t, trainer.Sizes{Train: n}).StepMACs
	return float64(step) / watch.step().Seconds(), nil
}

// stopWatch times the steps of a training until it has seen enough.
type stopWatch struct {
	enough func()
	last   time.Time
	steps  []time.Duration
	spent  time.Duration // on steps behind the warm-up
}

// Progress is called after each step.
func (w *stopWatch) Progress(done, _ int) {
	now := time.Now()
	d := max(now.Sub(w.last), 1)
	w.last = now
	if done == warmUp+1 {
		w.steps = w.steps[:0]
	}
	w.steps = append(w.steps, d)
	if done <= warmUp {
		return
	}
	if w.spent += d; w.spent >= span && len(w.steps) >= leastSteps {
		w.enough()
	}
}

// step is the mean time of the faster half of the steps: of the warm-up only if the
// training went no further.
func (w *stopWatch) step() time.Duration {
	slices.Sort(w.steps)
	half := w.steps[:(len(w.steps)+1)/2]
	var sum time.Duration
	for _, d := range half {
		sum += d
	}
	return sum / time.Duration(len(half))
}

// inventedSet is n examples of normal numbers with labels in turn, or with normal
// numbers as targets.
func inventedSet(n trainer.Network, examples int, regression bool) trainer.Set {
	shape := append([]int{examples}, n.Input...)
	set := trainer.Set{
		Inputs: tensor.New(tensor.WithShape(shape...), tensor.Of(tensor.Float32)),
		Labels: make([]int32, examples),
	}
	draws := random.Draws{Seed: random.Derive(1, random.Data)}
	for i, values := 0, set.Inputs.Float32s(); i < len(values); i++ {
		values[i] = float32(draws.Normal(uint64(i)))
	}
	if regression {
		set.Labels, set.Targets = nil, tensor.New(tensor.WithShape(examples, n.Outputs()), tensor.Of(tensor.Float32))
		draws.Site = 1
		for i, values := 0, set.Targets.Float32s(); i < len(values); i++ {
			values[i] = float32(draws.Normal(uint64(i)))
		}
		return set
	}
	for i := range set.Labels {
		set.Labels[i] = int32(i % n.Outputs())
	}
	return set
}
