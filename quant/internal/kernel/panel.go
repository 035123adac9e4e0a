package kernel

// panel is a set of neighbouring columns on its way through the blocks of terms.
type panel struct {
	*Multiplier
	j0, columns int
	wide        bool // binary64 lanes
	width       int  // columns of the kernels
	row         int  // length of a row of binary32 sums: the binary32 kernels' width
	grain       int  // see block
	only        *Span
	into        []float32 // where binary32 sums of terms go
}

// formPanel forms the panel that starts at column j0 and returns its columns.
//
// The first block chooses the lanes. Where a later block asks for the others, the
// panel starts again with lanes that serve the span of all its blocks.
func (m *Multiplier) formPanel(j0 int) int {
	for range 2 {
		n := m.startPanel(j0, m.wide)
		switch n.form() {
		case formed:
			m.formAgain(n)
			return n.columns
		case impossible:
			m.redo(0, m.p.I, j0, j0+n.columns)
			return n.columns
		}
		m.wide = !m.wide // the other lanes, from the first block on
	}
	return m.formMeasured(j0)
}

// formMeasured forms a panel whose blocks do not agree on their lanes.
func (m *Multiplier) formMeasured(j0 int) int {
	for _, wide := range []bool{false, true} {
		n := m.startPanel(j0, wide)
		span := n.measureAll()
		n.only = &span
		if n.form() == formed {
			m.formAgain(n)
			return n.columns
		}
	}
	n := m.startPanel(j0, m.wide)
	m.redo(0, m.p.I, j0, j0+n.columns)
	return n.columns
}

// startPanel sizes the panel that starts at column j0 for lanes of one kind.
func (m *Multiplier) startPanel(j0 int, wide bool) *panel {
	left := m.p.end() - j0
	one, two := &m.set.single, &m.set.double
	n := &m.panel
	*n = panel{Multiplier: m, j0: j0, wide: wide, width: one.panel(left)}
	n.row = n.width
	if wide {
		n.width, n.row = two.panel(left), one.narrow
		if n.width > one.narrow {
			n.row = one.width
		}
	}
	n.columns = min(n.width, left)
	clear(m.bad)
	return n
}

// outcome of forming a panel.
type outcome int

const (
	formed     outcome = iota
	otherLanes         // a block asks for the other lanes
	impossible         // a block has no kernel
)

// form runs all terms, the chunks and the bias.
func (n *panel) form() outcome {
	p := n.p
	pairs := pairsOf(p.I)
	n.result = grown(n.result, 2*pairs*n.row)
	if n.row != n.width {
		clear(n.result) // columns between the two widths take part in the bias's flags
	}
	o := formed
	switch n.into = n.result; {
	case n.a.Pairwise:
		o = n.pairwise()
	case n.a.Lanes > 0:
		o = n.lanes()
	case n.a.Chunk > 0:
		o = n.chunks()
	default:
		o = n.sum(0, p.K)
	}
	if o == formed && (p.Bias != nil || n.composed()) {
		n.finish()
	}
	return o
}

// composed tells that a finished sum is put together from others, and waits in result.
func (n *panel) composed() bool { return n.a.Chunk > 0 || n.tree != nil }

// chunks adds every few terms from +0, and the finished chunks.
func (n *panel) chunks() outcome {
	n.chunk = grown(n.chunk, len(n.result))
	clear(n.chunk)
	clear(n.result)
	n.into = n.chunk
	for from := 0; from < n.p.K; from += n.a.Chunk {
		if o := n.sum(from, min(from+n.a.Chunk, n.p.K)); o != formed {
			return o
		}
		n.outer(n.result, n.chunk, &n.outerC)
	}
	return formed
}

// finish adds the biases and copies the waiting sums to C.
func (n *panel) finish() {
	if n.p.Bias != nil {
		n.addBias()
	}
	n.copyOut(0, n.p.I)
}

