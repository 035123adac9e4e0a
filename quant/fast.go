package quant

import "ulpine/quant/internal/kernel"

// fast forms products with the kernels, where all points have kernels; what those
// hand back, and all other arithmetic, is left to the engine.
type fast[T Element] struct {
	kernel         *kernel.Multiplier // tensors of float32
	wide           *kernel.Wide       // tensors of float64
	owner          *Multiplier[T]
	tally          kernel.Tally // events that the kernels met
	terms, sumsOf  quick        // the points they belong to
	product        kernel.Product[float32]
	wideProduct    kernel.Product[float64]
	products, sums *Counts
	redo           func(i0, i1, j0, j1 int)
	late           *lateScale // nil: products with scales are left to the engine
}

// newFast returns the fast path of acc, nil where there is none.
func newFast[T Element](owner *Multiplier[T], acc Accumulate) *fast[T] {
	f := &fast[T]{owner: owner}
	if _, narrow := any(owner).(*Multiplier[float32]); narrow {
		if a, ok := kernelArithmetic(acc); ok {
			f.kernel = kernel.New(a)
		}
	} else {
		f.wide = newWide(acc)
	}
	if f.kernel == nil && f.wide == nil {
		return nil
	}
	f.sumsOf, f.late = newQuick(&acc.Sum), newLateScale(acc)
	if acc.Product != nil {
		f.terms = newQuick(acc.Product)
	}
	f.redo = f.redoRows // bound once: a product allocates nothing
	return f
}

// newWide returns the kernels of sequential sums in binary64's own arithmetic, nil
// where acc is something else.
func newWide(acc Accumulate) *kernel.Wide {
	native := func(p *Point) bool { return newQuick(p).kind == quickNative64 }
	switch {
	case acc.Order.Kind != Sequential, acc.Through32, !native(&acc.Sum), acc.Outer != nil && !native(acc.Outer):
		return nil
	case acc.Product == nil:
		return kernel.NewWide(true)
	case !native(acc.Product):
		return nil
	}
	return kernel.NewWide(false)
}

// kernelArithmetic translates an accumulation; false where the kernels lack a
// part of it.
func kernelArithmetic(acc Accumulate) (a kernel.Arithmetic, ok bool) {
	switch acc.Order.Kind {
	case Sequential:
	case Chunk:
		a.Chunk = acc.Order.K
	case Pairwise:
		a.Pairwise = true
	case Lanes:
		a.Lanes = acc.Order.K
	default:
		return a, false
	}
	if acc.Product != nil {
		q := newQuick(acc.Product)
		switch q.kind {
		case quickNative32:
			a.Product, a.ProductPolicy = kernel.NativeProduct, q.policy()
		case quickNearest:
			a.Product, a.Grid, a.ProductPolicy = kernel.RoundedProduct, q.grid(), q.policy()
		case quickStochastic:
			a.Product, a.Grid = kernel.RandomProduct, q.grid()
			a.Bits, a.Centred = int(q.random), acc.Product.Rounding.Variant == Centred
		default:
			return a, false
		}
	}
	if a.Sum, ok = kernelSum(&acc.Sum, acc.Through32); !ok {
		return a, false
	}
	sum := newQuick(&acc.Sum)
	a.SumPolicy = sum.policy()
	a.Outer = a.Sum
	if acc.Outer != nil {
		a.Outer, ok = kernelSum(acc.Outer, acc.Through32)
	}
	return a, ok
}

// grid is the format of q as the kernels see it.
func (q *quick) grid() kernel.Grid {
	return kernel.Grid{Fraction: q.fraction, MinExponent: q.emin, Max: q.max}
}

// policy is what becomes of numbers beyond the format of q.
func (q *quick) policy() kernel.Policy { return kernel.Policy{Over: q.over[0], Infinite: q.inf[0]} }

// count adds the events that the kernels met at the point of q, which is nil where
// there is none.
func (q *quick) count(e kernel.Events, n *Counts) {
	for _, x := range []struct {
		times uint64
		event Event
	}{{e.Beyond, q.overEvent[0]}, {e.Infinite, q.infEvent[0]}, {e.NaN, BecameNaN}} {
		n.countTimes(x.event, x.times)
	}
}

// countTimes adds an event several times to the tallies. c may be nil.
func (c *Counts) countTimes(e Event, times uint64) {
	if c == nil {
		return
	}
	switch e {
	case Overflowed:
		c.Overflow += times
	case Saturated:
		c.Saturated += times
	case BecameNaN:
		c.NaN += times
	}
}

// kernelSum translates the rounding of additions.
func kernelSum(p *Point, through32 bool) (s kernel.Sum, ok bool) {
	q := newQuick(p)
	s = kernel.Sum{Grid: q.grid(), Through: through32}
	switch q.kind {
	case quickNative32:
		s.Kind = kernel.NativeSum
	case quickNearest:
		s.Kind = kernel.NearestSum
	case quickStochastic:
		s.Kind, s.Bits, s.Centred = kernel.StochasticSum, int(q.random), p.Rounding.Variant == Centred
	default:
		return s, false
	}
	return s, true
}

