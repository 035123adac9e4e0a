package kernel

// Sums as trees: neighbours are added, an odd last one is carried up, until one is
// left. Finished subtrees wait on a stack of falling sizes; two of a size are added as
// soon as the second is there, and what is left at the end from the small ones up.
// That is the same tree. The leaves are products, or the sequential sums of lanes.

// tree says how an arithmetic adds subtrees.
type tree struct {
	leaves *plans // products of pairwise sums, as if summed in binary32
	exact  bool   // they are exact, so that binary32 must hold them
	eight  bool   // eight at a time have kernels
	add    func(total, chunk []float32, c *Constants)
	c      Constants
	stack  stack // of the panel
	inner  stack // of some rows and a block of terms
}

// setTree prepares pairwise sums or sums of lanes; false where there are none.
//
// Two values of a grid of at most 11 bits are added in binary32 as if at once, see
// plans.chooseNearest; so are, by design, any two through binary32. Others are added
// to odd first, which needs two bits more than the grid has.
func (m *Multiplier) setTree() bool {
	a := &m.a
	if a.Sum.Kind == StochasticSum || a.Product == RandomProduct || a.Chunk > 0 || a.Pairwise && a.Lanes > 0 {
		return false
	}
	t := &tree{add: m.loops.added, exact: a.Product == ExactProduct}
	t.leaves = newPlans(m.set, &Arithmetic{Product: a.Product, Grid: a.Grid}, Sum{Kind: NativeSum})
	t.eight = a.Sum.Kind == NativeSum && a.Product == NativeProduct
	if g := a.Sum.Grid; a.Sum.Kind == NearestSum {
		t.c = single.masks()
		t.c.nearest(single, g, single.nearestScale(g))
		inGrid := a.Product == RoundedProduct && a.Grid.Fraction <= g.Fraction && a.Grid.quantum() >= g.quantum()
		t.add = m.loops.addedOdd
		if a.Lanes > 0 || a.Sum.Through || inGrid {
			t.add = m.loops.addedNearest
		}
	}
	m.tree = t
	return true
}

// stack is subtrees of falling size, the first depth of them in use.
type stack struct {
	trees []subtree
	depth int
}

// subtree is the sums of size leaves, for some rows of a panel.
type subtree struct {
	size int
	sums []float32
}

// push returns the sums of a new subtree, to be filled.
func (s *stack) push(size, length int) []float32 {
	if s.depth == len(s.trees) {
		s.trees = append(s.trees, subtree{})
	}
	top := &s.trees[s.depth]
	top.size, top.sums = size, grown(top.sums, length)
	s.depth++
	return top.sums
}

// join adds the two topmost subtrees.
func (s *stack) join(t *tree) {
	left, right := &s.trees[s.depth-2], &s.trees[s.depth-1]
	t.add(left.sums, right.sums, &t.c)
	left.size += right.size
	s.depth--
}

// joinEquals adds subtrees of one size, joinAll all that there are.
func (s *stack) joinEquals(t *tree) {
	for s.depth > 1 && s.trees[s.depth-2].size == s.trees[s.depth-1].size {
		s.join(t)
	}
}

func (s *stack) joinAll(t *tree) {
	for s.depth > 1 {
		s.join(t)
	}
}

// treeRows are the pairs of rows whose subtrees are formed together: few enough that
// those of a block stay in the first-level cache.
const treeRows = 16

// pairwise forms the panel's sums as trees of products. Blocks of terms are subtrees,
// their number of terms being a power of two.
func (n *panel) pairwise() outcome {
	t, length := n.tree, 2*pairsOf(n.p.I)*n.row
	t.stack.depth = 0
	for k := 0; k < n.p.K; k += blockTerms {
		terms := min(blockTerms, n.p.K-k)
		plan := n.packLeaves(k, terms)
		if plan == nil {
			return impossible
		}
		sums := t.stack.push(terms, length)
		for first := 0; first < pairsOf(n.p.I); first += treeRows {
			n.blockTree(plan, sums, first, min(first+treeRows, pairsOf(n.p.I)), k, terms)
		}
		t.stack.joinEquals(t)
	}
	if n.p.K == 1 && n.a.Sum.Kind == NearestSum {
		clear(t.stack.push(1, length)) // a single term is added to zero
	}
	t.stack.joinAll(t)
	copy(n.result, t.stack.trees[0].sums)
	return formed
}

// packLeaves packs a block of columns and chooses how products are formed; nil where
// there is no way.
func (n *panel) packLeaves(k, terms int) *plan {
	n.raw = grown(n.raw, terms*n.width)
	n.p.B.Pack(n.raw, n.width, k, k+terms, n.j0, n.j0+n.columns)
	b := block{a: n.spanA, b: n.loops.spanOf(n.raw)}
	if n.tree.exact && !b.exact() {
		return nil
	}
	return n.tree.leaves.choose(&b)
}

// blockTree writes the subtree of a packed block of terms to sums, for pairs first <=
// q < last of rows.
func (n *panel) blockTree(plan *plan, sums []float32, first, last, k, terms int) {
	t := n.tree
	length := 2 * (last - first) * n.row
	t.inner.depth = 0
	for at, step := 0, 1; at < terms; at += step {
		m := plan.mode
		if step = 1; t.eight && at+treeTerms <= terms {
			m, step = tree8, treeTerms
		}
		n.leaf(plan, m, t.inner.push(step, length), first, last, k+at, step, n.raw[at*n.width:])
		t.inner.joinEquals(t)
	}
	t.inner.joinAll(t)
	copy(sums[2*first*n.row:], t.inner.trees[0].sums)
}

// leaf forms the products of one term, or the trees of eight.
func (n *panel) leaf(plan *plan, m mode, sums []float32, first, last, k, terms int, b []float32) {
	p, s := n.p, &n.one
	s.work = work[float32]{
		mode: m, c: &plan.c, width: n.width, last: last - first, terms: terms,
		a: pack(s, &n.loops, p, plan.scale)[2*(k+first*p.K):], aStride: 2 * p.K, b: b,
		in: s.zeros, out: sums, outRow: n.row,
	}
	s.sweep(n.bad[first:])
}
