package trainer

import (
	"context"
	"fmt"
	"math"

	"ulpine/quant"
)

// Job is one training: what is trained, with which arithmetic, on what.
type Job struct {
	Network  Network
	Arm      Arm
	Training Training
	// Seed is the replicate's: it fixes initial weights, the order of batches and
	// random bits of rounding, for all arms alike.
	Seed  uint64
	Start []Param // nil: initial weights are drawn
	// Train must hold examples; Validation and Test may be empty.
	Train, Validation, Test Set
	Diagnostics             Diagnostics
	// Team may help with the products of linear layers; nil: nobody does. It changes
	// no bit.
	Team *Team
}

// Team is who may help with a training's products: goroutines that are in its Help.
type Team = quant.Team

// NewTeam returns a team of up to most helpers at a time.
func NewTeam(most int) *Team { return quant.NewTeam(most) }

// Watcher is told how far a run is: training steps done, of all it may take. A
// run that diverges stops short of total.
type Watcher interface {
	Progress(done, total int)
}

// parts are what checking a job yields.
type parts struct {
	rule         *ruleKind
	loss         lossRule
	classes      int
	largest      int // examples of the largest set
	double, wide bool
	train        *split
	validation   *split
	test         *split
}

// Run trains. Cancelling ctx stops it within a step, or a batch of an evaluation,
// with ctx's error; a run that diverges is an outcome, not an error. w may be nil.
// The outcome depends on the job alone: not on machine, memory or time.
func Run(ctx context.Context, job Job, w Watcher) (Outcome, error) {
	p, err := job.check()
	if err != nil {
		return Outcome{}, fmt.Errorf("trainer: %w", err)
	}
	if p.double {
		return runIn[float64](ctx, &job, w, p)
	}
	return runIn[float32](ctx, &job, w, p)
}

// runIn trains with tensors of one element type.
func runIn[T quant.Element](ctx context.Context, job *Job, w Watcher, parts parts) (Outcome, error) {
	e, err := newEngine[T](job, parts.train, parts)
	if err == nil {
		err = e.start(job.Start)
	}
	if err == nil {
		err = e.observe(job, parts)
	}
	if err != nil {
		return Outcome{}, fmt.Errorf("trainer: %w", err)
	}
	r := newRun(e, job, parts, w)
	r.out.Initial = e.record()
	for epoch := 1; epoch <= job.Training.Epochs && r.out.Diverged == ""; epoch++ {
		if err := r.epoch(ctx, epoch); err != nil {
			return Outcome{}, err
		}
	}
	return r.finish(), nil
}

// run is the state of a training between its steps.
type run[T quant.Element] struct {
	*engine[T]
	job   *Job
	parts parts
	watch Watcher
	out   Outcome

	stages        []Stage // still to come
	stepsPerEpoch int

	order    []int32
	total    int        // steps
	high     int        // epochs running with a loss far above the first step's
	answers  [2]*Scores // of the validation and of the test set
	skipped0 uint64     // steps skipped before this epoch
}

func newRun[T quant.Element](e *engine[T], job *Job, parts parts, w Watcher) *run[T] {
	n := e.train.size()
	total := stepCount(job.Training.Epochs, n, e.batch)
	r := &run[T]{engine: e, job: job, parts: parts, watch: w, order: make([]int32, n), total: total}
	r.stages, r.stepsPerEpoch = job.Arm.Stages, stepCount(1, n, e.batch)
	r.out.Steps = make([]float64, 0, total)
	for i := range r.answers {
		r.answers[i] = newScores(parts.classes, parts.loss.regression())
		r.answers[i].keep = true
	}
	return r
}

