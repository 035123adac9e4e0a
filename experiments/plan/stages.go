package plan

import (
	"fmt"
	"slices"

	"ulpine/trainer"
)

// Stage is a part of an arm's training that changes arithmetic.
type Stage struct {
	Start     string // "epoch 8", "step 501"
	Settings  []Setting
	Summary   string // what it changes, as the plan spells it
	LossScale string // in words

	assignment *assignment
	scaled     bool // it sets a loss scale, its own from there on
}

// stageStart are the keys of which a stage has one.
var stageStart = []string{"from_epoch", "from_step"}

// stageKeys are the keys of a stage that set no point.
var stageKeys = []string{"from_epoch", "from_step", "layer", "loss_scale"}

// readStages reads the [[stage]] tables of an arm whose settings are read. A stage
// starts from what holds before it; what it does not set stays as it is.
func (r *armReader) readStages(n *node, arm *Arm, a *assignment, scale trainer.LossScale) (stages []trainer.Stage) {
	states, _ := arm.Training.Optimizer.States()
	last := 1
	for _, at := range r.tables(n, "stage") {
		own := a.goesOn()
		r.readSettings(at, selection{}, &own, r.formats, stageKeys)
		r.readLayers(at, &own)
		if l := at.table["loss_scale"]; l != nil {
			scale = r.readLossScale(l)
		} else if len(own.spelled) == 0 {
			r.fail(at.errorf(`write storage = "fp32" or a point's key`, "the stage changes nothing"))
		}
		r.checkStates(&own, states)
		s := trainer.Stage{Arm: own.arm(r.network, states)}
		s.Arm.LossScale = scale
		r.readStart(at, &s, &arm.Training, &last)
		stages = append(stages, s)
		arm.Stages = append(arm.Stages, Stage{
			Start: startText(&s), Settings: settings(r.network, &s.Arm), LossScale: describeLossScale(scale), assignment: &own,
			Summary: stageSummary(&own, at.table["loss_scale"] != nil, scale), scaled: at.table["loss_scale"] != nil,
		})
		a = &own
	}
	return stages
}

// readStart reads where a stage starts; last is the first step of the one before it.
func (r *armReader) readStart(n *node, s *trainer.Stage, t *trainer.Training, last *int) {
	given := slices.DeleteFunc(slices.Clone(stageStart), func(k string) bool { return n.table[k] == nil })
	switch len(given) {
	case 0:
		r.fail(n.errorf("write from_epoch = 8 or from_step = 500", "the stage does not say when it starts"))
		return
	case 2:
		r.fail(n.table[given[1]].errorf("keep one of them", "the stage starts with an epoch and with a step"))
		return
	}
	key := given[0]
	at := n.table[key]
	before := len(r.errs)
	number := int(r.whole(n, key, 2, 2, maxCount))
	if len(r.errs) > before {
		return
	}
	most, what := t.Epochs, "epochs"
	each := 0
	if r.examples > 0 {
		each = trainer.Describe(trainer.Network{}, nil, trainer.Training{Batch: t.Batch, Epochs: 1}, trainer.Sizes{Train: r.examples}).Steps
	}
	if s.Epoch = number; key == stageStart[1] {
		s.Epoch, s.Step = 0, number
		most, what = each*t.Epochs, "steps"
	}
	if most > 0 && number > most {
		r.fail(at.errorf("let it start earlier", "starts with number %d, but the arm trains for %d %s", number, most, what))
		return
	}
	if each == 0 {
		return // the trainer compares starts when it knows the examples
	}
	if first := s.First(each); first <= *last {
		r.fail(at.errorf("order stages by their start", "starts with step %d, no later than the stage before it", first))
	} else {
		*last = first
	}
}

// startText says where a stage starts.
func startText(s *trainer.Stage) string {
	if s.Epoch > 0 {
		return fmt.Sprintf("epoch %d", s.Epoch)
	}
	return fmt.Sprintf("step %d", s.Step)
}

// stageSummary is what a stage changes in one line.
func stageSummary(a *assignment, scaled bool, l trainer.LossScale) string {
	parts := slices.Clone(a.spelled)
	if scaled {
		parts = append(parts, "loss scale "+describeLossScale(l))
	}
	return joined(parts)
}

// goesOn is what a stage is before its settings are read: everything as it was, and
// nothing so specific that the stage could not change it.
func (a *assignment) goesOn() assignment {
	b := assignment{slots: slices.Clone(a.slots), layers: make([][]slot, len(a.layers))}
	for i := range b.layers {
		b.layers[i] = slices.Clone(a.layers[i])
	}
	for _, slots := range append(slices.Clone(b.layers), b.slots) {
		for id := range slots {
			slots[id].rank, slots[id].at = specificity{}, nil
		}
	}
	return b
}

// atStage is an arm as it is in one of its stages, for what spells arms out.
func (a *Arm) atStage(i int) *Arm {
	s := &a.Stages[i]
	return &Arm{Settings: s.Settings, assignment: s.assignment}
}
