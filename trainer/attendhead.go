package trainer

import "ulpine/quant"

// facing is an operand of a product of activations: a matrix of one head of one example.
type facing[T quant.Element] struct {
	quant.Matrix[T]
	rows, columns int
	gradient      bool // of o or a; else an activation
	rule          maskRule
}

// turned is the matrix with its rows as columns.
func (f facing[T]) turned() facing[T] {
	f.Row, f.Col = f.Col, f.Row
	f.rows, f.columns = f.columns, f.rows
	switch f.rule {
	case laterTerms:
		f.rule = earlierTerms
	case earlierTerms:
		f.rule = laterTerms
	}
	return f
}

// maskRule says which terms of a right-hand operand a mask hides.
type maskRule uint8

const (
	noTerms      maskRule = iota
	laterTerms            // k beyond the column
	earlierTerms          // k before the column
)

// masked is a right-hand operand under a mask; what is hidden is zero in memory.
type masked[T quant.Element] struct {
	quant.Matrix[T]
	rule maskRule
	from int // number of the first column
}

// Padded implements quant.Columns.
func (m *masked[T]) Padded(k, j int) bool {
	return m.rule == laterTerms && k > m.from+j || m.rule == earlierTerms && k < m.from+j
}

// The thirds of the tensor of q, k and v.
const (
	ofQuery = iota
	ofKey
	ofValue
)

// inParts is where a third of a block (sample heads + head) begins, inMixed where o does.
func (l *attention[T]) inParts(third, block int) int {
	sample, head := block/l.heads, block%l.heads
	return ((3*sample+third)*l.heads + head) * l.deep * l.length
}

func (l *attention[T]) inMixed(block int) int { return block * l.deep * l.length }

// ofPart is q, k or v of a block, [channel, position].
func (l *attention[T]) ofPart(third, block int) facing[T] {
	return facing[T]{Matrix: l.lines(l.activations[l.inParts(third, block):]), rows: l.deep, columns: l.length}
}

// ofMixed is the gradient of o of a block, [channel, position].
func (l *attention[T]) ofMixed(block int) facing[T] {
	return facing[T]{Matrix: l.lines(l.mixedGradient[l.inMixed(block):]), rows: l.deep, columns: l.length, gradient: true}
}

// ofScores is p or da of a block, [j, i].
func (l *attention[T]) ofScores(data []T, block int, gradient bool) facing[T] {
	f := facing[T]{Matrix: l.lines(data[block*l.length*l.length:]), rows: l.length, columns: l.length, gradient: gradient}
	if l.causal {
		f.rule = laterTerms
	}
	return f
}

// lines is a matrix with a line of all positions to each row.
func (l *attention[T]) lines(data []T) quant.Matrix[T] {
	return quant.Matrix[T]{Data: data, Row: l.length, Col: 1}
}

// take is the operand of one product, its rows along the terms that are summed: rounded
// where its format shares scales, with the factor.
func (l *attention[T]) take(p *pass, part, block int, f facing[T], o operation, scratch []T) (facing[T], float64) {
	id, point := ForwardOperand, l.set.Operand
	if f.gradient {
		id, point, o = InputGradientGradient, l.set.InputGradient.Gradient, opInputOperand
	}
	if point == nil || !shared(point) {
		return f, 1
	}
	size := f.rows * f.columns
	scratch = scratch[:size]
	for r := range f.rows {
		for c := range f.columns {
			scratch[r*f.columns+c] = f.At(r, c)
		}
	}
	first := (p.first*uint64(l.heads) + uint64(block)) * uint64(size)
	factor := roundAlong(l.at(part), p, id, o, scratch, scratch, quant.Shape{Outer: f.rows, Axis: f.columns, Inner: 1}, point, first)
	f.Matrix = quant.Matrix[T]{Data: scratch, Row: f.columns, Col: 1}
	return f, factor
}

// form is the product of two operands of a block, ready but for its result.
func (l *attention[T]) form(p *pass, part, block int, left, right facing[T]) quant.Product[T] {
	left, a := l.take(p, part, block, left, opForwardOperand, l.left)
	across, b := l.take(p, part, block, right.turned(), opActivationAgain, l.right)
	right = across.turned()
	l.view = masked[T]{Matrix: right.Matrix, rule: right.rule}
	q := quant.Product[T]{I: left.rows, J: right.columns, K: left.columns, A: left.Matrix, B: &l.view}
	q.FirstJ = (p.first*uint64(l.heads) + uint64(block)) * uint64(l.length)
	if factor := float64(a * b); factor != 1 {
		q.Scale = l.factors[:q.I]
		fill(q.Scale, factor)
	}
	pl := l.at(part)
	if part >= partScoreBack {
		q.Terms, q.Sums = pl.streams(p, opInputProduct), pl.streams(p, opInputSum)
	} else {
		q.Terms, q.Sums = pl.streams(p, opForwardProduct), pl.streams(p, opForwardSum)
	}
	return q
}

// run computes a product of a part. Those of the first example are looked at.
func (l *attention[T]) run(p *pass, part, block int, q *quant.Product[T]) {
	mul, set, product, sum := l.forwardMul, &l.set.Forward, ForwardProduct, ForwardSum
	if part >= partScoreBack {
		mul, set, product, sum = l.backMul, &l.set.InputGradient.Sums, InputGradientProduct, InputGradientSum
	}
	mul.Mul(*q, l.counts(p, product), l.counts(p, sum))
	if p.watch != nil && block < l.heads {
		lookSums(p.watch, l.layer, product, sum, set, q)
	}
}

// product writes a product of [channel, position] to dst.
func (l *attention[T]) product(p *pass, part, block int, left, right facing[T], dst []T) {
	q := l.form(p, part, block, left, right)
	q.C = dst
	l.run(p, part, block, &q)
}

// triangle writes a product [j, i] to its block of scores: under a mask column by
// column, because only rows up to the column exist.
func (l *attention[T]) triangle(p *pass, part, block int, left, right facing[T], scores []T) {
	q := l.form(p, part, block, left, right)
	dst := scores[block*l.length*l.length:][:l.length*l.length]
	if !l.causal {
		q.C = dst
		l.run(p, part, block, &q)
		return
	}
	first, data := q.FirstJ, l.view.Data
	for i := range l.length {
		q.I, q.J, q.C, q.FirstJ = i+1, 1, l.column, first+uint64(i)
		l.view.Data = data[i*l.view.Col:]
		l.run(p, part, block, &q)
		for j, v := range l.column[:i+1] {
			dst[j*l.length+i] = v
		}
	}
}
