package trainer

import (
	"fmt"
	"math"
	"slices"

	"ulpine/quant"
)

// Formats with shared scales, blocks and scaled integers, are those of operands: the
// stored tensor is rounded anew for every product, along the axis over which that
// product sums. See the package comment for the axes.

// shared reports whether the values of a point's format share scales.
func shared(p *quant.Point) bool {
	_, is := p.Format.(quant.Blocked)
	return is
}

// SharedPoints are the points that may hold a format with shared scales: the operands
// of products, in the order of computation.
func SharedPoints() []PointID {
	return []PointID{
		ForwardWeight, ForwardOperand, InputGradientWeight, InputGradientGradient, WeightGradientActivation, WeightGradientGradient,
	}
}

// CheckPoint finds arithmetic that quant refuses, or a format with shared scales at a
// point that cannot have one. The error says behind a semicolon what to do instead.
func CheckPoint(id PointID, p *quant.Point) error {
	if p.Format == nil || !shared(p) {
		return p.Check()
	}
	switch {
	case !slices.Contains(SharedPoints(), id):
		return fmt.Errorf("%s shares scales among values, which only operands of products can; set %s to it and a scalar format here",
			p.Format, joinPoints(SharedPoints()))
	case !quant.PerChannel(p.Format):
	case id == ForwardOperand || id == InputGradientGradient || id == WeightGradientActivation:
		return fmt.Errorf("%s: a channel with a scale of its own is a row of a left-hand operand; set %s to it, or per=tensor here",
			p.Format, joinPoints([]PointID{ForwardWeight, InputGradientWeight, WeightGradientGradient}))
	}
	return p.CheckOperand()
}

// joinPoints lists names: a, b, c.
func joinPoints(ids []PointID) (text string) {
	for i, id := range ids {
		if i > 0 {
			text += ", "
		}
		text += id.String()
	}
	return text
}

// backwardOperands are the points of the first operands of the gradient products; nil
// where the forward pass's own are multiplied again.
type backwardOperands struct{ weight, activation *quant.Point }

func (a *Arithmetic) backwardOperands() backwardOperands {
	b := backwardOperands{a.InputGradient.First, a.WeightGradient.First}
	if b.weight == nil && shared(&a.Weight) {
		b.weight = &a.Weight
	}
	if b.activation == nil && a.Operand != nil && shared(a.Operand) {
		b.activation = a.Operand
	}
	return b
}

// scales are the factors of a linear layer's operands: one where a slice is nil.
type scales[T quant.Element] struct {
	exampleFactors []float64 // of the forward operand: every example is a tensor
	unitFactors    []float64 // of the weight gradient's gradient
	channelFactors []float64 // of the input gradient's weight

	activationFactor, gradientFactor float64 // of the right-hand operands back

	row  []float64  // Product.Scale
	from shifted[T] // the columns of an example
	one  []T        // the outputs of an example: one group's units x positions
	rows []T        // an operand with a row for each channel; nil where none has scales of its own
}

// makeScales allocates what the arm's formats need.
func (l *linear[T]) makeScales(batch int) {
	l.activationFactor, l.gradientFactor = 1, 1
	channels := l.channels / l.groups
	l.weight.axes = quant.Shape{Outer: l.units, Axis: channels, Inner: l.terms / channels}
	if shared(&l.set.Weight) {
		l.weight.factors = make([]float64, l.units)
	}
	if o := l.set.Operand; o != nil && shared(o) {
		l.exampleFactors, l.one = make([]float64, batch), make([]T, l.units*l.outer)
	}
	if g := l.set.WeightGradient.Gradient; g != nil && shared(g) {
		l.unitFactors = make([]float64, l.units)
	}
	if w := l.again.weight; w != nil && shared(w) {
		l.channelFactors = make([]float64, l.channels)
	}
	own := 0
	if g := l.set.WeightGradient.Gradient; g != nil && quant.PerChannel(g.Format) {
		own = batch * l.above.per
	}
	if w := l.again.weight; w != nil && quant.PerChannel(w.Format) {
		own = max(own, len(l.weight.master.data))
	}
	l.rows = make([]T, own)
	l.row = make([]float64, max(l.units, l.channels))
}

