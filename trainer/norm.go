package trainer

import (
	"fmt"
	"math"

	"ulpine/quant"
)

// standard is what batch and layer normalisation share: every element belongs to a
// row, and each row of m elements is brought to mean 0 and variance 1. Forward:
//
//	mean = R[moment](sum of x / m)
//	d    = R[activation](x - mean)
//	var  = R[moment](sum of d^2 / m)
//	inv  = R[moment](1/sqrt(var + epsilon))
//	h    = R[activation](d inv)
//
// Both sums run at forward.statistic, elements ascending, the squares with its
// product point. Then y = R[activation](R[outer](weight h + bias)): a sum of one
// product at the layer's forward points, a convolution of one element in which each
// channel is a group, backward as well, so the gradients of weight and bias are the
// sums of dense layers. Backward of the rest, g the gradient of h, every line
// rounded at input_gradient.result:
//
//	a  = R(sum of g / m)      b = R(sum of g h / m)
//	u  = R(g - a)             v = R(h b)
//	w  = R(u - v)             dx = R(w inv)
//
// with both sums at input_gradient.statistic. The root, its sum and its quotient are
// binary64 operations; all other results are exact before they are rounded.
// Elements are numbered as in the tensor [batch, shape...], rows by row.
type standard[T quant.Element] struct {
	place
	below, hat *edge[T] // h, and its gradient
	epsilon    float64
	rowsOf     func(samples int) (rows, m int)
	spread     func(dst, rows []T, samples int) // gives every element its row's number
	gather     func(dst, src []T, samples int)  // elements row by row

	x, second          *byRows[T] // row by row
	one                vector[T]
	mean, back         *summer[T]
	square, dot        *quant.Multiplier[T]
	sums, means        []T // one a row
	variance, inverse  []T
	squares            []T // sums of squares, of training steps
	deviation, scratch []T // of the tensor
	root               []float64
}

// byRows is the right-hand operand of sums of rows: B[k,j] = element k of row j.
type byRows[T quant.Element] struct {
	data []T
	m    int
}

// Pack implements quant.Columns.
func (b *byRows[T]) Pack(dst []T, width, k0, k1, j0, j1 int) {
	for k := k0; k < k1; k++ {
		row := dst[(k-k0)*width:][:width]
		for j := j0; j < j1; j++ {
			row[j-j0] = b.data[j*b.m+k]
		}
		clear(row[j1-j0:])
	}
}

// Padded implements quant.Columns.
func (*byRows[T]) Padded(k, j int) bool { return false }

// vector is the right-hand operand of one sum of products.
type vector[T quant.Element] struct{ data []T }

// Pack implements quant.Columns.
func (b *vector[T]) Pack(dst []T, width, k0, k1, _, _ int) {
	for k := k0; k < k1; k++ {
		row := dst[(k-k0)*width:][:width]
		clear(row)
		row[0] = b.data[k]
	}
}

// Padded implements quant.Columns.
func (*vector[T]) Padded(k, j int) bool { return false }

// longestRow is the longest row whose length is a binary32 number.
const longestRow = 1 << 24

// newStandard allocates for rows of at most m elements.
func newStandard[T quant.Element](b *bench[T], rows, m int) (*standard[T], error) {
	if m > longestRow {
		return nil, fmt.Errorf("statistics over %d values; at most %d: use a smaller batch", m, longestRow)
	}
	n := len(b.below.value.data)
	l := &standard[T]{
		place: b.place, below: b.below, hat: newEdge[T](b.batch, b.spec.In), epsilon: b.spec.number,
		x: &byRows[T]{data: make([]T, n)}, second: &byRows[T]{data: make([]T, n)},
		sums: make([]T, rows), means: make([]T, rows), variance: make([]T, rows), inverse: make([]T, rows), squares: make([]T, rows),
		deviation: make([]T, n), scratch: make([]T, n), root: make([]float64, rows),
	}
	forward, back := b.set.statistic(), b.set.InputGradient.statistic()
	var err error
	if l.mean, err = newSummer[T](forward, m, l.x); err != nil {
		return nil, err
	}
	if l.back, err = newSummer[T](back, m, l.x); err != nil {
		return nil, err
	}
	if l.square, err = multiplier[T](forward); err != nil {
		return nil, err
	}
	l.dot, err = multiplier[T](back)
	return l, err
}

// measure computes mean, deviations and variance of every row; first is the number
// of the first row.
func (l *standard[T]) measure(p *pass, first uint64) (rows, m int) {
	rows, m = l.rowsOf(p.samples)
	x := l.below.values(p.samples)
	count := [1]T{T(m)}
	l.gather(l.x.data, x, p.samples)
	l.x.m, l.mean.product.K = m, m
	l.mean.sum(l.sums[:rows], first, l.streams(p, opMeanSum), l.counts(p, ForwardStatistic))
	combined(l.place, p, ForwardMoment, opMean, l.means[:rows], l.sums[:rows], count[:], quotient, l.set.moment(), first)
	l.deviate(p, l.means[:rows])

	l.gather(l.x.data, l.deviation[:len(x)], p.samples)
	l.products(p, l.squares[:rows], l.x.data, m, first, l.square, opSquare, opSquareSum, ForwardStatistic)
	combined(l.place, p, ForwardMoment, opVariance, l.variance[:rows], l.squares[:rows], count[:], quotient, l.set.moment(), first)
	return rows, m
}

