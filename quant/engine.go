package quant

import "math"

// engine forms sums for one row of the result and a block of columns at a time,
// in binary64: operands, products and partial sums of the block lie in slices of
// width columns, and every step of a sum is one pass over them.
//
// It serves tensors of float32, whose products are exact in binary64, and points
// that all have a quick rounding.
type engine struct {
	acc      Accumulate
	product  quick // used where acc.Product is set
	sum      quick
	outer    quick // sum where no outer point is set
	foldSum  bool  // additions of terms need the rest of the binary64 sum
	foldTop  bool  // so do those of two terms, in a pairwise tree
	foldNode bool  // so do those of two sums, in a tree of lanes
	splitSum bool  // additions of terms round by splitting, see addSplit

	// The block.
	terms, width int
	a            []float64 // terms of the row
	b            []float64 // terms x width
	columns      padder    // tells padding; nil in sums without products
	firstColumn  int       // number of the block's first column there
	maxB         float64   // for exact sums: the extent of b
	fineB        int
	finiteB      bool
	termWords    table
	sumWords     table
	products     Counts
	sums         Counts

	// Scratch: one product a column, the accumulators, a tree's nodes.
	t, s, chunk, node []float64
	nodes             [][]float64
	level             []float64
	place             [maxLevels]int
}

// padder is what an engine asks of the columns, which it holds packed.
type padder interface{ Padded(k, j int) bool }

// newEngine returns the engine of acc, nil where one of its points has no quick
// rounding. Terms that are not rounded to a product point have at most bits bits
// and are multiples of 2^place.
func newEngine(acc Accumulate, bits, place int) *engine {
	e := &engine{acc: acc, sum: newQuick(&acc.Sum)}
	e.outer = e.sum
	if acc.Outer != nil {
		e.outer = newQuick(acc.Outer)
	}
	if !e.sum.foldable || !e.outer.foldable {
		return nil
	}
	if acc.Product != nil {
		e.product = newQuick(acc.Product)
		switch {
		case e.product.kind == quickNative64: // holds every product
		case !e.product.foldable:
			return nil
		default:
			bits, place = e.product.fraction+1, e.product.emin-e.product.fraction
		}
		if e.product.drop < 16 && e.product.kind == quickStochastic {
			e.product.kind = quickGeneral // the 16 bits of a word reach below the last bit
		}
	}
	e.setFolds(bits, place)
	e.termWords.on = acc.Product != nil && acc.Product.Rounding.Mode == Stochastic
	e.sumWords.on = acc.Sum.Rounding.Mode == Stochastic || e.outer.point.Rounding.Mode == Stochastic
	return e
}

// setFolds decides whether the binary64 sum of a partial sum and a term, rounded
// again, is the rounding of the exact sum without its rest.
//
// To nearest it is when the terms have at most the p <= 25 bits of the result. Let
// the sum be inexact in binary64; then its smaller operand is below 2^-27 of the
// larger one, which is a value of p bits: if that is the partial sum, a value of
// the format, and if it is the term, far above the format's last place. So the
// exact sum and its binary64 rounding both lie closer to the larger operand than
// any midpoint, which is at least 2^-26 of it away. Two terms of a tree need in
// addition that no term reaches below the format's last place.
func (e *engine) setFolds(termBits, place int) {
	mode := e.sum.point.Rounding.Mode
	p := e.sum.fraction + 1
	inner := p <= 25
	if e.acc.Through32 {
		inner, p = p <= 24, 24
	}
	nearest := e.acc.Through32 || mode == NearestEven || mode == NearestAway
	e.foldSum = !(nearest && inner && termBits <= p)
	last := e.sum.emin - e.sum.fraction
	if e.acc.Through32 {
		last = -149
	}
	e.foldTop = e.foldSum || place < last
	e.foldNode = !(nearest && inner)
	e.splitSum = !e.foldTop && !e.acc.Through32 && e.sum.kind == quickNearest
}

// begin sizes the block.
func (e *engine) begin(terms, width int) {
	e.terms, e.width = terms, width
	e.a = grown(e.a, terms)
	e.b = grown(e.b, terms*width)
	e.products, e.sums = Counts{}, Counts{}
	e.t = grown(e.t, width)
	e.s = grown(e.s, width)
	e.chunk = grown(e.chunk, width)
	if e.termWords.on {
		e.termWords.span(0, terms, width)
	}
	if e.sumWords.on {
		from := 0
		if e.acc.Order.Kind == Pairwise || e.acc.Order.Kind == Wide || e.acc.Sum.Rounding.Mode != Stochastic {
			from = terms // the additions of terms draw nothing
		}
		e.sumWords.span(from, terms+e.later(), width)
	}
}