// epoch trains on all examples once, then evaluates.
func (r *run[T]) epoch(ctx context.Context, epoch int) error {
	if r.job.Training.Shuffle {
		shuffle(r.order, r.seed, epoch)
	} else {
		identity(r.order)
	}
	r.engine.epoch = epoch
	r.scores.reset()
	r.skipped0 = r.scaler.skipped
	loss, err := r.steps(ctx, epoch)
	if err != nil {
		return err
	}
	r.judgeEpoch(loss)
	if r.observer != nil {
		r.observer.end(epoch)
	}
	last := epoch == r.job.Training.Epochs || r.out.Diverged != ""
	m, err := r.measure(ctx, epoch, loss, last)
	r.out.Epochs = append(r.out.Epochs, m)
	return err
}

// steps takes the steps of one epoch and returns the mean of their losses,
// weighted by batch size, in the order of the steps.
func (r *run[T]) steps(ctx context.Context, epoch int) (float64, error) {
	var sum float64
	done := 0
	for done < len(r.order) {
		if err := ctx.Err(); err != nil {
			return 0, fmt.Errorf("stopped in step %d of %d: %w", len(r.out.Steps)+1, r.total, err)
		}
		if err := r.enter(len(r.out.Steps) + 1); err != nil {
			return 0, err
		}
		batch := r.order[done:min(done+r.batch, len(r.order))]
		rate := r.job.Training.LearningRate.at(epoch, len(r.out.Steps)+1, r.total)
		r.moment.before, r.moment.epochEnds = uint32(done/r.batch), done+len(batch) == len(r.order)
		r.moment.runEnds = len(r.out.Steps)+1 == r.total
		loss, what := r.step(batch, rate)
		r.out.Steps = append(r.out.Steps, loss)
		sum += float64(loss * float64(len(batch)))
		done += len(batch)
		if r.watch != nil {
			r.watch.Progress(len(r.out.Steps), r.total)
		}
		if r.judgeStep(what); r.out.Diverged != "" {
			break
		}
	}
	return sum / float64(done), nil
}

// measure writes down an epoch and evaluates what is due.
func (r *run[T]) measure(ctx context.Context, epoch int, loss float64, last bool) (m Epoch, err error) {
	t := &r.job.Training
	nan := math.NaN()
	m = Epoch{
		TrainLoss: loss, TrainAccuracy: r.scores.Accuracy(), TrainRMSE: r.scores.RMSE(),
		ValidationLoss: nan, ValidationAccuracy: nan, TestLoss: nan, TestAccuracy: nan,
		ValidationRMSE: nan, TestRMSE: nan,
		LossScale: r.scaler.s, Skipped: r.scaler.skipped - r.skipped0,
	}
	if r.parts.validation.size() > 0 && t.EvaluateValidation.due(last) {
		m.ValidationLoss, err = r.evaluate(ctx, r.parts.validation, phaseValidation, epoch, r.answers[0])
		if err != nil {
			return m, err
		}
		m.ValidationAccuracy, m.ValidationRMSE = r.answers[0].Accuracy(), r.answers[0].RMSE()
		m.Validation = r.answers[0].byClass()
	}
	if r.parts.test.size() > 0 && t.EvaluateTest.due(last) {
		m.TestLoss, err = r.evaluate(ctx, r.parts.test, phaseTest, epoch, r.answers[1])
		m.TestAccuracy, m.TestRMSE, m.Ties = r.answers[1].Accuracy(), r.answers[1].RMSE(), r.answers[1].Ties
		m.Test, r.out.Test = r.answers[1].byClass(), r.answers[1]
	}
	return m, err
}

// finish completes the outcome.
func (r *run[T]) finish() Outcome {
	r.out.Final = r.record()
	if r.observer != nil {
		r.out.Findings = r.observer.found
	}
	r.out.Counters = r.net.counters(&r.job.Arm, r.tally)
	if last := len(r.out.Epochs) - 1; r.out.Diverged == "" && last >= 0 {
		constant := r.parts.loss.constant(r.parts.train, r.parts.classes)
		r.out.Stalled = r.out.Epochs[last].TrainLoss > float64(stallShare*constant)
	}
	return r.out
}
