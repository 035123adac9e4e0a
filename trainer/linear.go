package trainer

import "ulpine/quant"

// linear is the arithmetic that dense layers and convolutions share: one product
// of matrices a phase, each element C[i,j] = sum over k of A[i,k] B[k,j] a sum
// of its own, the filter side on the left.
//
//	phase            i              j                     k
//	forward          unit           sample, position      term of the kernel
//	input gradient   input channel  sample, input pos.    unit, kernel position
//	weight gradient  unit           term of the kernel    sample, position
//	bias gradient    unit                                 sample, position
//
// A dense layer has one position and as many input channels as inputs. Where
// channels fall into groups there is one such product a group: i counts units (or
// input channels), and k terms, within the group, and the random words of group n
// >= 1 come from a key of its own (see pass.group).
// Products come out with j running fastest; tensors keep whole examples
// together, so a result is regrouped before it is rounded and stored.
type linear[T quant.Element] struct {
	place
	below, above *edge[T]
	weight, bias *param[T]

	shape
	forwardMul, belowMul, mul *quant.Multiplier[T]

	// One product a group.
	forwardProduct []quant.Product[T]
	belowProduct   []quant.Product[T]
	weightProduct  []quant.Product[T]

	// Operands of the gradient products; each is the stored tensor itself or,
	// where the arm sets a point, scratch for its rounding.
	operand        []T // of the forward product
	belowGradient  []T
	belowWeight    []T
	weightGradient []T
	activation     []T

	again backwardOperands
	scales[T]

	regrouped []T // the gradient with j fastest; nil where positions are single
	results   []T // products before regrouping, one phase at a time
	rearrange func(dst, weight []T)
	frames    frames[T]
}

// shape are the numbers of a linear layer: rows of the weight, terms of one forward
// sum, input channels, positions below and above, groups of channels.
type shape struct{ units, terms, channels, inner, outer, groups int }

// frames surround the operands of convolutions; a dense layer has none. weight
// is forward where the two share their operand.
type frames[T quant.Element] struct {
	forward, weight, below *frame[T]
}

// bindings are what a kind of layer adds to the shared arithmetic: right-hand
// operands, one a group, and the left-hand one of the input gradient.
type bindings[T quant.Element] struct {
	forward []quant.Columns[T] // B[kernel term, (sample, position)]
	below   []quant.Columns[T] // B[(unit, kernel position), (sample, input position)]
	weight  []quant.Columns[T] // B[(sample, position), kernel term]
	// belowLeft is A[input channel, (unit, kernel position)], the groups in turn;
	// rearrange, if not nil, fills its memory from a weight tensor in every step.
	belowLeft  quant.Matrix[T]
	belowTerms int
	rearrange  func(dst, weight []T)
	frames     frames[T]
}

// newLinear allocates everything. operands holds the four gradient operands that
// bind needs to point its columns at.
func newLinear[T quant.Element](b *bench[T], s shape, bind func(l *linear[T]) bindings[T]) (*linear[T], error) {
	l := &linear[T]{
		place: b.place, below: b.below, above: b.above,
		weight: b.param(0), bias: b.param(1),
		shape: s,
	}
	l.chooseOperands()
	l.makeScales(b.batch)
	if s.outer > 1 {
		l.regrouped = make([]T, b.batch*s.units*s.outer)
	}
	l.results = make([]T, max(b.batch*s.units*s.outer, b.batch*s.channels*s.inner, s.units*s.terms))
	if err := l.makeMultipliers(b.team); err != nil {
		return nil, err
	}
	l.makeProducts(bind(l))
	return l, nil
}

// chooseOperands takes the stored tensors where the arm leaves a backward operand
// unset, else memory for its rounding.
func (l *linear[T]) chooseOperands() {
	own := func(set *quant.Point, stored []T) []T {
		if set == nil {
			return stored
		}
		return make([]T, len(stored))
	}
	in, wg := &l.set.InputGradient, &l.set.WeightGradient
	l.again = l.set.backwardOperands()
	l.operand = own(l.set.Operand, l.below.value.data)
	l.belowGradient = own(in.Gradient, l.above.gradient.data)
	l.belowWeight = own(l.again.weight, l.weight.working.data)
	l.weightGradient = own(wg.Gradient, l.above.gradient.data)
	l.activation = own(l.again.activation, l.operand)
}