// sum adds terms from <= k < to from +0.
func (n *panel) sum(from, to int) outcome {
	n.grain = 1 << 20
	for k := from; k < to; k += blockTerms {
		terms := min(blockTerms, to-k)
		plan := n.packBlock(k, terms)
		switch {
		case plan == nil:
			return impossible
		case plan.double != n.wide:
			return otherLanes
		}
		first, last := k == from, k+terms == to
		if n.wide {
			n.runWide(plan, k, terms, first, last)
		} else {
			n.runSingle(plan, k, terms, first, last)
		}
	}
	return formed
}

// packBlock packs a block of columns and chooses its plan.
func (n *panel) packBlock(k, terms int) *plan {
	n.raw = grown(n.raw, terms*n.width)
	n.p.B.Pack(n.raw, n.width, k, k+terms, n.j0, n.j0+n.columns)
	b := block{a: n.spanA, grain: n.grain, wide: n.p.Bias != nil && n.bias.double}
	if n.only != nil {
		b.b = *n.only
	} else {
		b.b = n.loops.spanOf(n.raw)
	}
	n.grain = b.sumLow()
	plan := n.main.choose(&b)
	if n.a.Sum.Kind == StochasticSum && plan != nil {
		n.columnWords = grown(n.columnWords, (terms+3)/4*4*n.width+philoxSlack)
		n.loops.columnWords(n.columnWords, n.p.Sums.Column, n.width, k, terms, n.p.FirstJ+uint32(n.j0))
		n.setOdd()
	}
	if n.a.Product == RandomProduct {
		n.termColumns = grown(n.termColumns, (terms+3)/4*4*n.width+philoxSlack)
		n.loops.columnWords(n.termColumns, n.p.Terms.Column, n.width, k, terms, n.p.FirstJ+uint32(n.j0))
	}
	return plan
}

// setOdd sets the low bit of the columns' words where the product asks for it.
func (n *panel) setOdd() {
	if n.p.OddColumns {
		for i := range n.columnWords {
			n.columnWords[i] |= 1
		}
	}
}

// measureAll returns the span of all blocks.
func (n *panel) measureAll() Span {
	all := empty
	for k := 0; k < n.p.K; k += blockTerms {
		terms := min(blockTerms, n.p.K-k)
		n.raw = grown(n.raw, terms*n.width)
		n.p.B.Pack(n.raw, n.width, k, k+terms, n.j0, n.j0+n.columns)
		s := n.loops.spanOf(n.raw)
		all = Span{max(all.Bits, s.Bits), max(all.Top, s.Top), min(all.Low, s.Low)}
	}
	return all
}

// direct is the number of rows that the last block may write to C itself: pairs of
// rows that exist, of full panels that nothing is added to.
func (n *panel) direct(last bool) int {
	if !last || n.columns < n.width || n.p.Bias != nil || n.composed() {
		return 0
	}
	return n.p.I &^ 1
}

// runSingle forms a block in binary32 lanes.
func (n *panel) runSingle(plan *plan, k, terms int, first, last bool) {
	p, s := n.p, &n.one
	w := &s.work
	*w = work[float32]{
		mode: plan.mode, c: &plan.c, width: n.width, terms: terms,
		a: pack(s, &n.loops, p, plan.scale)[2*k:], aStride: 2 * p.K, b: n.raw,
		in: n.into, inRow: n.row, out: n.into, outRow: n.row,
	}
	n.words(&w.r, &w.v, k)
	if first {
		w.in, w.inRow = s.zeros, 0
	}
	direct := n.direct(last)
	if direct > 0 {
		out := w.out
		w.last, w.out, w.outRow = direct/2, p.C[n.j0:], p.J
		s.sweep(n.bad)
		w.out, w.outRow = out, n.row
	}
	w.first, w.last = direct/2, pairsOf(p.I)
	s.sweep(n.bad)
	if last && p.Bias == nil && !n.composed() {
		n.copyOut(direct, p.I)
	}
}

