package trainer

import "ulpine/quant"

// attention is the layer: two convolutions of width 1 around products of activations.
// See attentionKind for its formulas; softmax.go holds what stands between the products.
type attention[T quant.Element] struct {
	place
	into, out *linear[T] // q, k, v from the input; the output from o
	parts     *edge[T]   // q, k, v and their gradients, [sample, 3 width, length]
	scores    *edge[T]   // p and da, before that s, e and dp, u, w, [sample, heads, j, i]
	mixed     *edge[T]   // o and its gradient, [sample, width, length]

	heads, deep, length int // deep: channels of a head
	causal              bool

	// Operands rounded once a tensor; the tensors themselves where they are not.
	activations, probabilities, mixedGradient, scoreGradient []T

	forwardMul, backMul *quant.Multiplier[T]
	left, right         []T // operands rounded for one product
	view                masked[T]
	factors             []float64
	column              []T
	softmax             *positionSoftmax[T]
}

// The parts of the layer, by the numbers of their keys.
const (
	partInto = iota
	partOut
	partScore
	partMix
	partScoreBack
	partValueBack
	partQueryBack
	partKeyBack
)

func newAttention[T quant.Element](b *bench[T]) (layer[T], error) {
	s := b.spec
	channels, length, width := s.In[0], s.In[1], s.Params[2].Shape[1]
	l := &attention[T]{
		place: b.place, heads: s.heads, deep: width / s.heads, length: length, causal: s.causal,
		parts:  newEdge[T](b.batch, []int{3 * width, length}),
		scores: newEdge[T](b.batch, []int{s.heads, length, length}),
		mixed:  newEdge[T](b.batch, []int{width, length}),
	}
	var err error
	if l.into, err = l.project(b, partInto, b.below, l.parts, channels, 3*width); err != nil {
		return nil, err
	}
	if l.out, err = l.project(b, partOut, l.mixed, b.above, width, channels); err != nil {
		return nil, err
	}
	if l.softmax, err = newPositionSoftmax(l, b); err != nil {
		return nil, err
	}
	return l, l.allocate()
}

// project is part n, a product with two parameters of its own.
func (l *attention[T]) project(b *bench[T], n int, below, above *edge[T], in, out int) (*linear[T], error) {
	inner := bench[T]{place: b.place, below: below, above: above, batch: b.batch, team: b.team}
	inner.part = n
	inner.spec = &Spec{In: []int{in, l.length}, Out: []int{out, l.length}, Params: b.spec.Params[2*n:][:2]}
	return newPointwise(&inner)
}

// allocate makes operands and scratch.
func (l *attention[T]) allocate() (err error) {
	own := func(set *quant.Point, stored []T) []T {
		if set == nil || shared(set) {
			return stored
		}
		return make([]T, len(stored))
	}
	o, g := l.set.Operand, l.set.InputGradient.Gradient
	l.activations, l.probabilities = own(o, l.parts.value.data), own(o, l.scores.value.data)
	l.mixedGradient, l.scoreGradient = own(g, l.mixed.gradient.data), own(g, l.scores.gradient.data)
	most := max(l.length, l.deep)
	l.left, l.right, l.column = make([]T, l.length*most), make([]T, l.length*most), make([]T, l.length)
	l.factors = make([]float64, most)
	if l.forwardMul, err = multiplier[T](l.set.Forward); err != nil {
		return err
	}
	l.backMul, err = multiplier[T](l.set.InputGradient.Sums)
	return err
}

func (l *attention[T]) params() []*param[T] { return append(l.into.params(), l.out.params()...) }

// at is the place of a part.
func (l *attention[T]) at(part int) place {
	pl := l.place
	pl.part = part
	return pl
}

// existing visits the elements of a tensor [sample, heads, j, i] that no mask hides, a
// stretch at a time.
func (l *attention[T]) existing(samples int, visit func(from, to int)) {
	rows := samples * l.heads * l.length
	if !l.causal {
		visit(0, rows*l.length)
		return
	}
	for r := range rows {
		visit(r*l.length+r%l.length, (r+1)*l.length)
	}
}

// once rounds an operand of a scalar format, a whole tensor at a time.
func (l *attention[T]) once(p *pass, part int, id PointID, o operation, dst, src []T, point *quant.Point, first uint64) {
	if point != nil && !shared(point) {
		round(l.at(part), p, id, o, dst[:len(src)], src, point, first)
	}
}

// onceExisting is once for a tensor that the mask is for.
func (l *attention[T]) onceExisting(p *pass, part int, id PointID, o operation, dst, src []T, point *quant.Point, first uint64) {
	if point == nil || shared(point) {
		return
	}
	l.existing(p.samples, func(from, to int) {
		round(l.at(part), p, id, o, dst[from:to], src[from:to], point, first+uint64(from))
	})
}

func (l *attention[T]) forward(p *pass) {
	l.into.forward(p)
	l.once(p, partScore, ForwardOperand, opForwardOperand, l.activations, l.parts.values(p.samples), l.set.Operand, l.parts.first(p))
	for block := range p.samples * l.heads {
		l.triangle(p, partScore, block, l.ofPart(ofKey, block).turned(), l.ofPart(ofQuery, block), l.scores.value.data)
	}
	l.softmax.forward(p)
	l.onceExisting(p, partMix, ForwardOperand, opForwardOperand, l.probabilities, l.scores.values(p.samples), l.set.Operand, l.scores.first(p))
	o := l.mixed.values(p.samples)
	for block := range p.samples * l.heads {
		l.product(p, partMix, block, l.ofPart(ofValue, block), l.ofScores(l.probabilities, block, false), o[l.inMixed(block):])
	}
	round(l.at(partMix), p, ForwardActivation, opActivation, o, o, &l.set.Activation, l.mixed.first(p))
	l.out.forward(p)
}

func (l *attention[T]) backward(p *pass, below bool) {
	l.out.backward(p, true)
	gradient, result := l.set.InputGradient.Gradient, &l.set.InputGradient.Result
	l.once(p, partScoreBack, InputGradientGradient, opInputOperand, l.mixedGradient, l.mixed.gradients(p.samples), gradient, 0)
	dp, parts := l.scores.gradients(p.samples), l.parts.gradients(p.samples)
	for block := range p.samples * l.heads {
		do := l.ofMixed(block)
		l.triangle(p, partScoreBack, block, l.ofPart(ofValue, block).turned(), do, dp)
		l.product(p, partValueBack, block, do, l.ofScores(l.probabilities, block, false).turned(), parts[l.inParts(ofValue, block):])
	}
	l.existing(p.samples, func(from, to int) {
		round(l.at(partScoreBack), p, InputGradientResult, opInputResult, dp[from:to], dp[from:to], result, uint64(from))
	})
	l.softmax.backward(p)
	l.onceExisting(p, partQueryBack, InputGradientGradient, opInputOperand, l.scoreGradient, dp, gradient, 0)
	for block := range p.samples * l.heads {
		da := l.ofScores(l.scoreGradient, block, true)
		l.product(p, partQueryBack, block, l.ofPart(ofKey, block), da, parts[l.inParts(ofQuery, block):])
		l.product(p, partKeyBack, block, l.ofPart(ofQuery, block), da.turned(), parts[l.inParts(ofKey, block):])
	}
	round(l.at(partQueryBack), p, InputGradientResult, opInputResult, parts, parts, result, 0)
	l.into.backward(p, below)
}
