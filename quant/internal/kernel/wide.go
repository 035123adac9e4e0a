package kernel

// Wide forms products of binary64 matrices in binary64's own arithmetic: products
// rounded and then added, or one rounding a step. It owns scratch memory and serves
// one goroutine at a time.
type Wide struct {
	side  side[float64]
	loops loops
	mode  mode
	c     Constants
	raw   []float64
	bias  []float64
	bad   []bool
}

// NewWide returns a multiplier with the fastest set; fused sums have exact products.
func NewWide(fused bool) *Wide { return NewWideWith(Sets[0], fused) }

// NewWideWith is NewWide with a given set.
func NewWideWith(set *Set, fused bool) *Wide {
	m := &Wide{side: newSide(&set.double), loops: set.loops, mode: baseline64, c: double.masks()}
	if fused {
		m.mode = fmaChain64
	}
	return m
}

// Mul forms the product; see Multiplier.Mul.
func (m *Wide) Mul(p *Product[float64], redo func(i0, i1, j0, j1 int)) {
	if p.I == 0 || p.J == 0 {
		return
	}
	if p.K == 0 {
		redo(0, p.I, p.From, p.end())
		return
	}
	m.side.begin()
	pairs := pairsOf(p.I)
	m.bad = grown(m.bad, pairs)
	if p.Bias != nil {
		m.bias = grown(m.bias, 2*pairs)
		packRows(&m.loops, m.bias, p.Bias, 1, 1, p.I, 1, 0)
	}
	for j := p.From; j < p.end(); {
		width := m.side.family.panel(p.end() - j)
		columns := min(width, p.end()-j)
		clear(m.bad)
		m.panel(p, j, columns, width)
		handBack(m.bad, p.I, j, columns, redo)
		j += columns
	}
	m.side.work = work[float64]{}
}

// panel forms the columns from j0 on.
func (m *Wide) panel(p *Product[float64], j0, columns, width int) {
	s := &m.side
	pairs := pairsOf(p.I)
	s.sums = grown(s.sums, 2*pairs*width)
	a := pack(s, &m.loops, p, 0)
	for k := 0; k < p.K; k += blockTerms {
		terms := min(blockTerms, p.K-k)
		m.raw = grown(m.raw, terms*width)
		p.B.Pack(m.raw, width, k, k+terms, j0, j0+columns)
		s.work = work[float64]{
			mode: m.mode, c: &m.c, width: width, last: pairs, terms: terms,
			a: a[2*k:], aStride: 2 * p.K, b: m.raw,
			in: s.sums, inRow: width, out: s.sums, outRow: width,
		}
		if k == 0 {
			s.work.in, s.work.inRow = s.zeros, 0
		}
		s.sweep(m.bad)
	}
	if p.Bias != nil {
		s.work = work[float64]{
			mode: fmaChain64, c: &m.c, width: width, last: pairs, terms: 1,
			a: m.bias, aStride: 2, b: s.ones, in: s.sums, inRow: width, out: s.sums, outRow: width,
		}
		s.sweep(m.bad)
	}
	for i := range p.I {
		copy(p.C[i*p.J+j0:][:columns], s.sums[i*width:])
	}
}
