package plan

import (
	"fmt"
	"math"
	"slices"

	"ulpine/quant"
	"ulpine/trainer"
)

// warn lists what is allowed but makes a reader doubt the result. Warnings
// travel with the results into the report.
func (p *Plan) warn() []string {
	var w []string
	if p.Replicates.Count == 1 {
		w = append(w, "one replicate: no interval can be given, and so no verdict")
	}
	if fp32 := binary32Everywhere(len(p.Network.Layers)); !p.sameArithmetic(p.Baseline(), &fp32) {
		w = append(w, "the baseline is not binary32 throughout: differences are against "+p.Baseline().Summary)
	}
	for i := range p.Arms {
		a := &p.Arms[i]
		for _, text := range p.warnArm(a) {
			w = append(w, fmt.Sprintf("arm %q: %s", a.Name, text))
		}
	}
	return append(w, p.warnSchedules()...)
}

// sameArithmetic reports whether an arm rounds as an assignment would.
func (p *Plan) sameArithmetic(a *Arm, as *assignment) bool {
	states, _ := a.Training.Optimizer.States()
	other := *a
	other.Arithmetic = as.arm(&p.Network, states)
	return other.canonical(&p.Network) == a.Canonical
}

// warnArm lists the doubts about one arm.
func (p *Plan) warnArm(a *Arm) []string {
	w := warnScale(a.Arithmetic.LossScale)
	for i := range a.Arithmetic.Stages {
		for _, text := range warnScale(a.Arithmetic.Stages[i].Arm.LossScale) {
			if !slices.Contains(w, text) {
				w = append(w, text)
			}
		}
	}
	w = append(w, p.warnOrders(a)...)
	for _, o := range a.Overrides {
		if o == "learning rate" && !p.sameArithmetic(a, p.Baseline().assignment) {
			w = append(w, "changes the learning rate and the arithmetic at once: its difference cannot be put down to either")
		}
	}
	return w
}

// warnScale doubts a loss scale that rounds what it scales.
func warnScale(l trainer.LossScale) []string {
	var w []string
	check := func(what string, x float64) {
		if half, _ := math.Frexp(x); x != 0 && half != 0.5 {
			w = append(w, fmt.Sprintf("a loss scale %s %g is no power of two: scaling itself rounds", what, x))
		}
	}
	check("of", l.Value)
	if l.Kind == trainer.DynamicScale {
		check("raised by a factor of", l.RaiseBy)
		check("cut by a factor of", l.CutBy)
	}
	return w
}

// sumPhases are the three sum points with what people call them.
var sumPhases = []struct {
	id   trainer.PointID
	name string
}{
	{trainer.ForwardSum, "forward"},
	{trainer.InputGradientSum, "input gradient"},
	{trainer.WeightGradientSum, "weight gradient"},
}

// warnOrders doubts chunks and lanes that no sum fills: the order then does not
// do what the plan's author has in mind.
func (p *Plan) warnOrders(a *Arm) []string {
	longest := map[quant.Order]int{} // longest sum that is added in an order
	var orders []quant.Order
	d := trainer.Describe(p.Network, nil, a.Training, p.Task.Sizes())
	for i, l := range d.Layers {
		for _, phase := range sumPhases {
			order := sumOf(phase.id, &a.Arithmetic.Layers[i]).Order
			if _, known := longest[order]; !known {
				orders = append(orders, order)
			}
			longest[order] = max(longest[order], lengthOf(phase.id, l.Sums))
		}
	}
	var w []string
	for _, order := range orders {
		if n := longest[order]; order.K > n && n > 0 {
			w = append(w, fmt.Sprintf("%s is longer than any sum it applies to (at most %d terms): it never takes effect", order, n))
		}
	}
	return w
}

// lengthOf is the number of terms of the longest sum at a sum point.
func lengthOf(id trainer.PointID, l trainer.Lengths) int {
	switch id {
	case trainer.ForwardSum:
		return l.Forward
	case trainer.InputGradientSum:
		return l.InputGradient
	}
	return max(l.WeightGradient, l.BiasGradient)
}

// warnSchedules doubts learning rates that change after the last epoch.
func (p *Plan) warnSchedules() []string {
	var w []string
	check := func(who string, t trainer.Training) {
		for _, at := range t.LearningRate.AtEpochs {
			if at > t.Epochs {
				w = append(w, fmt.Sprintf("%s: the learning rate change at epoch %d is never reached: the last epoch is %d", who, at, t.Epochs))
			}
		}
	}
	check("training", p.Training)
	if p.Pretrain != nil {
		check("pretraining", p.Pretrain.Training)
	}
	for i := range p.Arms {
		if len(p.Arms[i].Overrides) > 0 {
			check(fmt.Sprintf("arm %q", p.Arms[i].Name), p.Arms[i].Training)
		}
	}
	return w
}
