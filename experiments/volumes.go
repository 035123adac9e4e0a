package experiments

import (
	"math"

	"ulpine/experiments/plan"
	"ulpine/results"
	"ulpine/trainer"
)

// volumes is how many values a whole training rounds at each point, from the
// plan's shapes; nil where the number of examples is not known beforehand. Sums
// count their multiply-adds, one partial sum each, padding included.
func volumes(p *plan.Plan) []results.Volume {
	if p.Task.Train <= 0 || len(p.Network.Layers) == 0 {
		return nil
	}
	t := &p.Training
	examples := uint64(p.Task.Train) * uint64(t.Epochs)
	steps := uint64(t.Epochs) * uint64((p.Task.Train+t.Batch-1)/t.Batch)
	first, last := &p.Network.Layers[0], &p.Network.Layers[len(p.Network.Layers)-1]
	all := []results.Volume{
		{Layer: -1, Point: trainer.Input.String(), Values: examples * uint64(volume(first.In))},
		{Layer: -1, Point: trainer.LossGradient.String(), Values: examples * uint64(volume(last.Out))},
	}
	below := false // whether layer i forms the gradient of its input
	for i := range p.Network.Layers {
		l := &p.Network.Layers[i]
		below = below || i > 0 && len(p.Network.Layers[i-1].Params) > 0
		for _, id := range p.Network.PointsOf(i) {
			if n := perExample(l, id, below)*examples + perStep(l, id)*steps; n > 0 {
				all = append(all, results.Volume{Layer: i, Point: id.String(), Values: n})
			}
		}
	}
	return all
}

// perExample is how many values of an example a layer rounds at a point; below tells
// whether the gradient of its input is formed.
func perExample(l *trainer.Spec, id trainer.PointID, below bool) uint64 {
	if l.Inner != (trainer.Inner{}) {
		return perExampleWithin(l, id, below)
	}
	switch id {
	case trainer.ForwardActivation, trainer.InputGradientGradient, trainer.WeightGradientGradient:
		return uint64(volume(l.Out))
	case trainer.InputGradientResult, trainer.WeightGradientActivation, trainer.ForwardOperand:
		return uint64(volume(l.In))
	case trainer.ForwardProduct, trainer.ForwardSum:
		return l.MACs.Forward
	case trainer.InputGradientProduct, trainer.InputGradientSum:
		return l.MACs.InputGradient
	case trainer.WeightGradientProduct, trainer.WeightGradientSum:
		return l.MACs.WeightGradient
	}
	return 0
}

// perExampleWithin is perExample for a layer of several products.
func perExampleWithin(l *trainer.Spec, id trainer.PointID, below bool) uint64 {
	n := &l.Inner
	switch id {
	case trainer.ForwardActivation:
		return uint64(volume(l.Out)) + n.Values
	case trainer.ForwardOperand:
		return n.Operands
	case trainer.InputGradientGradient:
		if below {
			return n.Pulled + n.PulledInputs
		}
		return n.Pulled
	case trainer.WeightGradientActivation:
		return n.Activations
	case trainer.WeightGradientGradient:
		return n.Slopes
	case trainer.ForwardProduct, trainer.ForwardSum:
		return l.MACs.Forward
	case trainer.WeightGradientProduct, trainer.WeightGradientSum:
		return l.MACs.WeightGradient
	case trainer.InputGradientProduct, trainer.InputGradientSum:
		if below {
			return l.MACs.InputGradient
		}
		return n.BackMACs
	case trainer.InputGradientResult:
		if below {
			return n.Gradients + n.Inputs + uint64(volume(l.In))
		}
		return n.Gradients
	}
	return 0
}

// perStep is how many values a layer rounds at a point once a step: those of its
// parameters.
func perStep(l *trainer.Spec, id trainer.PointID) uint64 {
	all, weights := uint64(0), uint64(0)
	for _, q := range l.Params {
		n := uint64(volume(q.Shape))
		all += n
		if q.FanIn > 0 {
			weights += n
		}
	}
	switch id {
	case trainer.ForwardWeight, trainer.WeightGradientResult, trainer.WeightGradientResidue, trainer.UpdateState, trainer.UpdateStep, trainer.UpdateMaster:
		return all
	case trainer.InputGradientWeight:
		return weights
	}
	return 0
}

// ranges are the formats of a plan with what they can hold, each once.
func ranges(p *plan.Plan) []results.Range {
	var all []results.Range
	seen := map[string]bool{}
	add := func(points ...plan.Point) {
		for _, q := range points {
			if q.Format == nil || plan.SharesScales(q.Format) || seen[q.Format.String()] {
				continue
			}
			seen[q.Format.String()] = true
			if r, ok := rangeOf(q.Format); ok {
				all = append(all, r)
			}
		}
	}
	for i := range p.Arms {
		a := &p.Arms[i].Arithmetic
		add(a.Input, a.LossGradient)
		for k := range a.Layers {
			l := &a.Layers[k]
			add(l.Weight, l.Activation, l.Forward.Sum, l.InputGradient.Sums.Sum, l.InputGradient.Result,
				l.WeightGradient.Sums.Sum, l.WeightGradient.Result, l.Step, l.Master)
			add(l.States...)
		}
	}
	return all
}

// rangeOf is what a format can hold; false for one without a least value.
func rangeOf(f plan.Format) (results.Range, bool) {
	m := f.Limits()
	least := m.MinSubnormal
	if m.Flush {
		least = m.MinNormal
	}
	if !(least > 0) || !(m.Max >= least) {
		return results.Range{}, false
	}
	normal := exponent(least) // a format without subnormals
	if m.MinNormal > 0 {
		normal = exponent(m.MinNormal)
	}
	return results.Range{Format: f.String(), Least: exponent(least), Normal: normal, Largest: exponent(m.Max)}, true
}

// exponent is the binary exponent of a positive number.
func exponent(x float64) int {
	_, e := math.Frexp(x)
	return e - 1
}
