package kernel

// blockTerms is the number of terms that are packed at a time: few enough that a
// panel's block stays in the first-level cache. A multiple of four, the words of a
// draw.
const blockTerms = 512

// Multiplier forms products of binary32 matrices in one arithmetic. It owns scratch
// memory and serves one goroutine at a time.
type Multiplier struct {
	a       Arithmetic
	set     *Set
	main    *plans
	bias    *plan // adds the bias in Outer, nil where no plan serves
	biases  *plans
	careful *careful // nil where there is no second forming
	outer   func(total, chunk []float32, c *Constants)
	loops   loops // the set's, and their scratch
	outerC  Constants
	tree    *tree // of sums that are no sequence, else nil
	one     side[float32]
	two     side[float64]
	wide    bool // the last panel was formed in binary64 lanes

	// The product.
	p        *Product[float32]
	redo     func(i0, i1, j0, j1 int)
	spanA    Span
	finiteA  bool
	rowWords []uint32 // by pairs of rows, K terms
	termRows []uint32 // the same for the rounding of products
	biasRow  []uint32 // the same for the addition of the bias
	biasA    []float32
	biasA64  []float64

	// The panel.
	raw         []float32 // packed columns of a block
	columnWords []uint32
	termColumns []uint32
	result      []float32 // finished or waiting binary32 sums
	chunk       []float32
	dealt       Product[float32] // the product with its terms by lanes
	dealtA      []float32
	dealtB      dealtColumns
	panel       panel
	spare       []bool // flags that nobody reads
	bad         []bool // pairs of rows to be handed back
}

// New returns a multiplier with the fastest set of kernels, nil where the kernels
// have no place for the arithmetic.
func New(a Arithmetic) *Multiplier { return NewWith(Sets[0], a) }

// NewWith is New with a given set.
func NewWith(set *Set, a Arithmetic) *Multiplier {
	if !a.Sum.supported() || !a.Outer.supported() || a.Product >= RoundedProduct && !a.Grid.supported() {
		return nil
	}
	if a.Product == RandomProduct && (a.Sum.Kind != StochasticSum || a.Sum.Through || a.Bits < 1 || a.Bits > 16) {
		return nil
	}
	m := &Multiplier{a: a, set: set, loops: set.loops, one: newSide(&set.single), two: newSide(&set.double)}
	m.main = newPlans(m.set, &m.a, a.Sum)
	m.setCareful()
	if a.Chunk > 0 && !m.setOuter() || (a.Pairwise || a.Lanes > 0) && !m.setTree() {
		return nil
	}
	m.biases = newPlans(m.set, &Arithmetic{Product: ExactProduct, Sum: a.Outer, Outer: a.Outer}, a.Outer)
	if a.Outer.Kind == StochasticSum && (a.Chunk > 0 || a.Outer.Through != a.Sum.Through || a.Sum.Kind != StochasticSum) {
		return nil
	}
	return m
}

// biasPlan adds a bias, an exact product with one, to sums that may be of another
// grid: by plans whose conditions any operands fulfil, but for stochastic rounding
// through binary32 to a grid with the exponents of binary32, where the bias must be
// a multiple of the grid's least value as the sum is.
func (p *plans) biasPlan(bias Span) *plan {
	s := p.sum
	switch {
	case s.Kind == NativeSum:
		return p.native
	case s.Kind == NearestSum && s.Through:
		return p.care
	case s.Kind == NearestSum:
		return p.odd
	case !s.Through && p.truncated != nil && bias.Low >= s.Grid.quantum():
		return p.truncated
	case !s.Through:
		return p.wide
	case (&block{a: bias, grain: s.Grid.quantum()}).fixes(s.Grid):
		return p.randomCare
	case bias.Low >= s.Grid.quantum():
		return p.random // nil where there is none
	}
	return nil
}

