package trainer

import (
	"fmt"
	"math"

	"ulpine/quant"
)

// Adam (D. P. Kingma, J. Ba: Adam, a method for stochastic optimization, ICLR
// 2015). m is the first state, v the second, t counts the updates taken, this one
// included; c1 = 1 - b1^t and c2 = 1 - b2^t in binary64, the powers by repeated
// multiplication.
//
//	u = R[state 0](b1 m)       h = R[state 0]((1-b1) g')      m = R[state 0](u + h)
//	u = R[state 1](b2 v)       h = R[state 1]((1-b2) g'^2)    v = R[state 1](u + h)
//	n = R[step](m/c1)
//	epsilon outside the root:  r = R[step](sqrt(v/c2))        d = R[step](r + epsilon)
//	epsilon inside the root:   d = R[step](sqrt(v/c2 + epsilon))
//	a = R[step](n/d)           step = R[step](rate a)
//
// b1, b2, epsilon and rate are binary32 numbers; 1-b1 and 1-b2 are exact
// differences. g'^2, m/c1 and what stands under a root are binary64 values,
// operation by operation, and so is the root; every other result is exact before
// it is rounded. A quotient by zero is that of IEEE 754.
var adamKind = ruleKind{name: "adam", states: adamStates, check: checkAdam, make32: newAdam[float32], make64: newAdam[float64]}

// adamWKind is Adam with decoupled weight decay (I. Loshchilov, F. Hutter:
// Decoupled weight decay regularization, ICLR 2019); see mover.
var adamWKind = ruleKind{name: "adamw", states: adamStates, check: checkAdam, make32: newAdam[float32], make64: newAdam[float64]}

func adamStates(Optimizer) int { return 2 }

// Defaults of Adam: those of its paper.
const (
	defaultBeta1   = 0.9
	defaultBeta2   = 0.999
	defaultEpsilon = 1e-8
)

// betas are the decays and epsilon, defaults filled in, as binary32 numbers.
func (o Optimizer) betas() (b1, b2, epsilon float64) {
	orElse := func(x, fallback float64) float64 {
		if x == 0 {
			return single(fallback)
		}
		return single(x)
	}
	return orElse(o.Beta1, defaultBeta1), orElse(o.Beta2, defaultBeta2), orElse(o.Epsilon, defaultEpsilon)
}

func checkAdam(o Optimizer) error {
	b1, b2, epsilon := o.betas()
	switch {
	case o.Momentum != 0:
		return fmt.Errorf("momentum is %g; %s takes beta1 instead", o.Momentum, o.Kind)
	case !(b1 > 0 && b1 < 1) || !(b2 > 0 && b2 < 1):
		return fmt.Errorf("betas are %g and %g; both must lie between 0 and 1 in binary32", o.Beta1, o.Beta2)
	case !(epsilon > 0) || math.IsInf(epsilon, 0):
		return fmt.Errorf("epsilon is %g; it must be positive and finite in binary32", o.Epsilon)
	}
	return nil
}

// noAdam refuses Adam's hyper-parameters where they mean nothing.
func (o Optimizer) noAdam() error {
	if o.Beta1 != 0 || o.Beta2 != 0 || o.Epsilon != 0 || o.EpsilonInside {
		return fmt.Errorf("%s takes no betas and no epsilon; they belong to adam and adamw", o.Kind)
	}
	return nil
}

type adam[T quant.Element] struct {
	b1, b2, epsilon float64
	inside          bool
	power1, power2  float64 // b1^t, b2^t
	value           []float64
	part, below     []T
	one             []T // epsilon
}

func newAdam[T quant.Element](o Optimizer, largest int) rule[T] {
	r := &adam[T]{
		inside: o.EpsilonInside, power1: 1, power2: 1,
		value: make([]float64, largest), part: make([]T, largest), below: make([]T, largest),
	}
	r.b1, r.b2, r.epsilon = o.betas()
	r.one = []T{T(r.epsilon)}
	return r
}

func (r *adam[T]) begin() {
	r.power1 = float64(r.power1 * r.b1)
	r.power2 = float64(r.power2 * r.b2)
}

func (r *adam[T]) step(p *pass, q *param[T], gradient []float64, step []T, rate float64) {
	n := len(gradient)
	value, part, below := r.value[:n], r.part[:n], r.below[:n]
	m, v := q.states[0].data, q.states[1].data
	r.decay(p, q, 0, r.b1, gradient, part)
	for i, g := range gradient {
		value[i] = float64(g * g)
	}
	r.decay(p, q, 1, r.b2, value, part)

	point := &q.set.Step
	c1, c2 := 1-r.power1, 1-r.power2
	for i, x := range m {
		value[i] = float64(x) / c1
	}
	rounded(p, q, UpdateStep, opAhead, part, value, point)
	r.root(value, v, c2)
	rounded(p, q, UpdateStep, opRoot, below, value, point)
	if !r.inside {
		combine(below, below, r.one, sum, point, q.draws(p, opRootSum), 0, q.counts(p, UpdateStep))
	}
	combine(step, part, below, quotient, point, q.draws(p, opRatio), 0, q.counts(p, UpdateStep))
	scale(p, q, UpdateStep, opStep, step, rate, step, point)
}

// decay moves state s: R(R(b state) + R((1-b) x)).
func (r *adam[T]) decay(p *pass, q *param[T], s int, b float64, x []float64, part []T) {
	state, point := q.states[s].data, &q.set.States[s]
	scale(p, q, UpdateState, opStateNumber(s, 0), state, b, state, point)
	scale(p, q, UpdateState, opStateNumber(s, 1), part, 1-b, x, point)
	add(p, q, UpdateState, opStateNumber(s, 2), state, state, part, point)
}

// root writes sqrt(v/c2), or sqrt(v/c2 + epsilon), in binary64.
func (r *adam[T]) root(dst []float64, v []T, c2 float64) {
	under := 0.0
	if r.inside {
		under = r.epsilon
	}
	for i, x := range v {
		dst[i] = math.Sqrt(float64(x)/c2 + under)
	}
}
