package kernel

import "math"

// Policy says what becomes of numbers beyond the largest finite value of a format: of
// finite ones, and of infinite ones, as magnitudes.
type Policy struct{ Over, Infinite float64 }

// Tally counts the events of products and of sums that the kernels met.
type Tally struct{ Products, Sums Events }

// careful says how tiles are formed again in which something left the range.
type careful struct {
	c       Constants // first, see plan
	mode    mode
	columns []float32 // a result, rows x narrow
	tally   Tally     // of the rows at hand
	events  [6]uint64
}

// setCareful prepares the second forming, with numbers as they are: nearest-even sums
// in one grid, whose exponents leave binary32 room for what lies beyond them.
func (m *Multiplier) setCareful() {
	a := &m.a
	if a.Sum.Kind != NearestSum || a.Outer != a.Sum || a.Chunk > 0 || a.Pairwise || a.Lanes > 0 || a.Sum.Grid.top() > 100 || a.Product == RandomProduct {
		return
	}
	k := &careful{mode: carefulProduct, c: single.masks()}
	c := &k.c
	c.nearest(single, a.Sum.Grid, 0)
	c.Infinity = single.bits(math.Inf(1))
	c.Max, c.Over, c.Infinite = single.bits(math.MaxFloat32), c.Infinity, single.bits(a.ProductPolicy.Infinite)
	c.SumMax, c.SumOver, c.SumInfinite = single.bits(a.Sum.Grid.Max), single.bits(a.SumPolicy.Over), single.bits(a.SumPolicy.Infinite)
	if !a.Sum.Through {
		c.OddMask = bits32(1<<32 - 1)
	}
	switch {
	case a.Product == ExactProduct:
		c.Infinite = c.Infinity // exact products have no policy
		if a.Sum.Through {
			k.mode = carefulFused
		}
	case a.Product == RoundedProduct:
		k.mode = carefulRounded
		c.product(single, a.Grid, 0, 0)
		c.Max, c.Over = single.bits(a.Grid.Max), single.bits(a.ProductPolicy.Over)
	}
	m.careful = k
}

// serves tells whether the careful kernels form a block: binary32 must hold products
// as it does in the kernels that they stand in for, and no finite product, nor its
// sum, may leave it.
func (k *careful) serves(a *Arithmetic, b *block) bool {
	switch {
	case b.top() > 125:
		return false
	case a.Product == RoundedProduct:
		return b.roundsOnce(a.Grid)
	case a.Product == ExactProduct && !a.Sum.Through:
		return b.exact()
	}
	return true
}

// again forms rows i0 <= i < i1 of a panel with care where it can, and hands back the
// rest. Padding would have to be known where an operand of A is not finite, and the
// missing last row of an odd number would be counted.
func (m *Multiplier) again(i0, i1, j0, columns int) {
	if m.careful == nil || !m.finiteA {
		m.redo(i0, i1, j0, j0+columns)
		return
	}
	if even := i1 &^ 1; even < i1 {
		m.redo(even, i1, j0, j0+columns)
		i1 = even
	}
	if i1 == i0 {
		return
	}
	narrow := m.set.single.narrow
	for j := j0; j < j0+columns; j += narrow {
		n := min(narrow, j0+columns-j)
		if !m.careful.form(m, i0, i1, j, n) {
			m.redo(i0, i1, j, j+n)
			continue
		}
		if m.p.Tally != nil {
			m.p.Tally.add(m.careful.tally)
		}
	}
}

func (t *Tally) add(o Tally) {
	for _, e := range []struct{ to, from *Events }{{&t.Products, &o.Products}, {&t.Sums, &o.Sums}} {
		e.to.Beyond += e.from.Beyond
		e.to.Infinite += e.from.Infinite
		e.to.NaN += e.from.NaN
	}
}

// form forms rows i0 <= i < i1, both even, of a narrow panel; false where a block has
// no careful kernel.
func (k *careful) form(m *Multiplier, i0, i1, j0, columns int) bool {
	p, s, narrow := m.p, &m.one, m.set.single.narrow
	k.events = [6]uint64{}
	k.columns = grown(k.columns, 2*pairsOf(p.I)*narrow)
	a := pack(s, &m.loops, p, 0)
	for from := 0; from < p.K; from += blockTerms {
		terms := min(blockTerms, p.K-from)
		m.raw = grown(m.raw, terms*narrow)
		p.B.Pack(m.raw, narrow, from, from+terms, j0, j0+columns)
		b := block{a: m.spanA, b: m.loops.spanOf(m.raw), grain: 1 << 20}
		if !k.serves(&m.a, &b) {
			return false
		}
		s.work = work[float32]{
			mode: k.mode, c: &k.c, width: narrow, first: i0 / 2, last: i1 / 2, terms: terms,
			a: a[2*from:], aStride: 2 * p.K, b: m.raw,
			in: k.columns, inRow: narrow, out: k.columns, outRow: narrow, events: k.events[:],
		}
		if from == 0 {
			s.work.in, s.work.inRow = s.zeros, 0
		}
		s.sweep(m.ignored())
	}
	k.tally = Tally{Sums: Events{k.events[3], k.events[4], k.events[5]}}
	if m.a.Product != ExactProduct { // which are not rounded and have no events
		k.tally.Products = Events{k.events[0], k.events[1], k.events[2]}
	}
	if p.Bias != nil && !k.addBias(m, i0, i1) {
		return false
	}
	if p.Padded && k.tally.Sums.NaN > 0 {
		return false // some of them may be additions of padding, which are none
	}
	for i := i0; i < i1; i++ {
		row := p.C[i*p.J+j0:][:columns]
		for j, v := range k.columns[i*narrow:][:columns] {
			if v != v {
				v = float32(math.NaN()) // without sign and payload
			}
			row[j] = v
		}
	}
	return true
}

// addBias adds the biases as products with one, which is none to count; false where
// one is not finite or too large.
func (k *careful) addBias(m *Multiplier, i0, i1 int) bool {
	p, s, narrow := m.p, &m.one, m.set.single.narrow
	e := m.loops.extentOf(p.Bias[:p.I])
	if e.greatest >= 126<<23 {
		return false
	}
	pairs := pairsOf(p.I)
	m.biasA = grown(m.biasA, 2*pairs)
	packRows(&m.loops, m.biasA, p.Bias, 1, 1, p.I, 1, 0)
	mode := carefulProduct
	if k.mode == carefulFused {
		mode = carefulFused
	}
	k.events = [6]uint64{}
	s.work = work[float32]{
		mode: mode, c: &k.c, width: narrow, first: i0 / 2, last: i1 / 2, terms: 1,
		a: m.biasA, aStride: 2, b: s.ones, in: k.columns, inRow: narrow, out: k.columns, outRow: narrow, events: k.events[:],
	}
	s.sweep(m.ignored())
	k.tally.Sums.Beyond += k.events[3]
	k.tally.Sums.Infinite += k.events[4]
	k.tally.Sums.NaN += k.events[5]
	if m.bias != nil && !m.bias.double {
		packRows(&m.loops, m.biasA, p.Bias, 1, 1, p.I, 1, m.bias.scale) // for the panels to come
	}
	return true
}