// scale is Product.Scale of n rows from the first one on, of the factors of both
// operands; nil where all are 1.
func (s *scales[T]) scale(rows []float64, first, n int, other float64) []float64 {
	scaled := false
	for i := range n {
		f := other
		if rows != nil {
			f = float64(rows[first+i] * other)
		}
		s.row[i], scaled = f, scaled || f != 1
	}
	if !scaled {
		return nil
	}
	return s.row[:n]
}

// exampleFactor is the factor of example s in the forward operand.
func (s *scales[T]) exampleFactor(n int) float64 {
	if s.exampleFactors == nil {
		return 1
	}
	return s.exampleFactors[n]
}

// oneFactor reports whether n examples have one factor.
func (s *scales[T]) oneFactor(n int) bool {
	for i := range n {
		if s.exampleFactor(i) != s.exampleFactor(0) {
			return false
		}
	}
	return true
}

// takeInputs rounds the forward operand. A tensor that shares a scale is one example,
// so that no answer depends on the examples beside it.
func (l *linear[T]) takeInputs(p *pass) {
	point := l.set.Operand
	if point == nil {
		return
	}
	x, per := l.below.values(p.samples), l.below.per
	if !shared(point) {
		round(l.place, p, ForwardOperand, opForwardOperand, l.operand[:len(x)], x, point, l.below.first(p))
		return
	}
	axes := quant.Shape{Outer: l.groups, Axis: l.channels / l.groups, Inner: l.inner}
	for s := range p.samples {
		l.exampleFactors[s] = roundAlong(l.place, p, ForwardOperand, opForwardOperand, l.operand[s*per:][:per], x[s*per:][:per],
			axes, point, l.below.first(p)+uint64(s*per))
	}
}

// eachExample is the forward product of group n, one example at a time, because each
// has a factor of its own. Columns keep their numbers.
func (l *linear[T]) eachExample(p *pass, n int) {
	all := &l.forwardProduct[n]
	columns := p.samples * l.outer
	for s := range p.samples {
		q := *all
		l.from = shifted[T]{all.B, s * l.outer}
		q.J, q.C, q.B = l.outer, l.one, &l.from
		q.FirstJ = (p.first + uint64(s)) * uint64(l.outer)
		q.Scale = l.scale(l.weight.factors, n*q.I, q.I, l.exampleFactors[s])
		l.forwardMul.Mul(q, l.counts(p, ForwardProduct), l.counts(p, ForwardSum))
		if p.watch != nil {
			lookSums(p.watch, l.layer, ForwardProduct, ForwardSum, &l.set.Forward, &q)
		}
		for i := range q.I {
			copy(all.C[i*columns+s*l.outer:][:l.outer], q.C[i*l.outer:])
		}
	}
}

// shifted are the columns of another operand from one on.
type shifted[T quant.Element] struct {
	all  quant.Columns[T]
	from int
}

// Pack implements quant.Columns.
func (b *shifted[T]) Pack(dst []T, width, k0, k1, j0, j1 int) {
	b.all.Pack(dst, width, k0, k1, b.from+j0, b.from+j1)
}

// Padded implements quant.Columns.
func (b *shifted[T]) Padded(k, j int) bool { return b.all.Padded(k, b.from+j) }