// deviate computes d from the rows' means.
func (l *standard[T]) deviate(p *pass, means []T) {
	x := l.below.values(p.samples)
	l.spread(l.scratch, means, p.samples)
	combined(l.place, p, ForwardActivation, opDeviation, l.deviation[:len(x)], x, l.scratch[:len(x)], difference, &l.set.Activation, l.below.first(p))
}

// normalise computes inv and h from the rows' variances.
func (l *standard[T]) normalise(p *pass, variance []T, first uint64) {
	root := l.root[:len(variance)]
	for r, v := range variance {
		root[r] = 1 / math.Sqrt(float64(v)+l.epsilon)
	}
	inverse := l.inverse[:len(variance)]
	round(l.place, p, ForwardMoment, opInverse, inverse, root, l.set.moment(), first)
	h := l.hat.values(p.samples)
	l.spread(l.scratch, inverse, p.samples)
	combined(l.place, p, ForwardActivation, opNormal, h, l.deviation[:len(h)], l.scratch[:len(h)], product, &l.set.Activation, l.below.first(p))
}

// products writes the sum over every row of the products of l.x and other.
func (l *standard[T]) products(p *pass, dst, other []T, m int, first uint64, mul *quant.Multiplier[T], product, sum operation, id PointID) {
	q := quant.Product[T]{I: 1, J: 1, K: m, B: &l.one, Terms: l.streams(p, product), Sums: l.streams(p, sum)}
	for r := range dst {
		l.one.data = other[r*m:]
		q.A = quant.Matrix[T]{Data: l.x.data[r*m:], Row: m, Col: 1}
		q.C, q.FirstJ = dst[r:r+1], first+uint64(r)
		mul.Mul(q, l.counts(p, id), l.counts(p, id))
	}
}

// backward computes the gradient below from that of h.
func (l *standard[T]) backward(p *pass) {
	rows, m := l.rowsOf(p.samples)
	g, h, dx := l.hat.gradients(p.samples), l.hat.values(p.samples), l.below.gradients(p.samples)
	count := [1]T{T(m)}
	id, point := InputGradientResult, &l.set.InputGradient.Result
	row, e := l.sums[:rows], l.scratch[:len(g)]
	l.gather(l.x.data, g, p.samples)
	l.x.m, l.back.product.K = m, m
	l.back.sum(row, 0, l.streams(p, opBackSum), l.counts(p, InputGradientStatistic))
	combined(l.place, p, id, opBackMean, row, row, count[:], quotient, point, 0)
	l.spread(e, row, p.samples)
	combined(l.place, p, id, opCentre, dx, g, e, difference, point, 0)

	l.gather(l.second.data, h, p.samples)
	l.products(p, row, l.second.data, m, 0, l.dot, opDot, opDotSum, InputGradientStatistic)
	combined(l.place, p, id, opBackDot, row, row, count[:], quotient, point, 0)
	l.spread(e, row, p.samples)
	combined(l.place, p, id, opShare, e, h, e, product, point, 0)
	combined(l.place, p, id, opRest, dx, dx, e, difference, point, 0)
	l.spread(e, l.inverse[:rows], p.samples)
	combined(l.place, p, id, opNormalResult, dx, dx, e, product, point, 0)
}

// newAffine is y = weight h + bias, each of the channels with its own pair.
func newAffine[T quant.Element](b *bench[T], hat *edge[T], channels, positions int) (*linear[T], error) {
	g := window{c: channels, h: 1, w: positions, kh: 1, kw: 1, sh: 1, sw: 1, oh: 1, ow: positions}
	if err := checkFrame(&g, channels, b.batch); err != nil {
		return nil, err
	}
	inner := *b
	inner.below = hat
	s := shape{units: channels, terms: 1, channels: channels, inner: positions, outer: positions, groups: channels}
	return newLinear(&inner, s, func(l *linear[T]) bindings[T] { return bindConv(l, &g, channels, b.batch) })
}

// normParams are the two parameters of a normalisation.
func normParams(shape ...int) []ParamSpec {
	return []ParamSpec{{Name: "weight", Shape: shape, Start: 1}, {Name: "bias", Shape: shape}}
}

// normPoints are its rounding points.
func normPoints() []PointID {
	return append(append([]PointID{}, parameterPoints...), ForwardStatistic, ForwardMoment, InputGradientStatistic)
}

// normEpsilon is what is added to a variance where a plan does not say: common
// practice.
const normEpsilon = 1e-5

// parseEpsilon reads the epsilon of a normalisation.
func parseEpsilon(o *options, s *Spec) error {
	var err error
	if s.number, err = o.decimal("epsilon", normEpsilon); err != nil {
		return err
	}
	if !(s.number > 0) || math.IsInf(s.number, 0) {
		return fmt.Errorf("epsilon is %g; it must be positive and finite in binary32", s.number)
	}
	return nil
}
