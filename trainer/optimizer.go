package trainer

import (
	"fmt"
	"sort"
	"strings"

	"ulpine/quant"
)

// rule is an optimizer: it moves one parameter by its gradient.
type rule[T quant.Element] interface {
	// update moves q.master. gradient is g' = g/S in binary64, rate the learning
	// rate; step is scratch of the parameter's size.
	update(p *pass, q *param[T], gradient []float64, step []T, rate float64)
}

// ruleKind is a row of the table of optimizers.
type ruleKind struct {
	name string
	// states is the number of state tensors a parameter needs.
	states func(o Optimizer) int
	check  func(o Optimizer) error
	make32 func(o Optimizer) rule[float32]
	make64 func(o Optimizer) rule[float64]
}

// ruleKinds is the table of optimizers. A new one is one file and one line here.
var ruleKinds = []*ruleKind{&sgdKind}

// findRule returns the row of an optimizer.
func findRule(o Optimizer) (*ruleKind, error) {
	names := make([]string, 0, len(ruleKinds))
	for _, k := range ruleKinds {
		if k.name == o.Kind {
			return k, k.check(o)
		}
		names = append(names, k.name)
	}
	sort.Strings(names)
	return nil, fmt.Errorf("unknown optimizer %q; known: %s", o.Kind, strings.Join(names, ", "))
}

// States is the number of state tensors an optimizer keeps for each parameter,
// and so the length of Arithmetic.States.
func (o Optimizer) States() (int, error) {
	k, err := findRule(o)
	if err != nil {
		return 0, err
	}
	return k.states(o), nil
}

// makeRule constructs an optimizer for an element type.
func makeRule[T quant.Element](k *ruleKind, o Optimizer) rule[T] {
	if m, ok := any(k.make32).(func(Optimizer) rule[T]); ok {
		return m(o)
	}
	return any(k.make64).(func(Optimizer) rule[T])(o)
}

// mover applies an optimizer to all parameters of a network.
type mover[T quant.Element] struct {
	rule   rule[T]
	params []*param[T]
	scaled []float64 // g', of the largest parameter's size
	step   []T
}

// newMover allocates states and scratch.
func newMover[T quant.Element](k *ruleKind, o Optimizer, params []*param[T]) *mover[T] {
	m := &mover[T]{rule: makeRule[T](k, o), params: params}
	largest := 0
	for _, q := range params {
		largest = max(largest, len(q.master.data))
		for range k.states(o) {
			q.states = append(q.states, newArray[T](q.shape...))
		}
	}
	m.scaled, m.step = make([]float64, largest), make([]T, largest)
	return m
}

// move updates every parameter and makes the working copies anew. s is the loss
// scale: g' = g/s is a binary64 quotient and not rounded again.
func (m *mover[T]) move(p *pass, rate, s float64) {
	for _, q := range m.params {
		g := m.scaled[:len(q.gradient.data)]
		for i, v := range q.gradient.data {
			g[i] = float64(v) / s
		}
		m.rule.update(p, q, g, m.step[:len(g)], rate)
		q.refresh(p)
	}
}

// Operations on parameters share their roads: each rounds once and counts.

// scale writes R[point](alpha src), the product exact.
func scale[T, S quant.Element](p *pass, q *param[T], id PointID, o operation, dst []T, alpha float64, src []S, point *quant.Point) {
	quant.ScaleSlice(dst, alpha, src, point, q.draws(p, o), q.counts(p, id))
}

// add writes R[point](a + b), the sum exact.
func add[T, A, B quant.Element](p *pass, q *param[T], id PointID, o operation, dst []T, a []A, b []B, point *quant.Point) {
	quant.AddSlice(dst, a, b, point, q.draws(p, o), q.counts(p, id))
}

// subtract writes R[point](a - b), the difference exact.
func subtract[T, A, B quant.Element](p *pass, q *param[T], id PointID, o operation, dst []T, a []A, b []B, point *quant.Point) {
	quant.SubSlice(dst, a, b, point, q.draws(p, o), q.counts(p, id))
}

// opStateNumber numbers operation n on state tensor s.
func opStateNumber(s, n int) operation { return opState + operation(int(4*s)+n) }
