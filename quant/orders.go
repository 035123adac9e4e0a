package quant

import "math"

// row forms the sums of one row of the block in the order of the accumulation; the
// result is good until the next call. next is the number of the first addition
// after it; false where the exact sum of the row needs exact reals.
func (e *engine) row() (s []float64, next int, ok bool) {
	switch e.acc.Order.Kind {
	case Chunk:
		s, next = e.chunks()
	case Wide:
		return e.wide()
	case Pairwise:
		s, next = e.pairwise()
	case Lanes:
		s, next = e.lanes()
	default:
		e.sequential(e.s, 0, e.terms, 1)
		s, next = e.s, e.terms
	}
	return s, next, true
}

// sequential adds terms from, from+step, ... below to, starting from +0.
func (e *engine) sequential(s []float64, from, to, step int) {
	clear(s)
	if e.product.kind == quickNearest && e.splitSum {
		for k := from; k < to; k += step {
			e.stepNearest(s, k)
		}
		return
	}
	for k := from; k < to; k += step {
		e.term(e.t, k)
		e.add(s, e.t, &e.sum, k, e.foldSum)
	}
}

// stepNearest adds R[product](a b[j]) of term k to s[j] in one pass, product and
// sum to nearest-even, as termNearest and addSplit do.
func (e *engine) stepNearest(s []float64, k int) {
	a, b := e.a[k], e.b[k*e.width:][:len(s)]
	lowP, liftP, limitP := e.product.low, e.product.lift, e.product.max
	split, limitS := e.sum.split(), e.sum.max
	for j, v := range s {
		p := float64(a * b[j])
		c := math.Float64frombits(max(math.Float64bits(p)&exponentMask64, lowP) + liftP)
		r := (p + c) - c
		if !(math.Abs(r) <= limitP) {
			r = e.oddTerm(p, k, j)
		}
		x := v + r
		g := float64(x * split)
		y := g - (g - x)
		if !(math.Abs(y) <= limitS) {
			y = e.oddSum(&e.sum, v, r, x, k, j)
		}
		s[j] = y
	}
}

// chunks adds every K consecutive terms from +0 in sum and the finished chunks, in
// turn, from +0 in outer.
func (e *engine) chunks() ([]float64, int) {
	total, next := e.s, e.terms
	clear(total)
	for from := 0; from < e.terms; from += e.acc.Order.K {
		e.sequential(e.chunk, from, min(e.terms, from+e.acc.Order.K), 1)
		e.add(total, e.chunk, &e.outer, next, true)
		next++
	}
	return total, next
}

// pairwise adds neighbouring terms, level by level; an odd last one is carried up.
func (e *engine) pairwise() ([]float64, int) {
	count := max(e.terms, 2) // a single term is added to zero
	nodes := e.block(count)
	for k, n := range nodes {
		clear(n)
		if k < e.terms {
			e.leaf(n, k)
		}
	}
	if e.terms == 0 {
		return nodes[0], 0
	}
	return e.tree(nodes, e.terms, e.foldTop)
}

// leaf writes term k to n: padding, and a product of -0, as +0.
func (e *engine) leaf(n []float64, k int) {
	e.term(n, k)
	for j, v := range n {
		if v == 0 || !(math.Abs(v) <= math.MaxFloat64) && e.isPadded(k, j) {
			n[j] = 0
		}
	}
}

// lanes adds term k to lane k mod K from +0 and then the lanes pairwise.
func (e *engine) lanes() ([]float64, int) {
	nodes := e.block(e.acc.Order.K)
	for lane, n := range nodes {
		e.sequential(n, lane, e.terms, len(nodes))
	}
	return e.tree(nodes, e.terms, e.foldNode)
}

// block returns n scratch rows of the block's width.
func (e *engine) block(n int) [][]float64 {
	e.node = grown(e.node, n*e.width)
	e.nodes = grown(e.nodes, n)
	for i := range e.nodes {
		e.nodes[i] = e.node[i*e.width:][:e.width]
	}
	return e.nodes
}

// tree adds neighbours until one is left; its additions are next, next+1, ...,
// level by level and left to right.
func (e *engine) tree(x [][]float64, next int, fold bool) ([]float64, int) {
	for len(x) > 1 {
		half := len(x) / 2
		for t := range half {
			e.add(x[2*t], x[2*t+1], &e.sum, next, fold)
			x[t] = x[2*t]
			next++
		}
		if len(x)%2 == 1 {
			x[half] = x[len(x)-1]
			half++
		}
		x = x[:half]
	}
	return x[0], next
}