// fillColumns takes the block's operand, already in b, and draws the words of its
// columns, lane the number of the first.
func (e *engine) fillColumns(terms, sums Draws, lane uint32) {
	if e.termWords.on {
		e.termWords.fillColumns(terms, lane, 0)
	}
	if e.sumWords.on {
		e.sumWords.fillColumns(sums, lane, 0)
	}
	e.measure()
}

// fillRow draws the words of row i.
func (e *engine) fillRow(terms, sums Draws, i uint32) {
	if e.termWords.on {
		e.termWords.fillRow(terms, i, 1)
	}
	if e.sumWords.on {
		e.sumWords.fillRow(sums, i, 1)
	}
}

// fillSums draws the words of sums without products: the block's columns are rows
// i0, i0+1, ... of the terms, its row is their column 0.
func (e *engine) fillSums(d Streams, i0 uint32) {
	if e.sumWords.on {
		e.sumWords.fillColumns(d.Row, i0, 1)
		e.sumWords.fillRow(d.Column, 0, 0)
	}
	e.measure()
}

// measure finds the extent of b, which exact sums ask for.
func (e *engine) measure() {
	if e.acc.Order.Kind == Wide {
		e.maxB, e.fineB, e.finiteB = extentOf(e.b)
	}
}

// report adds the events since the last report to the tallies, which may be nil.
func (e *engine) report(products, sums *Counts) {
	if products != nil {
		products.Add(e.products)
	}
	if sums != nil {
		sums.Add(e.sums)
	}
	e.products, e.sums = Counts{}, Counts{}
}

// scale replaces s[j] by R[sum](factor s[j]) for addition k.
func (e *engine) scale(s []float64, factor float64, k int) {
	a := adder{through32: e.acc.Through32, counts: &e.sums}
	for j, v := range s {
		s[j] = a.roundWord(e.sum.point, ExactProduct(factor, v), e.sumWords.word(k, j))
	}
}

// addBias replaces s[j] by R[outer](s[j] + bias) for addition k.
func (e *engine) addBias(s []float64, bias float64, k int) {
	if bias != bias {
		bias = nan64
	}
	for j := range e.t {
		e.t[j] = bias
	}
	e.add(s, e.t, &e.outer, k, true)
}

// later is the number of additions that follow those of the terms.
func (e *engine) later() int {
	const scaleAndBias = 2
	switch o := e.acc.Order; o.Kind {
	case Chunk:
		return (e.terms+o.K-1)/o.K + scaleAndBias
	case Pairwise:
		return max(e.terms, 1) + scaleAndBias
	case Lanes:
		return o.K + scaleAndBias
	case Wide:
		return 1 + scaleAndBias
	}
	return scaleAndBias
}

// isPadded reports whether term k of column j of the block is padding.
func (e *engine) isPadded(k, j int) bool {
	return e.columns != nil && k < e.terms && e.columns.Padded(k, e.firstColumn+j)
}

// term writes R[product](a b[j]) of term k to t.
func (e *engine) term(t []float64, k int) {
	a, b := e.a[k], e.b[k*e.width:][:len(t)]
	switch {
	case e.acc.Product == nil:
		for j, v := range b {
			t[j] = float64(a * v)
		}
	case e.product.kind == quickNearest:
		e.termNearest(t, a, b, k)
	case e.product.kind == quickNative32:
		e.termNative32(t, a, b, k)
	case e.product.kind == quickStochastic:
		e.termStochastic(t, a, b, k)
	case e.product.kind == quickDirected:
		e.termDirected(t, a, b, k)
	case e.product.kind == quickNative64:
		e.termNative64(t, a, b, k)
	default:
		e.termGeneral(t, a, b, k)
	}
}

