package trainer

import (
	"fmt"

	"ulpine/quant"
)

// sgdKind is stochastic gradient descent, with or without momentum. Every
// operation is one rounding of an exact result:
//
//	with momentum mu:  u    = R[state](mu v)
//	                   v    = R[state](u + g')
//	                   step = R[step](rate v)
//	without:           step = R[step](rate g')
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
	return o.noAdam()
}

type sgd[T quant.Element] struct{ momentum float64 }

func newSGD[T quant.Element](o Optimizer, _ int) rule[T] { return sgd[T]{single(o.Momentum)} }

func (sgd[T]) begin() {}

func (r sgd[T]) step(p *pass, q *param[T], gradient []float64, step []T, rate float64) {
	if r.momentum == 0 {
		scale(p, q, UpdateStep, opStep, step, rate, gradient, &q.set.Step)
		return
	}
	accumulate(p, q, r.momentum, gradient)
	scale(p, q, UpdateStep, opStep, step, rate, q.states[0].data, &q.set.Step)
}

// accumulate is v = R[state](R[state](mu v) + g') of the first state.
func accumulate[T quant.Element](p *pass, q *param[T], momentum float64, gradient []float64) {
	v, point := q.states[0].data, &q.set.States[0]
	scale(p, q, UpdateState, opStateNumber(0, 0), v, momentum, v, point)
	add(p, q, UpdateState, opStateNumber(0, 1), v, v, gradient, point)
}