// runWide forms a block in binary64 lanes; the last one leaves binary32 sums.
func (n *panel) runWide(plan *plan, k, terms int, first, last bool) {
	p, s := n.p, &n.two
	s.panel = grown(s.panel, terms*n.width)
	n.loops.widened(s.panel, n.raw)
	s.sums = grown(s.sums, 2*pairsOf(p.I)*n.width)
	w := &s.work
	*w = work[float64]{
		mode: plan.mode, c: &plan.c, width: n.width, terms: terms,
		a: pack(s, &n.loops, p, plan.scale)[2*k:], aStride: 2 * p.K, b: s.panel,
		in: s.sums, inRow: n.width, out: s.sums, outRow: n.width,
	}
	n.words(&w.r, &w.v, k)
	if len(n.termRows) > 0 {
		w.termR, w.termV = n.termRows[2*k:], n.termColumns
	}
	if first {
		w.in, w.inRow = s.zeros, 0
	}
	direct := n.direct(last)
	if direct > 0 {
		w.last, w.final, w.finalRow = direct/2, p.C[n.j0:], p.J
		s.sweep(n.bad)
		w.final, w.finalRow = nil, 0
	}
	w.first, w.last = direct/2, pairsOf(p.I)
	if last && !(p.Bias != nil && n.bias.double && !n.composed()) {
		w.final, w.finalRow = n.into, n.row
	}
	s.sweep(n.bad)
	if last && p.Bias == nil && !n.composed() {
		n.copyOut(direct, p.I)
	}
}

// words sets the random words of a block that starts at term k.
func (n *panel) words(r, v *[]uint32, k int) {
	if len(n.rowWords) > 0 {
		*r, *v = n.rowWords[2*k:], n.columnWords
	}
}

// addBias adds the biases to the waiting sums.
func (n *panel) addBias() {
	p := n.p
	pairs := pairsOf(p.I)
	var r, v []uint32
	if len(n.biasRow) > 0 {
		width := max(n.row, n.width)
		n.columnWords = grown(n.columnWords, width)
		fillColumns(n.columnWords, p.Sums.Column, width, p.K, 1, p.FirstJ+uint32(n.j0))
		n.setOdd()
		r, v = n.biasRow, n.columnWords
	}
	if n.bias.double {
		s := &n.two
		s.work = work[float64]{
			mode: n.bias.mode, c: &n.bias.c, width: n.width, last: pairs, terms: 1,
			a: n.biasA64, aStride: 2, b: s.ones, r: r, v: v,
			in: s.sums, inRow: n.width, out: s.sums, outRow: n.width, final: n.result, finalRow: n.row,
		}
		s.sweep(n.bad)
		return
	}
	s := &n.one
	s.work = work[float32]{
		mode: n.bias.mode, c: &n.bias.c, width: n.row, last: pairs, terms: 1,
		a: n.biasA, aStride: 2, b: s.ones, r: r, v: v,
		in: n.result, inRow: n.row, out: n.result, outRow: n.row,
	}
	s.sweep(n.bad)
}

// copyOut copies finished rows to C, and hands back what is not finite: sums of
// chunks and of subtrees have no flags of their own.
func (n *panel) copyOut(first, last int) {
	for i := first; i < last; i++ {
		row := n.result[i*n.row:][:n.columns]
		if n.composed() {
			for _, v := range row {
				if v-v != 0 {
					n.bad[i/2] = true
				}
			}
		}
		copy(n.p.C[i*n.p.J+n.j0:], row)
	}
}

// formAgain forms rows with a flag with care, or hands them back.
func (m *Multiplier) formAgain(n *panel) {
	j0, columns := n.j0, n.columns
	runs(m.bad, func(first, last int) { m.again(2*first, min(2*last, m.p.I), j0, columns) })
}

// handBack hands back runs of pairs of rows that are marked bad.
func handBack(bad []bool, rows, j0, columns int, redo func(i0, i1, j0, j1 int)) {
	runs(bad, func(first, last int) { redo(2*first, min(2*last, rows), j0, j0+columns) })
}

// runs calls f for every run of marks.
func runs(bad []bool, f func(first, last int)) {
	for q := 0; q < len(bad); q++ {
		first := q
		for q < len(bad) && bad[q] {
			q++
		}
		if q > first {
			f(first, q)
		}
	}
}
