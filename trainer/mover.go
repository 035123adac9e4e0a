package trainer

import (
	"math"

	"ulpine/quant"
)

// mover applies an optimizer to all parameters of a network:
//
//	g'     = g/S                                 binary64
//	g'     = g' c/norm       if norm > c         gradient clipping
//	d      = R[step](decay master)               coupled weight decay:
//	g'     = g' + d                              binary64
//	step   = what the optimizer's formula says
//	e      = R[step](r master), r = rate decay   decoupled weight decay:
//	step   = R[step](step + e)                   r a binary32 product
//	master = R[master](master - step)
//
// or, with compensated updates (W. Kahan: Further remarks on reducing truncation
// errors, CACM 8, 1965), in place of the last line, c the last state and at first
// +0, what the master lacks:
//
//	y      = R[state](c - step)
//	t      = R[master](master + y)
//	a      = R[state](t - master)
//	c      = R[state](y - a)
//	master = t
//
// norm is the square root of the sum of all squares of g', in binary64: squares
// and sums one by one, parameters in order, elements ascending; c/norm is one
// quotient and g' c/norm one product an element. Decay acts on every trained
// parameter, biases included. All results are exact before they are rounded,
// unless they are said to be binary64.
type mover[T quant.Element] struct {
	rule   rule[T]
	set    Optimizer
	params []*param[T] // those that are trained
	scaled []float64   // g', of the largest parameter's size
	step   []T
	part   []T

	old, steps []T // of an update that is looked at
}

// newMover allocates states and scratch.
func newMover[T quant.Element](k *ruleKind, o Optimizer, params []*param[T]) *mover[T] {
	m := &mover[T]{set: o.resolved()}
	largest := 0
	for _, q := range params {
		if q.fixed {
			continue
		}
		m.params = append(m.params, q)
		largest = max(largest, len(q.master.data))
		for range o.stateCount(k) {
			q.states = append(q.states, newArray[T](q.shape...))
		}
	}
	m.rule = makeRule[T](k, o, largest)
	m.scaled, m.step, m.part = make([]float64, largest), make([]T, largest), make([]T, largest)
	return m
}

// move updates every parameter and makes the working copies anew. s is the loss
// scale.
func (m *mover[T]) move(p *pass, rate, s float64) {
	shrink := m.shrink(s)
	m.rule.begin()
	for number, q := range m.params {
		g := m.scaled[:len(q.gradient.data)]
		for i, v := range q.gradient.data {
			g[i] = float64(v) / s
		}
		if shrink != 1 {
			for i, v := range g {
				g[i] = float64(v * shrink)
			}
		}
		m.apply(p, number, q, g, rate)
		q.refresh(p)
	}
}

// apply moves one master.
func (m *mover[T]) apply(p *pass, number int, q *param[T], g []float64, rate float64) {
	step, part := m.step[:len(g)], m.part[:len(g)]
	point := &q.set.Step
	decay := m.set.WeightDecay
	if decay != 0 && !m.set.Decoupled {
		scale(p, q, UpdateStep, opDecay, part, decay, q.master.data, point)
		for i, v := range part {
			g[i] += float64(v)
		}
	}
	m.rule.step(p, q, g, step, rate)
	if decay != 0 && m.set.Decoupled {
		scale(p, q, UpdateStep, opDecay, part, single(float64(rate*decay)), q.master.data, point)
		add(p, q, UpdateStep, opDecaySum, step, step, part, point)
	}
	if p.watch != nil {
		p.watch.remember(number, q.layer, q.name)
		keep(m, q, step)
	}
	if m.set.Compensated {
		m.compensate(p, q, step, part)
	} else {
		subtract(p, q, UpdateMaster, opMaster, q.master.data, q.master.data, step, &q.set.Master)
	}
	if p.watch != nil {
		moved(p.watch, number, m.old, m.steps, q.master.data)
	}
}

// keep copies masters and steps before an update that is looked at.
func keep[T quant.Element](m *mover[T], q *param[T], step []T) {
	m.old, m.steps = append(m.old[:0], q.master.data...), append(m.steps[:0], step...)
}

// compensate is the compensated update.
func (m *mover[T]) compensate(p *pass, q *param[T], step, part []T) {
	last := len(q.states) - 1
	c, point := q.states[last].data, &q.set.States[last]
	subtract(p, q, UpdateState, opStateNumber(last, 0), step, c, step, point)
	copy(part, q.master.data)
	add(p, q, UpdateMaster, opMaster, q.master.data, part, step, &q.set.Master)
	subtract(p, q, UpdateState, opStateNumber(last, 1), part, q.master.data, part, point)
	subtract(p, q, UpdateState, opStateNumber(last, 2), c, step, part, point)
}

// shrink is the factor of gradient clipping, 1 where nothing is clipped.
func (m *mover[T]) shrink(s float64) float64 {
	if m.set.ClipNorm == 0 {
		return 1
	}
	var squares float64
	for _, q := range m.params {
		for _, v := range q.gradient.data {
			g := float64(v) / s
			squares += float64(g * g)
		}
	}
	if norm := math.Sqrt(squares); norm > m.set.ClipNorm {
		return m.set.ClipNorm / norm
	}
	return 1
}

// Operations on parameters share their roads: each rounds once and counts.

// rounded writes R[point](src).
func rounded[T quant.Element](p *pass, q *param[T], id PointID, o operation, dst []T, src []float64, point *quant.Point) {
	round(q.place, p, id, o.of(q.number), dst, src, point, 0)
}

// scale writes R[point](alpha src), the product exact.
func scale[T, S quant.Element](p *pass, q *param[T], id PointID, o operation, dst []T, alpha float64, src []S, point *quant.Point) {
	if p.watch != nil {
		lookCombined(p.watch, src, []float64{alpha}, product)
	}
	quant.ScaleSlice(dst, alpha, src, point, q.draws(p, o), q.counts(p, id))
	if p.watch != nil {
		compare(p.watch, q.layer, id, dst, point)
	}
}

// add writes R[point](a + b), the sum exact.
func add[T, A, B quant.Element](p *pass, q *param[T], id PointID, o operation, dst []T, a []A, b []B, point *quant.Point) {
	if p.watch != nil {
		lookCombined(p.watch, a, b, sum)
	}
	quant.AddSlice(dst, a, b, point, q.draws(p, o), q.counts(p, id))
	if p.watch != nil {
		compare(p.watch, q.layer, id, dst, point)
	}
}

// subtract writes R[point](a - b), the difference exact.
func subtract[T, A, B quant.Element](p *pass, q *param[T], id PointID, o operation, dst []T, a []A, b []B, point *quant.Point) {
	if p.watch != nil {
		lookCombined(p.watch, a, b, difference)
	}
	quant.SubSlice(dst, a, b, point, q.draws(p, o), q.counts(p, id))
	if p.watch != nil {
		compare(p.watch, q.layer, id, dst, point)
	}
}

// opStateNumber numbers operation n on state tensor s.
func opStateNumber(s, n int) operation { return opState + operation(int(4*s)+n) }
