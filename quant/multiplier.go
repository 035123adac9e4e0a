package quant

import "fmt"

// Multiplier forms products of matrices in one accumulation. It owns scratch
// memory and serves one goroutine at a time.
type Multiplier[T Element] struct {
	ref        reference[T]
	fast       *fast[T]      // nil where the kernels do not serve
	native     *native[T]    // nil where the machine's own arithmetic does not serve
	engine     *engine       // nil where a point has no quick rounding
	sumEngine  *engine       // engine for sums without products
	fastSums   *fastSums     // and their kernels, nil where they do not serve
	wide       *wideSums     // exact sums of the engine, nil for other orders than wide
	nativeRows bool          // sums without products are those of the machine in binary64
	slab       []T           // a block of columns
	line       []T           // a row of terms
	work       Product[T]    // the product being formed
	block      block[T]      // and its block of columns
	team       *Team         // who may help; nil: nobody
	parts      []*part[T]    // what they did last
	done       chan struct{} // a token for each part that is done
}

// Check reports what makes the accumulation unusable.
func (a Accumulate) Check() error {
	if err := a.Sum.checkInside("sum"); err != nil {
		return err
	}
	if a.Product != nil {
		if err := a.Product.checkInside("product"); err != nil {
			return err
		}
	}
	if a.Outer != nil {
		if err := a.Outer.checkInside("outer"); err != nil {
			return err
		}
	}
	if a.Through32 && a.Order.Kind == Wide {
		return fmt.Errorf("through binary32 with order wide: a wide sum has one rounding and no adder to pass through")
	}
	if a.Order.Kind == Aligned && a.Through32 {
		return fmt.Errorf("through binary32 with order %s: its additions are those of integers", a.Order)
	}
	return a.Order.check(a.Order.K != 0)
}

// checkInside checks a point inside sums, where 16 random bits are drawn.
func (p Point) checkInside(name string) error {
	if err := p.Check(); err != nil {
		return fmt.Errorf("%s: %w", name, err)
	}
	if p.Rounding.Bits > 16 {
		return fmt.Errorf("%s: %d random bits: inside sums at most 16", name, p.Rounding.Bits)
	}
	return nil
}

// check checks the parameter; given says whether there is one.
func (o Order) check(given bool) error {
	switch takes := o.Kind == Chunk || o.Kind == Lanes || o.Kind == Aligned; {
	case o.Kind > Aligned:
		return fmt.Errorf("unknown summation %s", o)
	case o.Kind == Aligned && (o.K < 1 || o.W < 2 || o.W > maxAligned):
		return fmt.Errorf("order %s: needs groups of at least 1 term and 2 to %d bits, as in aligned(4, 24)", o, maxAligned)
	case o.Kind != Aligned && o.W != 0:
		return fmt.Errorf("order %s takes no width", o)
	case takes && o.K < 1:
		return fmt.Errorf("order %s: needs a whole number of at least 1, as in %s(64)", o, word(orderWords, uint8(o.Kind), "order"))
	case !takes && given:
		return fmt.Errorf("order %s takes no number", o)
	}
	return nil
}

// NewMultiplier checks that T can hold the results of acc and chooses the kernel.
func NewMultiplier[T Element](acc Accumulate) (*Multiplier[T], error) {
	if err := acc.Check(); err != nil {
		return nil, fmt.Errorf("quant: %w", err)
	}
	var t T
	for _, p := range []*Point{&acc.Sum, acc.Outer} {
		if _, narrow := any(t).(float32); narrow && p != nil && !Fits32(p.Format) {
			return nil, fmt.Errorf("quant: sums of format %s do not fit tensors of float32: use float64", p.Format)
		}
	}
	m := &Multiplier[T]{ref: newReference[T](acc)}
	if acc.Order.Kind > Lanes {
		return m, nil // the reference alone knows the orders of hardware models
	}
	m.native, m.engine = newNative[T](acc), newEngine(acc, 2*24, -2*149) // products of binary32 numbers
	m.wide = newWideSums(acc)
	m.fast, m.fastSums = newFast(m, acc), newFastSums[T](acc)
	_, double := any(t).(float64)
	m.nativeRows = double && acc.Order.Kind == Sequential && !acc.Through32 && newQuick(&acc.Sum).kind == quickNative64
	acc.Product = nil
	m.sumEngine = newEngine(acc, 24, -149) // binary32 numbers
	return m, nil
}

// Mul forms the product. products and sums may be nil.
func (m *Multiplier[T]) Mul(p Product[T], products, sums *Counts) {
	p.check()
	p.from, p.to, p.firstI = 0, p.J, 0
	if n := m.team.partsOf(p.I, p.J, p.K); n > 1 {
		m.share(&p, n, products, sums)
		return
	}
	m.form(&p, products, sums)
}

// form forms a product, or a part of one.
func (m *Multiplier[T]) form(p *Product[T], products, sums *Counts) {
	m.work = *p
	if m.fast == nil || !m.fast.mul(products, sums) {
		m.mul(products, sums)
	}
	m.release()
}

// SumRows forms sums of terms without products: bias gradients, statistics.
// One sum for every row i of a rows x k strided matrix, in acc.Order; acc.Product
// is not used. The random words are those of column 0.
func (m *Multiplier[T]) SumRows(dst []T, terms Matrix[T], rows, k int, d Streams, sums *Counts) {
	m.sumRows(dst, terms, rows, k, d, sums)
}
