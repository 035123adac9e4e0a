package trainer

import (
	"math"

	"ulpine/quant"
)

// reluKind is y = R[activation](max(x, 0)), max(NaN, 0) = NaN and max(-0, 0) =
// +0. The gradient passes where x > 0 (or is NaN) and is +0 elsewhere, at 0
// too; nothing is computed with it, so it is not rounded again. x is the layer's
// input as stored, so an output that its own rounding flushed to zero still
// passes its gradient.
var reluKind = kind{
	name: "relu", usage: "relu", parse: parseRelu,
	build32: newRelu[float32], build64: newRelu[float64],
}

func parseRelu(_ *options, s *Spec) error {
	s.Name, s.Out = "relu", s.In
	s.Points = []PointID{ForwardActivation}
	return nil
}

type relu[T quant.Element] struct {
	place
	below, above *edge[T]
}

func newRelu[T quant.Element](b *bench[T]) (layer[T], error) {
	return &relu[T]{b.place, b.below, b.above}, nil
}

func (l *relu[T]) forward(p *pass) {
	x, y := l.below.values(p.samples), l.above.values(p.samples)
	for i, v := range x {
		y[i] = max(v, 0) // NaN for NaN, +0 for -0
	}
	round(l.place, p, ForwardActivation, opActivation, y, y, &l.set.Activation, p.first*uint64(l.above.per))
}

func (l *relu[T]) backward(p *pass, below bool) {
	if !below {
		return
	}
	x, dy, dx := l.below.values(p.samples), l.above.gradients(p.samples), l.below.gradients(p.samples)
	dy, dx = dy[:len(x)], dx[:len(x)]
	for i, v := range x {
		// Signs of activations are random: a mask costs less than a branch missed.
		// Stored NaNs are positive, so they pass like positive numbers.
		b := int64(math.Float64bits(float64(v)))
		positive := uint64(-b>>63) &^ uint64(b>>63)
		dx[i] = T(math.Float64frombits(math.Float64bits(float64(dy[i])) & positive))
	}
}

func (l *relu[T]) params() []*param[T] { return nil }
