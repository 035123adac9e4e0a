package trainer

import (
	"fmt"

	"ulpine/quant"
)

// nesterovKind is stochastic gradient descent with Nesterov's momentum, in the form
// that looks ahead from the updated velocity (I. Sutskever et al.: On the
// importance of initialization and momentum in deep learning, ICML 2013). Every
// operation is one rounding of an exact result:
//
//	u    = R[state](mu v)
//	v    = R[state](u + g')
//	a    = R[step](mu v)
//	b    = R[step](a + g')
//	step = R[step](rate b)
//
// mu and rate are binary32 numbers.
var nesterovKind = ruleKind{
	name:   "nesterov",
	states: func(Optimizer) int { return 1 },
	check:  checkNesterov,
	make32: newNesterov[float32],
	make64: newNesterov[float64],
}

func checkNesterov(o Optimizer) error {
	if !(o.Momentum > 0 && o.Momentum < 1) {
		return fmt.Errorf("momentum is %g; nesterov takes one above 0 and below 1 (without momentum write sgd)", o.Momentum)
	}
	return o.noAdam()
}

type nesterov[T quant.Element] struct{ momentum float64 }

func newNesterov[T quant.Element](o Optimizer, _ int) rule[T] {
	return nesterov[T]{single(o.Momentum)}
}

func (nesterov[T]) begin() {}

func (r nesterov[T]) step(p *pass, q *param[T], gradient []float64, step []T, rate float64) {
	accumulate(p, q, r.momentum, gradient)
	point := &q.set.Step
	scale(p, q, UpdateStep, opAhead, step, r.momentum, q.states[0].data, point)
	add(p, q, UpdateStep, opAheadSum, step, step, gradient, point)
	scale(p, q, UpdateStep, opStep, step, rate, step, point)
}
