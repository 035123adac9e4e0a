package trainer

import (
	"fmt"

	"ulpine/quant"
)

// sgdKind is stochastic gradient descent, with or without momentum. Every
// operation is one rounding of an exact result:
//
//	with momentum mu:  u      = R[state](mu v)
//	                   v      = R[state](u + g')
//	                   step   = R[step](rate v)
//	without:           step   = R[step](rate g')
//	both:              master = R[master](master - step)
//
// mu and rate are binary32 numbers. The two operations on the state draw their
// random bits under numbers of their own.
var sgdKind = ruleKind{
	name:   "sgd",
	states: sgdStates,
	check:  checkSGD,
	make32: newSGD[float32],
	make64: newSGD[float64],
}

func sgdStates(o Optimizer) int {
	if o.Momentum == 0 {
		return 0
	}
	return 1
}

func checkSGD(o Optimizer) error {
	if !(o.Momentum >= 0 && o.Momentum < 1) {
		return fmt.Errorf("momentum is %g; it must be at least 0 and below 1", o.Momentum)
	}
	return nil
}

type sgd[T quant.Element] struct{ momentum float64 }

func newSGD[T quant.Element](o Optimizer) rule[T] { return sgd[T]{single(o.Momentum)} }

func (r sgd[T]) update(p *pass, q *param[T], gradient []float64, step []T, rate float64) {
	if len(q.states) == 0 {
		scale(p, q, UpdateStep, opStep, step, rate, gradient, &q.set.Step)
	} else {
		v, point := q.states[0].data, &q.set.States[0]
		scale(p, q, UpdateState, opStateNumber(0, 0), v, r.momentum, v, point)
		add(p, q, UpdateState, opStateNumber(0, 1), v, v, gradient, point)
		scale(p, q, UpdateStep, opStep, step, rate, v, &q.set.Step)
	}
	subtract(p, q, UpdateMaster, opMaster, q.master.data, q.master.data, step, &q.set.Master)
}
