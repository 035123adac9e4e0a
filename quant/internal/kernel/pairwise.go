package kernel

// pairwise forms the panel's sums as trees: neighbours are added, an odd last one is
// carried up, until one is left. Finished subtrees wait on a stack of falling sizes,
// powers of two; two of a size are added as soon as the second is there, and what is
// left at the end from the small ones up. That is the same tree.
func (n *panel) pairwise() {
	p := n.p
	n.depth = 0
	for k := 0; k < p.K; k += blockTerms {
		terms := min(blockTerms, p.K-k)
		n.raw = grown(n.raw, terms*n.width)
		p.B.Pack(n.raw, n.width, k, k+terms, n.j0, n.j0+n.columns)
		t := 0
		for ; t+treeTerms <= terms; t += treeTerms {
			n.leaf(tree8, k+t, treeTerms, n.raw[t*n.width:])
		}
		for ; t < terms; t++ {
			n.leaf(baseline, k+t, 1, n.raw[t*n.width:])
		}
	}
	for n.depth > 1 {
		n.join()
	}
	copy(n.result, n.stack[0].sums)
}

// subtree is the sums of size terms, for all rows of a panel.
type subtree struct {
	size int
	sums []float32
}

// leaf pushes the sum of a few terms and joins equals.
func (n *panel) leaf(m mode, k, terms int, b []float32) {
	p, s := n.p, &n.one
	pairs := pairsOf(p.I)
	if n.depth == len(n.stack) {
		n.stack = append(n.stack, subtree{})
	}
	top := &n.stack[n.depth]
	top.size = terms
	top.sums = grown(top.sums, 2*pairs*n.row)
	n.depth++
	s.work = work[float32]{
		mode: m, c: &n.main.native.c, width: n.width, last: pairs, terms: terms,
		a: pack(s, &n.loops, p, 0)[2*k:], aStride: 2 * p.K, b: b,
		in: s.zeros, out: top.sums, outRow: n.row,
	}
	s.sweep(n.bad)
	for n.depth > 1 && n.stack[n.depth-2].size == n.stack[n.depth-1].size {
		n.join()
	}
}

// join adds the two topmost subtrees.
func (n *panel) join() {
	left, right := &n.stack[n.depth-2], &n.stack[n.depth-1]
	n.loops.added(left.sums, right.sums, nil)
	left.size += right.size
	n.depth--
}
