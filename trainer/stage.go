package trainer

import (
	"fmt"

	"ulpine/quant"
)

// Stage is a part of a training with an arithmetic of its own: it holds from the
// stage's first step on, up to the next stage's. When it starts, every stored tensor
// whose point it changes is rounded once at its new point,
//
//	master = R[update.master](master)            running statistics: R[forward.moment]
//	state  = R[update.state](state)
//	e      = R[weight_gradient.residue](e)       a new residue starts at +0
//
// and the working copy is made anew where its point or the master's has changed; all
// other tensors stay as they are, so that a stage which changes nothing changes no
// bit. The random words are those of the same operations under phase 3 of the step
// that the stage starts with, and range events count. Gradients and activations live
// within a step. A loss scale that the stage changes starts anew, residues following
// it; one that it does not change goes on. Evaluations are made in the arithmetic of
// the step before them.
type Stage struct {
	Epoch int // the first epoch, from 2; 0: Step says where it starts
	Step  int // the first step, from 2
	Arm   Arm // its own stages are not used
}

// phaseStage is the phase of the random words that a stage's start draws.
const phaseStage = 3

// First is the stage's first step where an epoch has so many.
func (s *Stage) First(stepsPerEpoch int) int {
	if s.Epoch > 0 {
		return (s.Epoch-1)*stepsPerEpoch + 1
	}
	return s.Step
}

// arms are the arithmetic of the whole training and of its stages.
func (a *Arm) arms() []*Arm {
	all := []*Arm{a}
	for i := range a.Stages {
		all = append(all, &a.Stages[i].Arm)
	}
	return all
}

// checkStages holds stages to their order and to the length of the training.
func (j *Job) checkStages(p *parts) error {
	each := stepCount(1, p.train.size(), min(j.Training.Batch, p.train.size()))
	before := 1
	for i := range j.Arm.Stages {
		first := j.Arm.Stages[i].First(each)
		switch {
		case first <= before:
			return fmt.Errorf("stage %d starts with step %d, no later than what comes before it; order stages by their start, the first after step 1", i+1, first)
		case first > each*j.Training.Epochs:
			return fmt.Errorf("stage %d starts with step %d, but the training has %d; let it start earlier", i+1, first, each*j.Training.Epochs)
		}
		before = first
	}
	return nil
}

// enter starts the stages that begin with a step.
func (r *run[T]) enter(step int) error {
	if len(r.stages) == 0 || r.stages[0].First(r.stepsPerEpoch) != step {
		return nil
	}
	job := *r.job
	job.Arm = r.stages[0].Arm
	next, err := newEngine[T](&job, r.parts.train, r.parts)
	if err != nil {
		return fmt.Errorf("trainer: stage from step %d: %w", step, err)
	}
	next.takeOver(r.engine, uint32(step))
	r.engine, r.stages = next, r.stages[1:]
	return nil
}

// takeOver goes on where another engine of the same training stands, from a step on.
func (e *engine[T]) takeOver(old *engine[T], step uint32) {
	e.pass, e.tally, e.epoch, e.moment = old.pass, old.tally, old.epoch, old.moment
	e.scores, e.observer, e.twin, e.change = old.scores, old.observer, old.twin, old.change
	e.mover.rule = old.mover.rule // what it counts besides states
	start := e.pass
	start.step, start.phase, start.watch = step, phaseStage, nil
	for i, q := range e.params {
		q.takeOver(&start, old.params[i])
	}
	if e.scaler.set == old.scaler.set {
		e.scaler = old.scaler
		return
	}
	e.scaler.skipped, e.scaler.row = old.scaler.skipped, old.scaler.row
	e.rescaleResidues(&start, old.scaler.s)
}

// takeOver rounds what another engine's parameter holds at this one's points.
func (q *param[T]) takeOver(p *pass, old *param[T]) {
	again := func(id PointID, o operation, dst, src []T, to, from *quant.Point) (same bool) {
		if same = to.String() == from.String(); same {
			copy(dst, src)
			return same
		}
		round(q.place, p, id, o.of(q.number), dst, src, to, 0)
		return same
	}
	if q.fixed {
		again(ForwardMoment, opMaster, q.master.data, old.master.data, q.set.moment(), old.set.moment())
		return
	}
	same := again(UpdateMaster, opMaster, q.master.data, old.master.data, &q.set.Master, &old.set.Master)
	for s := range q.states {
		again(UpdateState, opStateNumber(s, 0), q.states[s].data, old.states[s].data, &q.set.States[s], &old.set.States[s])
	}
	if to, from := q.set.WeightGradient.Residue, old.set.WeightGradient.Residue; to != nil && from != nil {
		again(WeightGradientResidue, opResidue, q.residue.data, old.residue.data, to, from)
	}
	if same && q.set.Weight.String() == old.set.Weight.String() {
		copy(q.working.data, old.working.data)
		copy(q.factors, old.factors)
		return
	}
	q.refresh(p)
}
