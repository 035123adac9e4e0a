package plan

import (
	"fmt"
	"slices"

	"ulpine/quant"
	"ulpine/trainer"
)

// arm turns an assignment into what the trainer takes, one arithmetic a layer.
// states is the number of state tensors of the arm's optimizer.
func (a *assignment) arm(network *trainer.Network, states int) trainer.Arm {
	arm := trainer.Arm{
		Input:        a.slots[trainer.Input].value.point,
		Channels:     a.slots[trainer.Input].value.channelPoints(),
		LossGradient: a.slots[trainer.LossGradient].value.point,
		Layers:       make([]trainer.Arithmetic, len(network.Layers)),
	}
	for i := range arm.Layers {
		arm.Layers[i] = assigned(a.layers[i]).layer(states)
	}
	for i := range arm.Layers {
		reuseOperands(network, &arm, i)
	}
	return arm
}

// assigned are the slots of one layer.
type assigned []slot

// layer is the arithmetic of one layer.
func (a assigned) layer(states int) trainer.Arithmetic {
	at := func(id trainer.PointID) quant.Point { return a[id].value.point }
	return trainer.Arithmetic{
		Statistic:  a.statistic(trainer.ForwardStatistic, trainer.ForwardProduct),
		Moment:     a.moment(),
		Weight:     at(trainer.ForwardWeight),
		Activation: at(trainer.ForwardActivation),
		Operand:    a.optional(trainer.ForwardOperand),
		Forward:    a.accumulate(trainer.ForwardProduct),
		InputGradient: trainer.Backward{
			First:    a.optional(trainer.InputGradientWeight),
			Gradient: a.optional(trainer.InputGradientGradient),
			Sums:     a.accumulate(trainer.InputGradientProduct),
			Result:   at(trainer.InputGradientResult),

			Statistic: a.statistic(trainer.InputGradientStatistic, trainer.InputGradientProduct),
		},
		WeightGradient: trainer.Backward{
			First:    a.optional(trainer.WeightGradientActivation),
			Gradient: a.optional(trainer.WeightGradientGradient),
			Sums:     a.accumulate(trainer.WeightGradientProduct),
			Result:   at(trainer.WeightGradientResult),
			Residue:  a.optional(trainer.WeightGradientResidue),
		},
		States: a.states(states),
		Step:   at(trainer.UpdateStep),
		Master: at(trainer.UpdateMaster),
	}
}

// states are the points of the state tensors; where another optimizer keeps more
// of them than were listed, as a pretraining's may, the last stands for the rest.
func (a assigned) states(count int) []quant.Point {
	v := a[trainer.UpdateState].value
	all := slices.Clone(v.states)
	if len(all) == 0 {
		all = append(all, v.point)
	}
	for len(all) < count {
		all = append(all, all[len(all)-1])
	}
	return all[:count]
}

// optional is a point of its own copy, or nil where it is unset.
func (a assigned) optional(id trainer.PointID) *quant.Point {
	s := &a[id]
	if !s.set || s.value.exact {
		return nil
	}
	p := s.value.point
	return &p
}

// accumulate is the sum whose product point is given; sum and outer follow it in
// the order of points.
func (a assigned) accumulate(product trainer.PointID) quant.Accumulate {
	sum := a[product+1].value
	acc := quant.Accumulate{
		Product: a.optional(product), Sum: sum.point, Order: sum.order, Through32: sum.through,
		Outer: a.optional(product + 2),
	}
	if acc.Outer != nil && samePoint(*acc.Outer, acc.Sum) {
		acc.Outer = nil // what an unset one means
	}
	return acc
}

// statistic is the accumulation of a normalisation's sums, products rounded as
// those of its phase; nil where it is that of the phase, whose product point is given.
func (a assigned) statistic(id, product trainer.PointID) *quant.Accumulate {
	s := &a[id]
	if !s.set {
		return nil
	}
	acc := quant.Accumulate{
		Product: a.optional(product), Sum: s.value.point, Order: s.value.order, Through32: s.value.through, Outer: s.value.outer,
	}
	if acc.Outer != nil && samePoint(*acc.Outer, acc.Sum) {
		acc.Outer = nil
	}
	phase := a.accumulate(product)
	if accumulateText(&acc) == accumulateText(&phase) {
		return nil
	}
	return &acc
}

