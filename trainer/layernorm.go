package trainer

import (
	"fmt"

	"ulpine/quant"
)

// layerNormKind brings every example to mean 0 and variance 1 over all its values
// (J. L. Ba, J. R. Kiros, G. E. Hinton: Layer normalization, arXiv:1607.06450), then
// applies a weight and a bias of each value: see standard. Rows are examples.
var layerNormKind = kind{
	name: "layernorm", usage: "layernorm epsilon=1e-5", parse: parseLayerNorm,
	build32: newLayerNorm[float32], build64: newLayerNorm[float64],
}

func parseLayerNorm(o *options, s *Spec) error {
	if err := parseEpsilon(o, s); err != nil {
		return err
	}
	n := volume(s.In)
	if n < 2 {
		return fmt.Errorf("layernorm over one value would always give 0; use it on at least two")
	}
	s.Name, s.Out = "layernorm epsilon="+decimalText(s.number), s.In
	s.Params = normParams(s.In...)
	s.Points = normPoints()
	s.Sums = Lengths{Forward: n, InputGradient: n, WeightGradient: 1, BiasGradient: 1}
	values := uint64(n)
	s.MACs = Work{Forward: 3 * values, InputGradient: 3 * values, WeightGradient: values}
	return nil
}

type layerNorm[T quant.Element] struct {
	*standard[T]
	affine *linear[T]
}

func newLayerNorm[T quant.Element](b *bench[T]) (layer[T], error) {
	n := volume(b.spec.In)
	core, err := newStandard(b, b.batch, n)
	if err != nil {
		return nil, err
	}
	core.rowsOf = func(samples int) (int, int) { return samples, n }
	core.gather = func(dst, src []T, _ int) { copy(dst, src) }
	core.spread = func(dst, rows []T, samples int) {
		for r, v := range rows[:samples] {
			row := dst[r*n:][:n]
			for i := range row {
				row[i] = v
			}
		}
	}
	affine, err := newAffine(b, core.hat, n, 1)
	if err != nil {
		return nil, err
	}
	return &layerNorm[T]{core, affine}, nil
}

func (l *layerNorm[T]) forward(p *pass) {
	rows, _ := l.measure(p, p.first)
	l.normalise(p, l.variance[:rows], p.first)
	l.affine.forward(p)
}

func (l *layerNorm[T]) backward(p *pass, below bool) {
	l.affine.backward(p, below)
	if below {
		l.standard.backward(p)
	}
}

func (l *layerNorm[T]) params() []*param[T] { return l.affine.params() }
