package trainer

import (
	"fmt"

	"ulpine/quant"
)

// residualKind brackets a residual block: "residual begin", layers, "residual end".
// The end adds the block's input x to its last output z, x first, a sum of two terms
// without products at the forward sum point, then y = R[activation](sum). Back, the
// gradient passes the end unrounded, to both; at the begin the two join: the sum of
// the block's one and of the end's one, in ascending order of the layers that give
// them, at the input gradient's sum point, then R[input_gradient.result]. Blocks
// nest; a block leaves the shape as it is.
var residualKind = kind{
	name: residual, usage: "residual begin", parse: parseResidual,
	build32: newResidual[float32], build64: newResidual[float64],
}

const (
	residual = "residual"
	begin    = "residual begin"
	end      = "residual end"
)

func parseResidual(o *options, s *Spec) error {
	if len(o.bare) != 1 || o.bare[0] != "begin" && o.bare[0] != "end" {
		return fmt.Errorf("residual needs one of two words; write %q, and %q behind the block", begin, end)
	}
	s.Name, s.Out = "residual "+o.bare[0], s.In
	o.bare = nil
	values := uint64(volume(s.In))
	if s.Name == begin {
		s.Points = append(append([]PointID{}, inputSums...), InputGradientResult)
		s.Sums.InputGradient, s.MACs.InputGradient = 2, 2*values
	} else {
		s.Points = append(append([]PointID{}, forwardSums...), ForwardActivation)
		s.Sums.Forward, s.MACs.Forward = 2, 2*values
	}
	return nil
}

// pairResiduals finds the begin of every end.
func (n *Network) pairResiduals() error {
	var open []int
	for i := range n.Layers {
		s := &n.Layers[i]
		switch {
		case s.Name == begin:
			open = append(open, i)
		case s.Name == end && len(open) == 0:
			return fmt.Errorf("layer %d: %q without a begin; write %q before the block", i+1, end, begin)
		case s.Name == end:
			s.partner = open[len(open)-1]
			open = open[:len(open)-1]
			if from := n.Layers[s.partner].In; shapeText(from) != shapeText(s.In) {
				return fmt.Errorf("layer %d: a residual block adds %s, begun at layer %d, to %s; both must have one shape", i+1, shapeText(from), s.partner+1, shapeText(s.In))
			}
		}
	}
	if len(open) > 0 {
		return fmt.Errorf("layer %d: %q without an end; write %q behind the block", open[len(open)-1]+1, begin, end)
	}
	return nil
}

func newResidual[T quant.Element](b *bench[T]) (layer[T], error) {
	if b.spec.Name == begin {
		l := &residualBegin[T]{place: b.place, below: b.below, above: b.above}
		l.pair.lower = b.above.gradient.data
		var err error
		l.join, err = newSummer[T](b.set.InputGradient.Sums, 2, &l.pair)
		return l, err
	}
	from := b.earlier[b.spec.partner].(*residualBegin[T])
	from.pair.upper = b.above.gradient.data
	l := &residualEnd[T]{place: b.place, below: b.below, above: b.above}
	l.pair = pair[T]{from.above.value.data, b.below.value.data}
	var err error
	l.join, err = newSummer[T](b.set.Forward, 2, &l.pair)
	return l, err
}

// pair is the right-hand operand of a sum of two tensors, element by element.
type pair[T quant.Element] struct{ lower, upper []T }

// Pack implements quant.Columns.
func (b *pair[T]) Pack(dst []T, width, k0, k1, j0, j1 int) {
	for k := k0; k < k1; k++ {
		row, from := dst[(k-k0)*width:][:width], b.lower
		if k == 1 {
			from = b.upper
		}
		clear(row[copy(row, from[j0:j1]):])
	}
}

// Padded implements quant.Columns.
func (*pair[T]) Padded(k, j int) bool { return false }

type residualBegin[T quant.Element] struct {
	place
	below, above *edge[T]
	pair         pair[T] // gradients: of the block's input, of the end's output
	join         *summer[T]
}

func (l *residualBegin[T]) forward(p *pass) {
	copy(l.above.values(p.samples), l.below.values(p.samples))
}

func (l *residualBegin[T]) backward(p *pass, below bool) {
	if !below {
		return
	}
	dx := l.below.gradients(p.samples)
	l.join.sum(dx, 0, l.streams(p, opInputSum), l.counts(p, InputGradientSum))
	round(l.place, p, InputGradientResult, opInputResult, dx, dx, &l.set.InputGradient.Result, 0)
}

func (l *residualBegin[T]) params() []*param[T] { return nil }

type residualEnd[T quant.Element] struct {
	place
	below, above *edge[T]
	pair         pair[T] // values: of the block's input, of its output
	join         *summer[T]
}

func (l *residualEnd[T]) forward(p *pass) {
	y, first := l.above.values(p.samples), l.above.first(p)
	l.join.sum(y, first, l.streams(p, opForwardSum), l.counts(p, ForwardSum))
	round(l.place, p, ForwardActivation, opActivation, y, y, &l.set.Activation, first)
}

func (l *residualEnd[T]) backward(p *pass, below bool) {
	if below {
		copy(l.below.gradients(p.samples), l.above.gradients(p.samples))
	}
}

func (l *residualEnd[T]) params() []*param[T] { return nil }