// moment is the point of a normalisation's moments; nil: as the activation.
func (a assigned) moment() *quant.Point {
	p := a.optional(trainer.ForwardMoment)
	if p != nil && samePoint(*p, a[trainer.ForwardActivation].value.point) {
		return nil
	}
	return p
}

// accumulateText says all of an accumulation: equal texts, equal sums.
func accumulateText(acc *quant.Accumulate) string {
	text := fmt.Sprintf("%s %s", acc.Sum, acc.Order)
	if acc.Through32 {
		text += " through binary32"
	}
	for _, part := range []struct {
		name  string
		point *quant.Point
	}{{"product", acc.Product}, {"outer", acc.Outer}} {
		if part.point != nil {
			text += fmt.Sprintf(" %s %s", part.name, part.point)
		}
	}
	return text
}

// samePoint reports whether two points round every real to the same value, given
// the same random bits. The text of a point says all of it.
func samePoint(p, q quant.Point) bool { return p.String() == q.String() }

// holds reports whether rounding at p leaves every tensor stored at q as it is:
// it has the same format and deals with infinities alike, and a representable
// value never moves, stochastic rounding included.
func holds(p, q quant.Point) bool {
	p.Rounding, q.Rounding = quant.Rounding{}, quant.Rounding{}
	return samePoint(p, q)
}

// reuseOperands unsets the operands of layer i whose rounding cannot change a
// value, so that an arm has one form however it is written, and no time is spent
// on them: shorthands set every operand, mostly to what its tensor has anyway.
func reuseOperands(network *trainer.Network, arm *trainer.Arm, i int) {
	l := &arm.Layers[i]
	if p := l.InputGradient.First; p != nil {
		// Taken from the master; the forward working copy is too.
		same := p.Rounding.Mode != quant.Stochastic && samePoint(*p, l.Weight)
		if same || holds(*p, l.Master) && holds(l.Weight, l.Master) {
			l.InputGradient.First = nil
		}
	}
	below := activationsBelow(network, arm, i)
	if p := l.Operand; p != nil && all(below, *p) {
		l.Operand = nil
	}
	if p := l.WeightGradient.First; p != nil {
		// Unset, it is the operand of the forward product.
		if l.Operand == nil && all(below, *p) || l.Operand != nil && p.Rounding.Mode != quant.Stochastic && samePoint(*p, *l.Operand) {
			l.WeightGradient.First = nil
		}
	}
	gradients := gradientsAbove(network, arm, i)
	for _, backward := range []*trainer.Backward{&l.InputGradient, &l.WeightGradient} {
		if p := backward.Gradient; p != nil && all(gradients, *p) {
			backward.Gradient = nil
		}
	}
}

// all reports whether p holds what is stored at every one of the points.
func all(points []quant.Point, p quant.Point) bool {
	return !slices.ContainsFunc(points, func(q quant.Point) bool { return !holds(p, q) })
}

// activationsBelow are the points that the tensor below layer i may last have
// been rounded at: its own one, and, because a layer may pass values on
// unrounded, those below it down to one with parameters, or the input.
func activationsBelow(network *trainer.Network, arm *trainer.Arm, i int) []quant.Point {
	var points []quant.Point
	for j := i - 1; j >= 0; j-- {
		if slices.Contains(network.Layers[j].Points, trainer.ForwardActivation) {
			points = append(points, arm.Layers[j].Activation)
		}
		if len(network.Layers[j].Params) > 0 {
			return points
		}
	}
	if len(arm.Channels) > 0 {
		return append(points, arm.Channels...)
	}
	return append(points, arm.Input)
}

// gradientsAbove are the points that the gradient of layer i's output may last
// have been rounded at: a layer without arithmetic passes it on as it is.
func gradientsAbove(network *trainer.Network, arm *trainer.Arm, i int) []quant.Point {
	var points []quant.Point
	for j := i + 1; j < len(network.Layers); j++ {
		if slices.Contains(network.Layers[j].Points, trainer.InputGradientResult) {
			points = append(points, arm.Layers[j].InputGradient.Result)
		}
		if len(network.Layers[j].Params) > 0 {
			return points
		}
	}
	return append(points, arm.LossGradient)
}
