package quant

import "math"

// mul forms the product m.work by blocks of columns.
func (m *Multiplier[T]) mul(products, sums *Counts) {
	p := &m.work
	wide := blockWidth(p.K)
	if m.wide != nil {
		m.wide.take()
	}
	for j0 := p.from; j0 < p.to; j0 += wide {
		m.block = block[T]{Multiplier: m, p: p, j0: j0, width: min(wide, p.to-j0), products: products, sums: sums}
		m.block.form()
	}
}

// release lets go of the caller's tensors.
func (m *Multiplier[T]) release() {
	m.work, m.block = Product[T]{}, block[T]{}
	if m.engine != nil {
		m.engine.columns = nil
	}
}

// blockWidth is the number of columns of a block: few enough that the operand block
// stays in the second-level cache, enough to hide the latency of the additions.
func blockWidth(terms int) int {
	const cached = 1 << 16 // elements
	w := cached / max(terms, 1)
	return min(max(w&^7, 16), 64)
}

// block is a block of columns of one product on its way through the machine's
// arithmetic, the engine or the reference, whichever serves a row first.
type block[T Element] struct {
	*Multiplier[T]
	p              *Product[T]
	j0, width      int
	products, sums *Counts
	engineReady    bool // the columns were offered to the engine
	engineServes   bool // and it could take them
}

// form forms all rows of the block.
func (b *block[T]) form() {
	p := b.p
	b.slab = grown(b.slab, p.K*b.width)
	p.B.Pack(b.slab, b.width, 0, p.K, b.j0, b.j0+b.width)
	b.line = grown(b.line, p.K)
	useNative := b.native != nil && p.Scale == nil
	if useNative {
		b.native.begin(p.K, b.width, b.line, b.slab)
	}
	for i := range p.I {
		for k := range b.line {
			b.line[k] = p.A.At(i, k)
		}
		to := p.C[i*p.J+b.j0:][:b.width]
		if useNative && b.nativeRow(to, i) || b.engineRow(to, i) {
			continue
		}
		b.referenceRow(to, i)
	}
}

// nativeRow forms row i in the machine's arithmetic; false where it may have had
// an event.
func (b *block[T]) nativeRow(to []T, i int) bool {
	s := b.native.row()
	if b.p.Bias != nil {
		bias := b.p.Bias[i]
		for j := range s {
			s[j] += bias
		}
	}
	copy(to, s)
	return finite(to)
}

// referenceRow forms row i in exact reals.
func (b *block[T]) referenceRow(to []T, i int) {
	column := make([]T, b.p.K)
	for j := range to {
		for k := range column {
			column[k] = b.slab[k*b.width+j]
		}
		to[j] = b.ref.element(b.p, column, i, b.j0+j, b.products, b.sums)
	}
}

// engineRow forms row i in the engine; false where that has no place for it.
func (b *block[T]) engineRow(to []T, i int) bool {
	e, p := b.engine, b.p
	if e == nil || !b.prepareEngine() || !narrowed(e.a, b.line) {
		return false
	}
	if p.Bias != nil && !isNarrow(float64(p.Bias[i])) {
		return false
	}
	e.fillRow(p.Terms.Row, p.Sums.Row, p.firstI+uint32(i))
	var s []float64
	next, ok := e.terms+1, true
	if b.wide != nil && b.wide.n > 0 {
		b.wide.row(e, i)
		s = e.s
	} else if s, next, ok = e.row(); !ok {
		return false
	}
	if p.Scale != nil {
		e.scale(s, p.Scale[i], next)
		next++
	}
	if p.Bias != nil {
		e.addBias(s, float64(p.Bias[i]), next)
	}
	for j, v := range s {
		to[j] = T(v)
	}
	e.report(b.products, b.sums)
	return true
}

// leftRow implements lefts.
func (b *block[T]) leftRow(i int, to []float64) bool {
	narrow := true
	for k := range to {
		to[k] = float64(b.p.A.At(i, k))
		narrow = narrow && isNarrow(to[k])
	}
	return narrow
}

