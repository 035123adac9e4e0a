package trainer

import "ulpine/quant"

// avgPoolKind takes the mean of each window in two steps: s = the sum of the
// window's inputs, row by row, at the forward sum point (no products), then y =
// R[activation](s/n) of the exact quotient, n the window's size. Back: where
// windows overlap, an input's gradient is first the sum of those of the windows
// over it, in ascending order of outputs, at the input gradient's sum point;
// then, always, dx = R[input_gradient.result](sum/n).
var avgPoolKind = kind{
	name: "avgpool", usage: "avgpool size=2 stride=2", parse: parseAvgPool,
	build32: newAvgPool[float32], build64: newAvgPool[float64],
}

func parseAvgPool(o *options, s *Spec) error {
	s.Points = append(append([]PointID{}, forwardSums...), ForwardActivation)
	if err := parsePool(o, s); err != nil {
		return err
	}
	g := &s.window
	s.Sums.Forward = g.size()
	s.MACs.Forward = uint64(g.size()) * uint64(volume(s.Out))
	if !g.overlaps() {
		s.Points = append(s.Points, InputGradientResult)
	}
	return nil
}

type avgPool[T quant.Element] struct {
	place
	below, above *edge[T]
	g            window
	window       *summer[T]
	overlap      *summer[T] // nil: windows do not overlap
	forth, back  *divider[T]
}

func newAvgPool[T quant.Element](b *bench[T]) (layer[T], error) {
	l := &avgPool[T]{
		place: b.place, below: b.below, above: b.above, g: b.spec.window,
	}
	l.forth = newDivider[T](l.g.size(), &b.set.Activation, len(b.above.value.data))
	l.back = newDivider[T](l.g.size(), &b.set.InputGradient.Result, len(b.below.value.data))
	single := l.g.perChannel()
	var err error
	x := paddedFrame(b.below.value.data, &single)
	windows := &windowed[T]{frame: x, row: kernel(x, &single), column: outputs(x, &single, b.batch*l.g.c)}
	l.window, err = newSummer[T](b.set.Forward, l.g.size(), windows)
	if err == nil && l.g.overlaps() {
		columns := &covering[T]{dy: b.above.gradient.data, g: single}
		l.overlap, err = newSummer[T](b.set.InputGradient.Sums, l.g.covers(), columns)
	}
	if err != nil {
		return nil, err
	}
	return l, nil
}

func (l *avgPool[T]) forward(p *pass) {
	y := l.above.values(p.samples)
	first := p.first * uint64(l.above.per)
	l.window.sum(y, first, l.streams(p, opForwardSum), l.counts(p, ForwardSum))
	l.forth.divide(y, y, l.draws(p, opActivation), first, l.counts(p, ForwardActivation))
}

func (l *avgPool[T]) backward(p *pass, below bool) {
	if !below {
		return
	}
	dx := l.below.gradients(p.samples)
	if l.overlap != nil {
		l.overlap.sum(dx, 0, l.streams(p, opInputSum), l.counts(p, InputGradientSum))
	} else {
		l.scatter(dx, l.above.gradients(p.samples))
	}
	l.back.divide(dx, dx, l.draws(p, opInputResult), 0, l.counts(p, InputGradientResult))
}

// scatter gives every covered input its window's gradient.
func (l *avgPool[T]) scatter(dx, dy []T) {
	g := &l.g
	clear(dx)
	for out, v := range dy {
		plane, oy, ox := unravel(out, g.oh, g.ow)
		for r := range g.kh {
			row := dx[(plane*g.h+oy*g.sh+r)*g.w+ox*g.sw:][:g.kw]
			for c := range row {
				row[c] = v
			}
		}
	}
}

func (l *avgPool[T]) params() []*param[T] { return nil }
