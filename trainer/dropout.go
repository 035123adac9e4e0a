package trainer

import (
	"fmt"

	"ulpine/quant"
)

// dropoutKind drops each element of a training step with probability p and
// multiplies the others by 1/(1-p): y = R[activation](m x), m = +0 or the binary32
// number nearest to 1/(1-p), the product exact. Back, dx = R[input_gradient.
// result](m dy). An evaluation copies x and rounds nothing.
//
// Element n of a step is dropped iff word n of the replicate's stream of dropout
// at (step, layer) is below floor(p 2^32), p a binary32 number: arms share masks,
// whatever they round.
var dropoutKind = kind{
	name: "dropout", usage: "dropout 0.5", parse: parseDropout,
	build32: newDropout[float32], build64: newDropout[float64],
}

func parseDropout(o *options, s *Spec) error {
	share, err := o.onlyDecimal("probability of dropping")
	if err != nil {
		return err
	}
	if !(share > 0 && share < 1) {
		return fmt.Errorf("the probability of dropping is %g; it must lie between 0 and 1", share)
	}
	s.Name, s.Out, s.number = "dropout "+decimalText(share), s.In, share
	s.Points = []PointID{ForwardActivation, InputGradientResult}
	return nil
}

type dropout[T quant.Element] struct {
	place
	below, above *edge[T]
	limit        uint32 // words below it drop
	keep         T
	multiplier   []T
}

func newDropout[T quant.Element](b *bench[T]) (layer[T], error) {
	share := b.spec.number
	return &dropout[T]{
		place: b.place, below: b.below, above: b.above,
		limit: uint32(float64(share * 0x1p32)), // floor: share is positive and below 1
		keep:  T(single(1 / (1 - share))), multiplier: make([]T, len(b.above.value.data)),
	}, nil
}

func (l *dropout[T]) forward(p *pass) {
	x, y := l.below.values(p.samples), l.above.values(p.samples)
	if p.phase != phaseTraining {
		copy(y, x)
		return
	}
	m := l.multiplier[:len(x)]
	l.draw(p, m)
	combined(l.place, p, ForwardActivation, opActivation, y, x, m, product, &l.set.Activation, 0)
}

// draw makes the masks of one step.
func (l *dropout[T]) draw(p *pass, m []T) {
	d := quant.Draws{Seed: p.dropout, Step: p.step, Site: site(l.layer, opActivation)}
	for q := 0; q < len(m); q += 4 {
		words := d.Words(uint64(q / 4))
		for i := q; i < min(q+4, len(m)); i++ {
			m[i] = l.keep
			if words[i-q] < l.limit {
				m[i] = 0
			}
		}
	}
}

func (l *dropout[T]) backward(p *pass, below bool) {
	if !below {
		return
	}
	dy, dx := l.above.gradients(p.samples), l.below.gradients(p.samples)
	combined(l.place, p, InputGradientResult, opInputResult, dx, dy, l.multiplier[:len(dy)], product, &l.set.InputGradient.Result, 0)
}

func (l *dropout[T]) params() []*param[T] { return nil }