// termNearest is termGeneral for nearest-even, see quick.blockNearest.
func (e *engine) termNearest(t []float64, a float64, b []float64, k int) {
	low, lift, limit := e.product.low, e.product.lift, e.product.max
	for j, v := range b[:len(t)] {
		p := float64(a * v)
		c := math.Float64frombits(max(math.Float64bits(p)&exponentMask64, low) + lift)
		r := (p + c) - c
		if !(math.Abs(r) <= limit) {
			r = e.oddTerm(p, k, j)
		}
		t[j] = r
	}
}

// termNative32 is termGeneral for nearest-even to binary32.
func (e *engine) termNative32(t []float64, a float64, b []float64, k int) {
	for j, v := range b[:len(t)] {
		p := float64(a * v)
		r := float64(float32(p))
		if !(math.Abs(r) <= math.MaxFloat32) {
			r = e.oddTerm(p, k, j)
		}
		t[j] = r
	}
}

// termNative64 is termGeneral for binary64, where every product is exact.
func (e *engine) termNative64(t []float64, a float64, b []float64, k int) {
	for j, v := range b[:len(t)] {
		p := float64(a * v)
		if !(math.Abs(p) <= math.MaxFloat64) {
			p = e.oddTerm(p, k, j)
		}
		t[j] = p
	}
}

// termStochastic is termGeneral for stochastic rounding, see quick.blockStochastic.
func (e *engine) termStochastic(t []float64, a float64, b []float64, k int) {
	q := &e.product
	low, limit, centre, keep := q.low-1, math.Float64bits(q.max), q.centre, ^uint64(0)<<q.drop
	mask, up := uint32(0xffff)&^(1<<(16-q.random)-1), q.drop-16
	row, column := e.termWords.at(k)
	b, column = b[:len(t)], column[:len(t)]
	for j, v := range b {
		p := float64(a * v)
		u := halves(row, column[j])
		sign, n := magnitude(p)
		r := (n + uint64(u&mask)<<up + centre) & keep
		y := math.Float64frombits(r | sign)
		if n-1 < low || r > limit {
			y = e.generalTerm(p, u<<16, k, j)
		}
		t[j] = y
	}
}

// termDirected is termGeneral for the modes of quick.blockDirected.
func (e *engine) termDirected(t []float64, a float64, b []float64, k int) {
	q := &e.product
	low, limit, keep := q.low-1, math.Float64bits(q.max), ^uint64(0)<<q.drop
	drop, add, even := q.drop&63, q.add, q.even
	for j, v := range b[:len(t)] {
		p := float64(a * v)
		sign, n := magnitude(p)
		r := (n + add[sign>>63] + n>>drop&even) & keep
		y := math.Float64frombits(r | sign)
		if n-1 < low || r > limit {
			y = e.generalTerm(p, 0, k, j)
		}
		t[j] = y
	}
}

// termGeneral rounds every product on its own.
func (e *engine) termGeneral(t []float64, a float64, b []float64, k int) {
	for j, v := range b[:len(t)] {
		t[j] = e.generalTerm(float64(a*v), e.termWords.word(k, j), k, j)
	}
}

// generalTerm rounds one exact product.
func (e *engine) generalTerm(p float64, word uint32, k, j int) float64 {
	if !(math.Abs(p) <= math.MaxFloat64) {
		return e.oddTerm(p, k, j)
	}
	v, event := e.product.round(p, word)
	if event != Underflowed {
		e.products.Count(event)
	}
	return v
}

// oddTerm returns the product of a term whose exact product p is not finite or
// rounds beyond the largest finite value.
func (e *engine) oddTerm(p float64, k, j int) float64 {
	if e.isPadded(k, j) {
		return 0
	}
	v, event := e.product.odd(p, false)
	e.products.Count(event)
	return v
}

// odd returns what becomes of an x that is not finite or rounds beyond the largest
// finite value. fresh says that x is infinite although its operands were finite:
// the adder's own overflow, which is one of the point.
func (q *quick) odd(x float64, fresh bool) (float64, Event) {
	side := math.Float64bits(x) >> 63
	switch {
	case x != x:
		return nan64, BecameNaN
	case math.Abs(x) <= math.MaxFloat64 && q.uneven:
		return q.round(x, 0) // nearest-even: the other kinds come here with specials only
	case math.Abs(x) <= math.MaxFloat64:
		return q.over[side], q.overEvent[side]
	case fresh && q.infEvent[side] != Saturated:
		return q.inf[side], Overflowed
	}
	return q.inf[side], q.infEvent[side]
}