func (l *linear[T]) makeMultipliers(team *Team) (err error) {
	if l.forwardMul, err = multiplier[T](l.set.Forward); err != nil {
		return err
	}
	if l.belowMul, err = multiplier[T](l.set.InputGradient.Sums); err != nil {
		return err
	}
	if l.mul, err = multiplier[T](l.set.WeightGradient.Sums); err != nil {
		return err
	}
	for _, m := range []*quant.Multiplier[T]{l.forwardMul, l.belowMul, l.mul} {
		m.Share(team)
	}
	return nil
}

// makeProducts builds the three products once: converting a matrix to an
// interface in every step would allocate.
func (l *linear[T]) makeProducts(b bindings[T]) {
	l.rearrange, l.frames = b.rearrange, b.frames
	units, channels := l.units/l.groups, l.channels/l.groups
	for n := range l.groups {
		left := b.belowLeft
		left.Data = left.Data[n*channels*b.belowTerms:]
		l.forwardProduct = append(l.forwardProduct, quant.Product[T]{
			I: units, K: l.terms,
			A:    quant.Matrix[T]{Data: l.weight.working.data[n*units*l.terms:], Row: l.terms, Col: 1},
			B:    b.forward[n],
			Bias: l.bias.working.data[n*units:],
		})
		l.belowProduct = append(l.belowProduct, quant.Product[T]{I: channels, K: b.belowTerms, A: left, B: b.below[n]})
		l.weightProduct = append(l.weightProduct, quant.Product[T]{I: units, J: l.terms, B: b.weight[n]})
	}
}

func (l *linear[T]) params() []*param[T] { return []*param[T]{l.weight, l.bias} }

// forward computes y = R[activation](sum over k of weight x, then + bias).
func (l *linear[T]) forward(p *pass) {
	y := l.products(p)
	round(l.place, p, ForwardActivation, opActivation, y, y, &l.set.Activation, p.first*uint64(l.above.per))
}

// products writes the finished sums, bias included, to the edge above.
func (l *linear[T]) products(p *pass) []T {
	columns := p.samples * l.outer
	l.takeInputs(p)
	if l.frames.forward != nil {
		l.frames.forward.fill(p.samples)
	}
	results := l.results[:l.units*columns]
	for n := range l.forwardProduct {
		q := &l.forwardProduct[n]
		q.J, q.C, q.FirstJ = columns, results[n*q.I*columns:], p.first*uint64(l.outer)
		q.Terms, q.Sums = p.group(n, l.streams(p, opForwardProduct)), p.group(n, l.streams(p, opForwardSum))
		if !l.oneFactor(p.samples) {
			l.eachExample(p, n)
			continue
		}
		q.Scale = l.scale(l.weight.factors, n*q.I, q.I, l.exampleFactor(0))
		l.forwardMul.Mul(*q, l.counts(p, ForwardProduct), l.counts(p, ForwardSum))
		if p.watch != nil {
			lookSums(p.watch, l.layer, ForwardProduct, ForwardSum, &l.set.Forward, q)
		}
	}

	y := l.above.values(p.samples)
	groupByExample(y, results, p.samples, l.units, l.outer)
	return y
}

func (l *linear[T]) backward(p *pass, below bool) {
	l.weightBackward(p)
	if below {
		l.inputBackward(p)
	}
}

// weightBackward computes the gradients of weight and bias. The bias sums the
// same operand, gradient as the weight's product sees it, without products; where
// that operand shares scales, the gradient as stored.
func (l *linear[T]) weightBackward(p *pass) {
	n := p.samples
	set := &l.set.WeightGradient
	gradient := l.weightGradient[:n*l.above.per]
	if set.Gradient != nil {
		l.takeUnitGradients(p, gradient, l.above.gradients(n))
	}
	if l.again.activation != nil {
		x := l.below.values(n)
		l.activationFactor = roundAlong(l.place, p, WeightGradientActivation, opActivationAgain, l.activation[:len(x)], x,
			quant.Shape{Outer: 1, Axis: n, Inner: l.below.per}, l.again.activation, 0)
	}
	if l.frames.weight != l.frames.forward {
		l.frames.weight.fill(n)
	}
	left := l.byUnit(gradient, n)
	l.weightSums(p, left, n*l.outer)
	if l.unitFactors != nil {
		left = l.byUnit(l.above.gradients(n), n) // no product, no operand
	}
	l.biasSums(p, left, n*l.outer)
}

