package trainer

import (
	"ulpine/quant"
	"ulpine/quant/elementary"
)

// positionSoftmax is what an attention layer does between its products, in place on its scores
// [sample, heads, j, i]; see attentionKind. Columns (sample, head, i) have sums over j.
type positionSoftmax[T quant.Element] struct {
	*attention[T]
	factor    [1]T // c
	numerator []float64
	columns   []T // one a column: the largest score, later the sum
	spread    []T // the columns' values, one a score
	total     *summer[T]
	agree     *quant.Multiplier[T]
	one       masked[T]
}

func newPositionSoftmax[T quant.Element](l *attention[T], b *bench[T]) (*positionSoftmax[T], error) {
	n := len(l.scores.value.data)
	s := &positionSoftmax[T]{
		attention: l, factor: [1]T{T(b.spec.number)},
		numerator: make([]float64, n), columns: make([]T, n/l.length), spread: make([]T, n),
	}
	var err error
	if s.total, err = newSummer[T](l.set.statistic(), l.length, (*down[T])(l)); err != nil {
		return nil, err
	}
	s.agree, err = multiplier[T](l.set.InputGradient.statistic())
	return s, err
}

// down is the right-hand operand of the sums of columns: term j of column (block, i).
type down[T quant.Element] attention[T]

// Pack implements quant.Columns.
func (b *down[T]) Pack(dst []T, width, k0, k1, j0, j1 int) {
	data, n := b.scores.value.data, b.length
	for k := k0; k < k1; k++ {
		row := dst[(k-k0)*width:][:width]
		for j := j0; j < j1; j++ {
			row[j-j0] = data[(j/n*n+k)*n+j%n]
		}
		clear(row[j1-j0:])
	}
}

// Padded implements quant.Columns.
func (b *down[T]) Padded(k, j int) bool { return b.causal && k > j%b.length }

func (s *positionSoftmax[T]) forward(p *pass) {
	x, pl, first := s.scores.values(p.samples), s.at(partScore), s.scores.first(p)
	columns := s.columns[:len(x)/s.length]
	point := &s.set.Activation
	s.existing(p.samples, func(from, to int) {
		combined(pl, p, ForwardActivation, opScore, x[from:to], x[from:to], s.factor[:], product, point, first+uint64(from))
	})
	s.exponentials(x, columns, p.samples)
	s.existing(p.samples, func(from, to int) {
		round(pl, p, ForwardActivation, opNumerator, x[from:to], s.numerator[from:to], point, first+uint64(from))
	})
	s.total.sum(columns, p.first*uint64(s.heads*s.length), pl.streams(p, opTotal), s.counts(p, ForwardStatistic))
	s.spreadOut(columns, p.samples)
	s.existing(p.samples, func(from, to int) {
		combined(pl, p, ForwardActivation, opProbability, x[from:to], x[from:to], s.spread[from:to], quotient, point, first+uint64(from))
	})
}

// exponentials writes exp(s - m); a column with a NaN has NaN for its m.
func (s *positionSoftmax[T]) exponentials(x, largest []T, samples int) {
	for c := range largest {
		block, i := c/s.length, c%s.length
		largest[c] = x[block*s.length*s.length+i] // j = 0 exists under every mask
	}
	s.eachRow(samples, func(at, column, n int) {
		for k, v := range x[at:][:n] {
			if v > largest[column+k] || v != v {
				largest[column+k] = v
			}
		}
	})
	s.eachRow(samples, func(at, column, n int) {
		for k, v := range x[at:][:n] {
			s.numerator[at+k] = elementary.Exp(float64(v) - float64(largest[column+k]))
		}
	})
}

// eachRow visits the elements that no mask hides by rows (block, j): the place of the
// first, its column, their number.
func (s *positionSoftmax[T]) eachRow(samples int, visit func(at, column, n int)) {
	for r := range samples * s.heads * s.length {
		i := 0
		if s.causal {
			i = r % s.length
		}
		visit(r*s.length+i, r/s.length*s.length+i, s.length-i)
	}
}

// spreadOut gives every score its column's value.
func (s *positionSoftmax[T]) spreadOut(columns []T, samples int) {
	s.eachRow(samples, func(at, column, n int) { copy(s.spread[at:][:n], columns[column:]) })
}

func (s *positionSoftmax[T]) backward(p *pass) {
	x, g, pl := s.scores.values(p.samples), s.scores.gradients(p.samples), s.at(partScoreBack)
	columns := s.columns[:len(x)/s.length]
	id, point := InputGradientResult, &s.set.InputGradient.Result
	s.agreements(p, pl, x, g, columns)
	s.spreadOut(columns, p.samples)
	s.existing(p.samples, func(from, to int) {
		u := g[from:to]
		combined(pl, p, id, opUnlike, u, u, s.spread[from:to], difference, point, uint64(from))
		combined(pl, p, id, opWeighted, u, x[from:to], u, product, point, uint64(from))
		combined(pl, p, id, opUnscaled, u, u, s.factor[:], product, point, uint64(from))
	})
}

// agreements writes the sum of p dp over j of every column.
func (s *positionSoftmax[T]) agreements(p *pass, pl place, x, g, dst []T) {
	n := s.length
	q := quant.Product[T]{I: 1, J: 1, K: n, B: &s.one, Terms: pl.streams(p, opAgree), Sums: pl.streams(p, opAgreeSum)}
	counts := s.counts(p, InputGradientStatistic)
	for c := range dst {
		at := c/n*n*n + c%n
		q.A = quant.Matrix[T]{Data: x[at:], Row: n, Col: n}
		s.one = masked[T]{Matrix: quant.Matrix[T]{Data: g[at:], Row: n, Col: 1}, from: c % n}
		if s.causal {
			s.one.rule = laterTerms
		}
		q.C, q.FirstJ = dst[c:c+1], uint64(c)
		s.agree.Mul(q, counts, counts)
	}
}
