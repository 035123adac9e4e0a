package trainer

import "ulpine/quant"

// gate is one sum of a recurrent layer at every time t: a dense layer on [x_t, s], s
// being what the cell takes for its state. The values of one time are laid out by
// example, so that a time is computed as a dense layer computes a batch; the weight
// gradient sums over example, then time, as a convolution of width 1 over the length.
type gate[T quant.Element] struct {
	place
	inputs, units, length int // inputs and state are the columns of the weight in turn

	now   *linear[T] // of one time: below [inputs+units], above [units]
	whole *linear[T] // of all times; its weight gradient only
	lines *edge[T]   // [inputs+units, length], below whole
	sums  *edge[T]   // [units, length], above whole: gradients of the sums
	back  [2]quant.Product[T]
	parts int // numbers of parts from one time to the next
}

// newGate makes gate number n of a layer with so many gates.
func newGate[T quant.Element](b *bench[T], units, n, gates int) (*gate[T], error) {
	inputs, length := b.spec.In[0], b.spec.In[1]
	both := inputs + units
	spec := &Spec{In: []int{both, length}, Out: []int{units, length}, Params: b.spec.Params[2*n:][:2]}
	inner := bench[T]{place: b.place, spec: spec, batch: b.batch, team: b.team}
	inner.part = n
	g := &gate[T]{
		place: inner.place, inputs: inputs, units: units, length: length, parts: gates,
		lines: newEdge[T](b.batch, spec.In), sums: newEdge[T](b.batch, spec.Out),
	}
	inner.below, inner.above = g.lines, g.sums
	var err error
	if g.whole, err = newPointwise(&inner); err != nil {
		return nil, err
	}
	once := inner
	once.given = g.whole.params()
	once.spec = &Spec{In: []int{both}, Out: []int{units}}
	once.below, once.above = newEdge[T](b.batch, once.spec.In), newEdge[T](b.batch, once.spec.Out)
	dense, err := newDense(&once)
	if err != nil {
		return nil, err
	}
	g.now = dense.(*linear[T])
	for k := range g.back {
		g.back[k] = g.now.belowProduct[0]
		g.back[k].I = inputs
	}
	g.back[1].I, g.back[1].A.Data = units, g.back[1].A.Data[inputs:]
	return g, nil
}

// newPointwise is a convolution of width 1 over a length: a dense layer at each place.
func newPointwise[T quant.Element](b *bench[T]) (*linear[T], error) {
	c, length, units := b.spec.In[0], b.spec.In[1], b.spec.Out[0]
	g := window{c: c, h: 1, w: length, kh: 1, kw: 1, sh: 1, sw: 1, oh: 1, ow: length}
	if err := checkFrame(&g, max(units, c), b.batch); err != nil {
		return nil, err
	}
	s := shape{units: units, terms: c, channels: c, inner: length, outer: length, groups: 1}
	return newLinear(b, s, func(l *linear[T]) bindings[T] { return bindConv(l, &g, units, b.batch) })
}

// at is the place of time t.
func (g *gate[T]) at(t int) place {
	pl := g.place
	pl.part += t * g.parts
	return pl
}

// sum returns the finished sums [sample, unit] of time t over the inputs and a state
// [sample, unit]; nil is zero.
func (g *gate[T]) sum(p *pass, t int, x, state []T) []T {
	both := g.inputs + g.units
	in := g.now.below.values(p.samples)
	for n := range p.samples {
		row := in[n*both:][:both]
		for c := range g.inputs {
			row[c] = x[(n*g.inputs+c)*g.length+t]
		}
		clear(row[g.inputs:])
		if state != nil {
			copy(row[g.inputs:], state[n*g.units:][:g.units])
		}
	}
	g.now.place = g.at(t)
	y := g.now.products(p)
	if p.phase == phaseTraining {
		g.keep(g.lines.value.data, in, t)
		if g.set.Operand != nil {
			g.keep(g.whole.operand, g.now.operand[:len(in)], t)
		}
	}
	return y
}

// keep writes the values [sample, row] of time t to a tensor [sample, row, length].
func (g *gate[T]) keep(dst, src []T, t int) {
	for i, v := range src {
		dst[i*g.length+t] = v
	}
}

// weights makes the weight as operand of the input gradient; once a step.
func (g *gate[T]) weights(p *pass) {
	if g.now.again.weight != nil {
		g.now.place = g.place
		g.now.takeWeightsAgain(p)
	}
}

// gradients takes the gradients [sample, unit] of the sums of time t.
func (g *gate[T]) gradients(p *pass, t int) {
	dy := g.now.above.gradients(p.samples)
	g.keep(g.sums.gradient.data, dy, t)
	g.now.place = g.at(t)
	g.now.takeGradients(p)
}

// The two ranges of columns of a weight.
const (
	ofInputs = iota
	ofState
)

// pull writes the gradient [sample, row] of the inputs, or of the state, at time t.
func (g *gate[T]) pull(p *pass, t, which int, dst []T) {
	l, q, first, o := g.now, &g.back[which], 0, opInputResult
	if which == ofState {
		first, o = g.inputs, opStateResult
	}
	pl := g.at(t)
	q.J, q.C = p.samples, l.results[:q.I*p.samples]
	q.Scale = l.scale(l.channelFactors, first, q.I, l.gradientFactor)
	q.Terms, q.Sums = p.group(which, pl.streams(p, opInputProduct)), p.group(which, pl.streams(p, opInputSum))
	l.belowMul.Mul(*q, l.counts(p, InputGradientProduct), l.counts(p, InputGradientSum))
	if p.watch != nil {
		lookSums(p.watch, l.layer, InputGradientProduct, InputGradientSum, &l.set.InputGradient.Sums, q)
	}
	transpose(dst, q.C, q.I, p.samples)
	round(pl, p, InputGradientResult, o, dst, dst, &l.set.InputGradient.Result, 0)
}
