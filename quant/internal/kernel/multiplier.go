package kernel

// blockTerms is the number of terms that are packed at a time: few enough that a
// panel's block stays in the first-level cache. A multiple of four, the words of a
// draw.
const blockTerms = 256

// Multiplier forms products of binary32 matrices in one arithmetic. It owns scratch
// memory and serves one goroutine at a time.
type Multiplier struct {
	a      Arithmetic
	set    *Set
	main   *plans
	bias   *plan // adds the bias in Outer
	outer  func(total, chunk []float32, c *Constants)
	outerC Constants
	one    side[float32]
	two    side[float64]
	wide   bool // the last panel was formed in binary64 lanes

	// The product.
	p        *Product[float32]
	redo     func(i0, i1, j0, j1 int)
	spanA    Span
	rowWords []uint32 // by pairs of rows, K terms
	biasRow  []uint32 // the same for the addition of the bias
	biasA    []float32
	biasA64  []float64

	// The panel.
	raw         []float32 // packed columns of a block
	columnWords []uint32
	result      []float32 // finished or waiting binary32 sums
	chunk       []float32
	panel       panel
	bad         []bool // pairs of rows to be handed back
}

// New returns a multiplier with the fastest set of kernels, nil where the kernels
// have no place for the arithmetic.
func New(a Arithmetic) *Multiplier { return NewWith(Sets[0], a) }

// NewWith is New with a given set.
func NewWith(set *Set, a Arithmetic) *Multiplier {
	if !a.Sum.supported() || !a.Outer.supported() || a.Product == RoundedProduct && !a.Grid.supported() {
		return nil
	}
	m := &Multiplier{a: a, set: set, one: newSide(&set.single), two: newSide(&set.double)}
	m.main = newPlans(&m.a, a.Sum)
	if a.Chunk > 0 && !m.setOuter() {
		return nil
	}
	m.bias = biasPlan(a)
	if m.bias == nil || m.bias.double && !m.alwaysWide() {
		return nil
	}
	return m
}

// alwaysWide tells whether every panel is formed in binary64 lanes.
func (m *Multiplier) alwaysWide() bool { return m.a.Sum.Kind == StochasticSum && !m.a.Sum.Through }

// biasPlan adds a bias, an exact product with one, to sums that may be of another
// grid: by plans whose conditions any operands fulfil.
func biasPlan(a Arithmetic) *plan {
	exact := &Arithmetic{Product: ExactProduct, Sum: a.Outer, Outer: a.Outer}
	p := newPlans(exact, a.Outer)
	switch {
	case a.Outer.Kind == NativeSum:
		return p.native
	case a.Outer.Kind == NearestSum && a.Outer.Through:
		return p.care
	case a.Outer.Kind == NearestSum:
		return p.odd
	case a.Outer.Through:
		return p.randomCare
	}
	return p.wide
}

// setOuter chooses the addition of finished chunks; false where there is none. Two
// values of a grid of at most 11 bits are added in binary32 as if at once, see
// chooseNearest, so the chunks must be of the outer grid.
func (m *Multiplier) setOuter() bool {
	o, s := m.a.Outer, m.a.Sum
	switch o.Kind {
	case NativeSum:
		m.outer = addNative
		return true
	case NearestSum:
		g := o.Grid
		if s.Kind == NativeSum || s.Grid.Fraction > g.Fraction || s.Grid.quantum() < g.quantum() {
			return false
		}
		m.outerC = single.masks()
		m.outerC.nearest(single, g, single.nearestScale(g))
		m.outer = addNearest
		return true
	}
	return false
}

// addNative is total = binary32(total + chunk).
func addNative(total, chunk []float32, _ *Constants) {
	chunk = chunk[:len(total)]
	for i, v := range chunk {
		total[i] += v
	}
}

// addNearest is total = R(total + chunk), R nearest-even.
func addNearest(total, chunk []float32, c *Constants) {
	least, grow, scale, unscale := c.SumLeast.single(), c.SumGrow.single(), c.Scale.single(), c.Unscale.single()
	chunk = chunk[:len(total)]
	for i, v := range chunk {
		x := float32(total[i]*scale) + float32(v*scale)
		total[i] = float32(near32(x, least, grow) * unscale)
	}
}

// Mul forms the product. Rows i0 <= i < i1 of columns j0 <= j < j1 that the kernels
// cannot form, or in which a product or a sum may have left the finite numbers, are
// handed to redo instead; what C holds there is of no meaning.
func (m *Multiplier) Mul(p *Product[float32], redo func(i0, i1, j0, j1 int)) {
	if p.I == 0 || p.J == 0 {
		return
	}
	if p.K == 0 {
		redo(0, p.I, 0, p.J)
		return
	}
	m.begin(p, redo)
	for j := 0; j < p.J; {
		j += m.formPanel(j)
	}
	m.release()
}

// release lets go of the caller's tensors.
func (m *Multiplier) release() {
	m.p, m.redo = nil, nil
	m.panel = panel{}
	m.one.work, m.two.work = work[float32]{}, work[float64]{}
}

// begin prepares what all panels share.
func (m *Multiplier) begin(p *Product[float32], redo func(i0, i1, j0, j1 int)) {
	m.p, m.redo = p, redo
	m.spanA = measureRows(p)
	m.one.begin()
	m.two.begin()
	pairs := pairsOf(p.I)
	m.bad = grown(m.bad, pairs)
	m.rowWords, m.biasRow = m.rowWords[:0], m.biasRow[:0]
	if m.a.Sum.Kind == StochasticSum {
		m.rowWords = grown(m.rowWords, 2*pairs*p.K)
		fillRows(m.rowWords, p.Sums.Row, p.I, 0, p.K)
	}
	if p.Bias != nil {
		m.packBias(pairs)
	}
}

// packBias packs the biases as a term of their own.
func (m *Multiplier) packBias(pairs int) {
	p := m.p
	if m.a.Outer.Kind == StochasticSum {
		m.biasRow = grown(m.biasRow, 2*pairs)
		fillRows(m.biasRow, p.Sums.Row, p.I, p.K, 1)
	}
	if m.bias.double {
		m.biasA64 = grown(m.biasA64, 2*pairs)
		packRows(m.biasA64, p.Bias, 1, 1, p.I, 1, m.bias.scale)
		return
	}
	m.biasA = grown(m.biasA, 2*pairs)
	packRows(m.biasA, p.Bias, 1, 1, p.I, 1, m.bias.scale)
}