// setOuter chooses the addition of finished chunks; false where there is none. Two
// values of a grid of at most 11 bits are added in binary32 as if at once, see
// chooseNearest, so the chunks must be of the outer grid.
func (m *Multiplier) setOuter() bool {
	o, s := m.a.Outer, m.a.Sum
	switch o.Kind {
	case NativeSum:
		m.outer = m.loops.added
		return true
	case NearestSum:
		g := o.Grid
		if s.Kind == NativeSum || s.Grid.Fraction > g.Fraction || s.Grid.quantum() < g.quantum() {
			return false
		}
		m.outerC = single.masks()
		m.outerC.nearest(single, g, single.nearestScale(g))
		m.outer = m.loops.addedNearest
		return true
	}
	return false
}

// Mul forms the product. Rows i0 <= i < i1 of columns j0 <= j < j1 that the kernels
// cannot form, or in which a product or a sum may have left the finite numbers, are
// handed to redo instead; what C holds there is of no meaning.
func (m *Multiplier) Mul(p *Product[float32], redo func(i0, i1, j0, j1 int)) {
	if p.I == 0 || p.J == 0 {
		return
	}
	if p.K == 0 {
		redo(0, p.I, p.From, p.end())
		return
	}
	if m.a.Lanes > 0 {
		p = m.deal(p)
	}
	m.begin(p, redo)
	if p.Bias != nil && m.bias == nil {
		redo(0, p.I, p.From, p.end())
		return
	}
	for j := p.From; j < p.end(); {
		j += m.formPanel(j)
	}
	m.release()
}

// release lets go of the caller's tensors.
func (m *Multiplier) release() {
	m.p, m.redo = nil, nil
	m.dealt, m.dealtB.all = Product[float32]{}, nil
	m.panel = panel{}
	m.one.work, m.two.work = work[float32]{}, work[float64]{}
}

// begin prepares what all panels share.
func (m *Multiplier) begin(p *Product[float32], redo func(i0, i1, j0, j1 int)) {
	m.p, m.redo = p, redo
	m.spanA, m.finiteA = m.measureRows()
	m.one.begin()
	m.two.begin()
	pairs := pairsOf(p.I)
	m.bad = grown(m.bad, pairs)
	m.rowWords, m.biasRow = m.rowWords[:0], m.biasRow[:0]
	if m.a.Sum.Kind == StochasticSum {
		m.rowWords = grown(m.rowWords, 2*pairs*p.K)
		m.loops.rowWords(m.rowWords, p.Sums.Row, p.FirstI, p.I, p.K, m.oddRows())
	}
	m.termRows = m.termRows[:0]
	if m.a.Product == RandomProduct {
		m.termRows = grown(m.termRows, 2*pairs*p.K)
		m.loops.rowWords(m.termRows, p.Terms.Row, p.FirstI, p.I, p.K, 1)
	}
	if p.Bias != nil {
		if m.bias = m.biases.biasPlan(m.loops.spanOf(p.Bias[:p.I])); m.bias != nil {
			m.packBias(pairs)
		}
	}
}

// ignored is where flags go that nobody reads.
func (m *Multiplier) ignored() []bool {
	m.spare = grown(m.spare, len(m.bad))
	return m.spare
}

// oddRows is what the words of rows are or-ed with.
func (m *Multiplier) oddRows() uint32 {
	if m.p.OddColumns {
		return 0
	}
	return 1
}

// packBias packs the biases as a term of their own.
func (m *Multiplier) packBias(pairs int) {
	p := m.p
	if m.a.Outer.Kind == StochasticSum {
		m.biasRow = grown(m.biasRow, 2*pairs)
		fillRows(m.biasRow, p.Sums.Row, p.FirstI, p.I, p.K, 1, m.oddRows())
	}
	if m.bias.double {
		m.biasA64 = grown(m.biasA64, 2*pairs)
		packRows(&m.loops, m.biasA64, p.Bias, 1, 1, p.I, 1, m.bias.scale)
		return
	}
	m.biasA = grown(m.biasA, 2*pairs)
	packRows(&m.loops, m.biasA, p.Bias, 1, 1, p.I, 1, m.bias.scale)
}