// mul forms the owner's product; false where the kernels do not serve.
func (f *fast[T]) mul(products, sums *Counts) bool {
	if f.owner.work.Scale != nil && (f.late == nil || f.kernel == nil) {
		return false
	}
	f.products, f.sums = products, sums
	defer func() { f.products, f.sums = nil, nil }()
	if p, wide := any(&f.owner.work).(*Product[float64]); wide {
		f.wideProduct = kernel.Product[float64]{
			I: p.I, J: p.J, K: p.K, A: p.A.Data, ARow: p.A.Row, ACol: p.A.Col, B: p.B, C: p.C, Bias: p.Bias,
			From: p.from, To: p.to,
		}
		f.wide.Mul(&f.wideProduct, f.redo)
		f.wideProduct = kernel.Product[float64]{}
		return true
	}
	p := any(&f.owner.work).(*Product[float32])
	scale, bias := p.Scale, p.Bias
	if scale != nil {
		p.Scale, p.Bias = nil, nil // what the kernels hand back is scaled with the rest
	}
	f.product = kernel.Product[float32]{
		I: p.I, J: p.J, K: p.K, A: p.A.Data, ARow: p.A.Row, ACol: p.A.Col, B: p.B, C: p.C,
		Bias: p.Bias, Sums: kernel.Streams(p.Sums), Terms: kernel.Streams(p.Terms), FirstJ: uint32(p.FirstJ),
		Tally: &f.tally, From: p.from, To: p.to, FirstI: p.firstI,
	}
	_, dense := p.B.(Matrix[float32])
	f.product.Padded = !dense
	f.tally = kernel.Tally{}
	f.kernel.Mul(&f.product, f.redo)
	f.terms.count(f.tally.Products, products)
	f.sumsOf.count(f.tally.Sums, sums)
	f.product = kernel.Product[float32]{}
	if scale != nil {
		f.late.finish(p, scale, bias, sums)
	}
	return true
}

// redoRows forms rows i0 <= i < i1 of columns j0 <= j < j1 in the engine or in exact
// reals.
func (f *fast[T]) redoRows(i0, i1, j0, j1 int) {
	m, p := f.owner, &f.owner.work
	m.block = block[T]{Multiplier: m, p: p, j0: j0, width: j1 - j0, products: f.products, sums: f.sums}
	b := &m.block
	b.slab = grown(b.slab, p.K*b.width)
	p.B.Pack(b.slab, b.width, 0, p.K, j0, j1)
	b.line = grown(b.line, p.K)
	for i := i0; i < i1; i++ {
		for k := range b.line {
			b.line[k] = p.A.At(i, k)
		}
		to := p.C[i*p.J+j0:][:b.width]
		if !b.engineRow(to, i) {
			b.referenceRow(to, i)
		}
	}
}

// fastSums forms sums without products with the kernels: the rows of the terms are
// the columns of a product with a single row of ones.
type fastSums struct {
	kernel  *kernel.Multiplier
	product kernel.Product[float32]
	terms   Matrix[float32] // transposed
	point   quick           // of the sums
	tally   kernel.Tally
	back    []int // columns handed back, from and to by turns
	redo    func(i0, i1, j0, j1 int)
}

// one is the row of ones.
var one = []float32{1}

// newFastSums returns the fast path of sums without products for tensors of float32,
// nil where there is none.
func newFastSums[T Element](acc Accumulate) *fastSums {
	var t T
	acc.Product = nil
	a, ok := kernelArithmetic(acc)
	if _, narrow := any(t).(float32); !narrow || !ok {
		return nil
	}
	if a.Pairwise {
		a.Product = kernel.NativeProduct // one times a term is the term
	}
	k := kernel.New(a)
	if k == nil {
		return nil
	}
	f := &fastSums{kernel: k, point: newQuick(&acc.Sum)}
	f.redo = func(_, _, j0, j1 int) { f.back = append(f.back, j0, j1) }
	return f
}

// sum forms the sums of rows i0, i0+1, ... and returns the runs of rows that are left
// to do.
func (f *fastSums) sum(dst []float32, terms Matrix[float32], rows, k int, d Streams, sums *Counts) []int {
	f.terms = Matrix[float32]{terms.Data, terms.Col, terms.Row}
	f.product = kernel.Product[float32]{
		I: 1, J: rows, K: k, A: one, B: &f.terms, C: dst,
		Sums: kernel.Streams{Row: d.Column, Column: d.Row}, OddColumns: true, Tally: &f.tally,
	}
	f.tally = kernel.Tally{}
	f.back = f.back[:0]
	f.kernel.Mul(&f.product, f.redo)
	f.point.count(f.tally.Sums, sums)
	f.product, f.terms = kernel.Product[float32]{}, Matrix[float32]{}
	return f.back
}
