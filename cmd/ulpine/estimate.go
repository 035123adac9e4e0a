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

// An arm is timed for at least span, in leastGroups groups of steps: whole epochs,
// with all that comes once an epoch, or what fills long.
const (
	span        = 50 * time.Millisecond
	long        = 10 * time.Millisecond
	leastGroups = 4
)

// measureRate times training steps of the arms and controls on invented numbers, and
// the drawing of a replicate's data where each has its own. It returns multiply-adds a
// second of one worker, over all runs of the plan: the work of each arm at its own
// speed, or at that of the one timed before it in the plan.
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
	seconds += drawing(&p.Task, p.Replicates.FirstSeed)
	if p.Pretrain != nil {
		add(p.Pretrain.Training, &p.Pretrain.Task, baseline)
		seconds += drawing(&p.Pretrain.Task, p.Replicates.FirstSeed)
	}
	return macs / seconds, nil
}

// drawing is how long it takes to draw the data of a replicate, in seconds; 0 where
// all share what files hold.
func drawing(t *plan.Task, seed uint64) float64 {
	if !t.PerReplicate {
		return 0
	}
	began := time.Now()
	if _, err := t.Source.Load(seed); err != nil {
		return 0 // told when the plan is run
	}
	return time.Since(began).Seconds()
}

// armSpeed is multiply-adds a second of one arm in training, the looks of its
// diagnostics included, by the faster half of what was timed: others may need the
// processor for a while.
func armSpeed(ctx context.Context, p *plan.Plan, a *plan.Arm) (float64, error) {
	const steps, values = 1 << 16, 1 << 20 // at most: of the training, of its inputs
	t := a.Training
	n := min(p.Task.Train, max(4*t.Batch, values/product(p.Network.Input)))
	each := (n + t.Batch - 1) / t.Batch
	t.Epochs, t.LearningRate = max(2, steps/each), trainer.Schedule{Start: 1e-6} // nothing diverges
	job := trainer.Job{
		Network: p.Network, Arm: a.Arithmetic, Training: t, Seed: 1,
		Train:       inventedSet(p.Network, n, t.Regression()),
		Diagnostics: trainer.Diagnostics(p.Diagnostics),
	}
	job.Arm.Stages = nil // the first one tells
	inner, cancel := context.WithCancel(ctx)
	defer cancel()
	watch := &stopWatch{enough: cancel, each: each, from: time.Now()}
	if _, err := trainer.Run(inner, job, watch); err != nil && !errors.Is(err, context.Canceled) {
		return 0, err
	}
	if err := ctx.Err(); err != nil {
		return 0, err
	}
	d := trainer.Describe(p.Network, &job.Arm, t, trainer.Sizes{Train: n})
	return float64(d.TotalMACs) / float64(d.Steps) / watch.step(), nil
}

// product is the number of values of a shape.
func product(shape []int) int {
	n := 1
	for _, d := range shape {
		n *= d
	}
	return n
}

// stopWatch times the steps of a training until it has seen enough.
type stopWatch struct {
	enough func()
	each   int       // steps of an epoch
	from   time.Time // when the group at hand began
	steps  int       // of the group
	first  float64   // seconds of the first step
	groups []float64 // seconds a step, of groups finished
	spent  time.Duration
}

// Progress is called after each step. A group is the steps behind the first of an
// epoch up to that of the next.
func (w *stopWatch) Progress(done, _ int) {
	now := time.Now()
	w.steps++
	d := now.Sub(w.from)
	switch {
	case done == 1: // meets cold caches and memory that is yet to grow
		w.first = d.Seconds()
	case d < long && (done-1)%w.each != 0:
		return
	default:
		w.groups = append(w.groups, d.Seconds()/float64(w.steps))
		w.spent += d
	}
	w.from, w.steps = now, 0
	if w.spent >= span && len(w.groups) >= leastGroups {
		w.enough()
	}
}

// step is the mean time of a step in the faster half of the groups, in seconds.
func (w *stopWatch) step() float64 {
	if len(w.groups) == 0 {
		return max(w.first, 1e-9) // the training broke off at once
	}
	slices.Sort(w.groups)
	half := w.groups[:(len(w.groups)+1)/2]
	var sum float64
	for _, d := range half {
		sum += d
	}
	return max(sum/float64(len(half)), 1e-9)
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
