package kernel

// deal returns the product with the terms of each lane beside one another: those of
// lane 0, then those of lane 1, and so on.
func (m *Multiplier) deal(p *Product[float32]) *Product[float32] {
	m.dealtA = grown(m.dealtA, p.I*p.K)
	m.dealtB.order = grown(m.dealtB.order, p.K)
	m.dealtB.all = p.B
	order := m.dealtB.order[:0]
	for lane := range m.a.Lanes {
		for k := lane; k < p.K; k += m.a.Lanes {
			order = append(order, k)
		}
	}
	for i := range p.I {
		to, from := m.dealtA[i*p.K:][:p.K], p.A[i*p.ARow:]
		for t, k := range order {
			to[t] = from[k*p.ACol]
		}
	}
	m.dealt = *p
	m.dealt.A, m.dealt.ARow, m.dealt.ACol, m.dealt.B = m.dealtA, p.K, 1, &m.dealtB
	return &m.dealt
}

// dealtColumns are the columns of another operand with their terms in another order.
type dealtColumns struct {
	all   Columns[float32]
	order []int
}

// Pack implements Columns.
func (c *dealtColumns) Pack(dst []float32, width, k0, k1, j0, j1 int) {
	for t, k := range c.order[k0:k1] {
		c.all.Pack(dst[t*width:][:width], width, k, k+1, j0, j1)
	}
}

// lanes forms the sums of the lanes and adds them pairwise.
func (n *panel) lanes() outcome {
	t, from := n.tree, 0
	t.stack.depth = 0
	for lane := range n.a.Lanes {
		n.into = t.stack.push(1, len(n.result))
		terms := (n.p.K - lane + n.a.Lanes - 1) / n.a.Lanes
		if terms <= 0 || n.row != n.width {
			clear(n.into)
		}
		if terms > 0 {
			if o := n.sum(from, from+terms); o != formed {
				return o
			}
			from += terms
		}
		t.stack.joinEquals(t)
	}
	t.stack.joinAll(t)
	copy(n.result, t.stack.trees[0].sums)
	return formed
}
