package trainer

import (
	"fmt"

	"ulpine/quant"
)

// leakyReluKind is y = R[activation](m x), m = 1 where x > 0 (or is NaN) and the
// slope, a binary32 number, elsewhere, at 0 too. Back, dx = R[input_gradient.
// result](m dy). Products are exact; elements with m = 1 are rounded like the
// others.
var leakyReluKind = kind{
	name: "leakyrelu", usage: "leakyrelu slope=0.01", parse: parseLeakyRelu,
	build32: newLeakyRelu[float32], build64: newLeakyRelu[float64],
}

// leakySlope is the slope where none is given: common practice.
const leakySlope = 0.01

func parseLeakyRelu(o *options, s *Spec) error {
	slope, err := o.decimal("slope", leakySlope)
	if err != nil {
		return err
	}
	if !(slope > 0 && slope < 1) {
		return fmt.Errorf("slope is %g; it must lie between 0 and 1 (for 0 write relu)", slope)
	}
	s.Name, s.Out, s.number = "leakyrelu slope="+decimalText(slope), s.In, slope
	s.Points = []PointID{ForwardActivation, InputGradientResult}
	return nil
}

type leakyRelu[T quant.Element] struct {
	place
	below, above *edge[T]
	slope        T
	multiplier   []T // one an element: m of the last forward pass
}

func newLeakyRelu[T quant.Element](b *bench[T]) (layer[T], error) {
	return &leakyRelu[T]{b.place, b.below, b.above, T(b.spec.number), make([]T, len(b.above.value.data))}, nil
}

func (l *leakyRelu[T]) forward(p *pass) {
	x, y := l.below.values(p.samples), l.above.values(p.samples)
	m := l.multiplier[:len(x)]
	for i, v := range x {
		m[i] = 1
		if v <= 0 {
			m[i] = l.slope
		}
	}
	combined(l.place, p, ForwardActivation, opActivation, y, x, m, product, &l.set.Activation, l.above.first(p))
}

func (l *leakyRelu[T]) backward(p *pass, below bool) {
	if !below {
		return
	}
	dy, dx := l.above.gradients(p.samples), l.below.gradients(p.samples)
	combined(l.place, p, InputGradientResult, opInputResult, dx, dy, l.multiplier[:len(dy)], product, &l.set.InputGradient.Result, 0)
}

func (l *leakyRelu[T]) params() []*param[T] { return nil }
