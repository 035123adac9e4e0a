package quant

import (
	"math"
	"math/bits"

	"ulpine/quant/internal/kernel"
)

// wideSums forms the exact sums of order wide for all rows of a block of columns at
// once, by the kernels' multiply-add chains of binary64, where no product is rounded.
//
// Operands are cut into one or two parts each, multiples of a power of two that are
// so short that no chain of parts rounds: parts of at most wa and wb units, and fewer
// than 2^g terms, with wa + wb + g <= 53 bits. The sum of the chains is the exact sum.
type wideSums struct {
	kernel  *kernel.Wide
	product kernel.Product[float64]
	columns packed64
	left    cutOperand // all rows of the product, good while taken
	taken   bool
	right   cutOperand   // the block's columns
	chains  [4][]float64 // I x width each, the block's width
	n       int          // of them in use; 0: the block has none
}

// newWideSums returns the exact sums of acc, nil for other orders.
func newWideSums(acc Accumulate) *wideSums {
	if acc.Order.Kind != Wide {
		return nil
	}
	return &wideSums{kernel: kernel.NewWide(true)}
}

// cutOperand is an operand in one part or two whose sum it is. Its values are at most
// 2^top, multiples of 2^fine, and have at most bits significant bits.
type cutOperand struct {
	whole           []float64
	high, low       []float64 // memory of two parts
	parts           [2][]float64
	top, fine, bits int
	finite          bool
}

// measure finds the extent of whole.
func (o *cutOperand) measure() {
	largest, fine, ok := extentOf(o.whole)
	o.finite = ok
	if largest == 0 {
		o.top, o.fine, o.bits = 0, 0, 1
		return
	}
	o.top, o.fine = exponentOf(largest)+1, fine
	var any uint64
	for _, v := range o.whole {
		any |= math.Float64bits(v)
	}
	o.bits = fractionBits64 + 1 - min(bits.TrailingZeros64(any), fractionBits64)
}

// width is the bits of the longest of n parts.
func (o *cutOperand) width(n int) int {
	e := o.top - o.fine
	if n == 2 {
		return (e + 1) / 2
	}
	return e
}

// cut makes n parts: the second is what rounding to multiples of the upper half's
// place leaves.
func (o *cutOperand) cut(n int) {
	o.parts = [2][]float64{o.whole}
	if n == 1 {
		return
	}
	o.high, o.low = grown(o.high, len(o.whole)), grown(o.low, len(o.whole))
	o.parts = [2][]float64{o.high, o.low}
	c := 1.5 * powerOfTwo(o.fine+o.width(2)+fractionBits64)
	for i, v := range o.whole {
		o.high[i] = (v + c) - c
		o.low[i] = v - o.high[i]
	}
}

// take begins a product: its left-hand operand is to be read anew.
func (w *wideSums) take() { w.taken, w.n = false, 0 }

// lefts yields the rows of the left-hand operand; false where a value is not a binary32
// number.
type lefts interface {
	leftRow(i int, to []float64) bool
}

// form forms the chains of a block, whose columns the engine holds; n is 0 where they
// do not serve.
func (w *wideSums) form(e *engine, rows int, left lefts) {
	w.n = 0
	if e.terms == 0 {
		return
	}
	if !w.taken {
		w.taken = true
		w.left.whole = grown(w.left.whole, rows*e.terms)
		narrow := true
		for i := range rows {
			narrow = left.leftRow(i, w.left.whole[i*e.terms:][:e.terms]) && narrow
		}
		w.left.measure()
		w.left.finite = w.left.finite && narrow
	}
	a, b := &w.left, &w.right
	b.whole = e.b
	b.measure()
	if !a.finite || !b.finite || !e.exactTerms(a, b) {
		return
	}
	grow := bits.Len(uint(e.terms))
	for _, n := range [][2]int{{1, 1}, {2, 1}, {1, 2}, {2, 2}} {
		if a.width(n[0])+b.width(n[1])+grow <= fractionBits64+1 {
			w.run(e, rows, n)
			return
		}
	}
}

// exactTerms tells whether the product point leaves every product of the operands
// alone.
func (e *engine) exactTerms(a, b *cutOperand) bool {
	q := &e.product
	switch {
	case e.acc.Product == nil, q.kind == quickNative64:
		return true
	case q.floor > 0: // flushes
		return false
	}
	return a.bits+b.bits <= q.fraction+1 && a.fine+b.fine >= q.emin-q.fraction && a.top+b.top <= exponentOf(q.max)
}

// run forms the chains of n[0] times n[1] parts.
func (w *wideSums) run(e *engine, rows int, n [2]int) {
	w.left.cut(n[0])
	w.right.cut(n[1])
	for _, a := range w.left.parts[:n[0]] {
		for _, b := range w.right.parts[:n[1]] {
			w.chains[w.n] = grown(w.chains[w.n], rows*e.width)
			w.columns = packed64{b, e.width}
			w.product = kernel.Product[float64]{
				I: rows, J: e.width, K: e.terms, A: a, ARow: e.terms, ACol: 1, B: &w.columns, C: w.chains[w.n],
			}
			w.kernel.Mul(&w.product, nil) // finite, so that nothing is handed back
			w.n++
		}
	}
	w.product, w.columns = kernel.Product[float64]{}, packed64{}
}

// packed64 is a packed block as the right-hand operand of a product.
type packed64 struct {
	data  []float64
	width int
}

// Pack implements kernel.Columns.
func (b *packed64) Pack(dst []float64, width, k0, k1, j0, j1 int) {
	for k := k0; k < k1; k++ {
		row := dst[(k-k0)*width:][:width]
		clear(row[copy(row, b.data[k*b.width+j0:k*b.width+j1]):])
	}
}

// row copies the chains of row i to the engine's levels and rounds their sums.
func (w *wideSums) row(e *engine, i int) {
	e.level = grown(e.level, w.n*e.width)
	for n := range w.n {
		copy(e.level[n*e.width:], w.chains[n][i*e.width:][:e.width])
	}
	e.roundWide(w.n)
}