// byUnit is a gradient of n examples with a row for each unit.
func (l *linear[T]) byUnit(gradient []T, n int) quant.Matrix[T] {
	if l.outer == 1 {
		return quant.Matrix[T]{Data: gradient, Row: 1, Col: l.units}
	}
	groupByUnit(l.regrouped, gradient, n, l.units, l.outer)
	return quant.Matrix[T]{Data: l.regrouped, Row: n * l.outer, Col: 1}
}

// weightSums forms the sums of products over the mini-batch and stores them.
func (l *linear[T]) weightSums(p *pass, left quant.Matrix[T], terms int) {
	set := &l.set.WeightGradient
	products, sums := l.counts(p, WeightGradientProduct), l.counts(p, WeightGradientSum)
	results := l.results[:l.units*l.terms]
	for n := range l.weightProduct {
		q := &l.weightProduct[n]
		q.K, q.A, q.C = terms, left, results[n*q.I*l.terms:]
		q.A.Data = left.Data[n*q.I*left.Row:]
		q.Scale = l.scale(l.unitFactors, n*q.I, q.I, l.activationFactor)
		q.Terms, q.Sums = p.group(n, l.streams(p, opWeightProduct.of(0))), p.group(n, l.streams(p, opWeightSum.of(0)))
		l.mul.Mul(*q, products, sums)
		if p.watch != nil {
			lookSums(p.watch, l.layer, WeightGradientProduct, WeightGradientSum, &set.Sums, q)
		}
	}
	l.weight.storeGradient(p, results)
}

// biasSums forms the sums of the gradient itself and stores them.
func (l *linear[T]) biasSums(p *pass, left quant.Matrix[T], terms int) {
	sums := l.counts(p, WeightGradientSum)
	db := l.results[:l.units]
	l.mul.SumRows(db, left, l.units, terms, l.streams(p, opWeightSum.of(1)), sums)
	l.bias.storeGradient(p, db)
}

// inputBackward computes the gradient of the edge below.
func (l *linear[T]) inputBackward(p *pass) {
	n := p.samples
	set := &l.set.InputGradient
	l.takeGradients(p)
	if l.again.weight != nil {
		l.takeWeightsAgain(p)
	}
	if l.rearrange != nil {
		l.rearrange(l.belowProduct[0].A.Data, l.belowWeight)
		l.frames.below.fill(n)
	}
	columns := n * l.inner
	results := l.results[:l.channels*columns]
	for k := range l.belowProduct {
		q := &l.belowProduct[k]
		q.J, q.C = columns, results[k*q.I*columns:]
		q.Scale = l.scale(l.channelFactors, k*q.I, q.I, l.gradientFactor)
		q.Terms, q.Sums = p.group(k, l.streams(p, opInputProduct)), p.group(k, l.streams(p, opInputSum))
		l.belowMul.Mul(*q, l.counts(p, InputGradientProduct), l.counts(p, InputGradientSum))
		if p.watch != nil {
			lookSums(p.watch, l.layer, InputGradientProduct, InputGradientSum, &set.Sums, q)
		}
	}

	dx := l.below.gradients(n)
	groupByExample(dx, results, n, l.channels, l.inner)
	round(l.place, p, InputGradientResult, opInputResult, dx, dx, &set.Result, 0)
}

// takeGradients rounds the gradient for the input gradient, where the arm sets it.
func (l *linear[T]) takeGradients(p *pass) {
	point := l.set.InputGradient.Gradient
	if point == nil {
		return
	}
	g := l.above.gradients(p.samples)
	l.gradientFactor = roundAlong(l.place, p, InputGradientGradient, opInputOperand, l.belowGradient[:len(g)], g,
		quant.Shape{Outer: p.samples * l.groups, Axis: l.units / l.groups, Inner: l.outer}, point, 0)
}

// groupByExample copies [unit][sample][position] to [sample][unit][position].
func groupByExample[T quant.Element](dst, src []T, samples, units, positions int) {
	if positions == 1 {
		transpose(dst, src, units, samples)
		return
	}
	for u := range units {
		for n := range samples {
			from := (u*samples + n) * positions
			copy(dst[(n*units+u)*positions:][:positions], src[from:from+positions])
		}
	}
}

// groupByUnit copies [sample][unit][position] to [unit][sample][position].
func groupByUnit[T quant.Element](dst, src []T, samples, units, positions int) {
	groupByExample(dst, src, units, samples, positions)
}

// transpose copies [rows][columns] to [columns][rows].
func transpose[T quant.Element](dst, src []T, rows, columns int) {
	for r := range rows {
		row := src[r*columns:][:columns]
		for c, v := range row {
			dst[c*rows+r] = v
		}
	}
}