// prepareEngine hands the columns to the engine, once a block; false where they
// are not binary32 numbers.
func (b *block[T]) prepareEngine() bool {
	if b.engineReady {
		return b.engineServes
	}
	b.engineReady = true
	e, p := b.engine, b.p
	e.begin(p.K, b.width)
	if !narrowed(e.b, b.slab) {
		return false
	}
	e.columns, e.firstColumn = p.B, b.j0
	if b.wide != nil {
		b.wide.form(e, p.I, b)
	}
	e.fillColumns(p.Terms.Column, p.Sums.Column, uint32(p.FirstJ)+uint32(b.j0))
	b.engineServes = true
	return true
}

// narrowed converts src, NaN without payload, so that adding to its code keeps it
// one; false where a value is not a binary32 number, whose products binary64 holds.
func narrowed[T Element](dst []float64, src []T) bool {
	ok := true
	for i, v := range src {
		x := float64(v)
		ok = ok && isNarrow(x)
		if x != x {
			x = nan64
		}
		dst[i] = x
	}
	return ok
}

// isNarrow reports whether x is a binary32 number, an infinity or NaN.
func isNarrow(x float64) bool { return float64(float32(x)) == x || x != x }

// finite reports whether all of x are finite.
func finite[T Element](x []T) bool {
	for _, v := range x {
		if !(math.Abs(float64(v)) <= math.MaxFloat64) {
			return false
		}
	}
	return true
}

// sumRows forms one sum of stored terms a row, the rows of the matrix being the
// columns of blocks whose one row is all ones.
func (m *Multiplier[T]) sumRows(dst []T, terms Matrix[T], rows, k int, d Streams, sums *Counts) {
	if m.nativeRows {
		m.sumNative(dst, terms, rows, k, d, sums)
		return
	}
	to, narrow := any(dst).([]float32)
	if m.fastSums == nil || !narrow {
		m.sumRange(dst, terms, 0, rows, k, d, sums)
		return
	}
	left := m.fastSums.sum(to, Matrix[float32]{any(terms.Data).([]float32), terms.Row, terms.Col}, rows, k, d, sums)
	for i := 0; i < len(left); i += 2 {
		m.sumRange(dst, terms, left[i], left[i+1], k, d, sums)
	}
}

// sumNative is sumRows in binary64's own arithmetic, one term after another: infinities
// and NaN stick, so that a finite sum had no event. Other rows are formed again, in
// exact reals, which count.
func (m *Multiplier[T]) sumNative(dst []T, terms Matrix[T], rows, k int, d Streams, sums *Counts) {
	for i := range dst[:rows] {
		var s T
		at := i * terms.Row
		for range k {
			s += terms.Data[at]
			at += terms.Col
		}
		dst[i] = s
		if s-s != 0 {
			m.ref.sumRows(dst[i:i+1], terms, k, i, d, sums)
		}
	}
}

// sumRange forms the sums of rows first to last in the engine or in exact reals.
func (m *Multiplier[T]) sumRange(dst []T, terms Matrix[T], first, last, k int, d Streams, sums *Counts) {
	e := m.sumEngine
	wide := blockWidth(k)
	for i0 := first; i0 < last; i0 += wide {
		width := min(wide, last-i0)
		if e == nil || !m.sumBlock(dst[i0:][:width], terms, k, i0, d, sums) {
			m.ref.sumRows(dst[i0:][:width], terms, k, i0, d, sums)
		}
	}
}

// sumBlock forms the sums of rows i0, i0+1, ... in the engine; false where that has
// no place for them.
func (m *Multiplier[T]) sumBlock(dst []T, terms Matrix[T], k, i0 int, d Streams, sums *Counts) bool {
	e := m.sumEngine
	e.begin(k, len(dst))
	m.slab = grown(m.slab, k*len(dst))
	for n := range k {
		e.a[n] = 1
		for i := range dst {
			m.slab[n*len(dst)+i] = terms.At(i0+i, n)
		}
	}
	if !narrowed(e.b, m.slab) {
		return false
	}
	e.fillSums(d, uint32(i0))
	s, _, ok := e.row()
	if !ok {
		return false
	}
	for i, v := range s {
		dst[i] = T(v)
	}
	e.report(nil, sums)
	return true
}