// takeUnitGradients rounds the gradient for the weight gradient, whose rows are units;
// scales per channel number its elements in the order unit, sample, position.
func (l *linear[T]) takeUnitGradients(p *pass, dst, src []T) {
	n, point := p.samples, l.set.WeightGradient.Gradient
	if !quant.PerChannel(point.Format) {
		f := roundAlong(l.place, p, WeightGradientGradient, opWeightOperand, dst, src,
			quant.Shape{Outer: 1, Axis: n, Inner: l.above.per}, point, 0)
		fill(l.unitFactors, f)
		return
	}
	rows := l.rows[:len(src)]
	groupByUnit(rows, src, n, l.units, l.outer)
	roundRows(l.place, p, WeightGradientGradient, opWeightOperand, rows, rows, quant.Shape{Outer: l.units, Axis: n, Inner: l.outer}, point, l.unitFactors)
	groupByExample(dst, rows, n, l.units, l.outer)
}

// takeWeightsAgain rounds the master for the input gradient, whose rows are input
// channels; scales per channel number its elements in the order input channel, unit,
// kernel position, the groups in turn.
func (l *linear[T]) takeWeightsAgain(p *pass) {
	dst, src, point := l.belowWeight, l.weight.master.data, l.again.weight
	units, channels := l.units/l.groups, l.channels/l.groups
	if !quant.PerChannel(point.Format) {
		f := roundAlong(l.place, p, InputGradientWeight, opWeightAgain.of(0), dst, src,
			quant.Shape{Outer: l.groups, Axis: units, Inner: l.terms}, point, 0)
		fill(l.channelFactors, f)
		return
	}
	kernel, size := l.terms/channels, units*l.terms
	rows := l.rows[:len(src)]
	for g := range l.groups {
		groupByExample(rows[g*size:][:size], src[g*size:][:size], channels, units, kernel)
	}
	roundRows(l.place, p, InputGradientWeight, opWeightAgain.of(0), rows, rows, quant.Shape{Outer: l.channels, Axis: units, Inner: kernel}, point, l.channelFactors)
	for g := range l.groups {
		groupByExample(dst[g*size:][:size], rows[g*size:][:size], units, channels, kernel)
	}
}

// requantise makes the forward operand of a weight; other parameters are no operands
// of products and stay what the master is.
func (q *param[T]) requantise(p *pass) {
	if q.factors == nil {
		copy(q.working.data, q.master.data)
		return
	}
	roundRows(q.place, p, ForwardWeight, opWorking.of(q.number), q.working.data, q.master.data, q.axes, &q.set.Weight, q.factors)
}

func fill(x []float64, v float64) {
	for i := range x {
		x[i] = v
	}
}

// roundAlong is round for an operand along its axis; it returns the factor.
func roundAlong[T quant.Element](pl place, p *pass, id PointID, o operation, dst, src []T, axes quant.Shape, point *quant.Point, first uint64) float64 {
	if !shared(point) {
		round(pl, p, id, o, dst, src, point, first)
		return 1
	}
	if p.watch != nil {
		look(p.watch, src)
	}
	f := quant.RoundTensor(dst, src, axes, point, pl.draws(p, o), first, pl.counts(p, id))
	if p.watch != nil {
		compareTerms(p.watch, pl.layer, id, dst, []float64{f})
	}
	return f
}

// roundRows is roundAlong for a left-hand operand, whose outer indices are channels.
func roundRows[T quant.Element](pl place, p *pass, id PointID, o operation, dst, src []T, axes quant.Shape, point *quant.Point, factors []float64) {
	if p.watch != nil {
		look(p.watch, src)
	}
	quant.RoundChannels(dst, src, axes, point, pl.draws(p, o), 0, pl.counts(p, id), factors)
	if p.watch != nil {
		compareTerms(p.watch, pl.layer, id, dst, factors)
	}
}

// compareTerms is compare for terms under the factors of their rows. What saturates
// is left to the counters: the bound is another one in every block.
func compareTerms[D quant.Element](w *observer, layer int, id PointID, dst []D, factors []float64) {
	s := w.point(layer, id)
	row := len(dst) / len(factors)
	for i, at := range w.at[:w.choose(len(dst))] {
		s.count(w.before[i], float64(float64(dst[at])*factors[at/row]), math.Inf(-1), math.Inf(1))
	}
}
