package quant

import "math"

// native forms sums in the machine's own arithmetic, where all points are the
// format of the tensor's elements, to nearest-even: the baseline in binary32 and
// its control in binary64. The machine rounds each operation as the points do, and
// infinities and NaN stick: a row of finite results had no event. Other rows are
// formed again where events are counted.
//
// The conversion in T(a*b) + c rounds the product by itself: the language forbids
// fusing across it.
type native[T Element] struct {
	order Order
	fused bool // the product is exact (binary64 only)

	terms, width int
	a, b         []T
	s, chunk     []T
	node         []T
	nodes        [][]T
}

// newNative returns the native arithmetic of acc in T, nil where there is none.
func newNative[T Element](acc Accumulate) *native[T] {
	kind := quickNative64
	var t T
	_, narrow := any(t).(float32)
	if narrow {
		kind = quickNative32
	}
	is := func(p *Point) bool {
		q := newQuick(p)
		return q.kind == kind && p.policy() == ToInfinity
	}
	n := &native[T]{order: acc.Order, fused: acc.Product == nil}
	switch acc.Order.Kind {
	case Sequential, Chunk, Pairwise, Lanes:
	default:
		return nil
	}
	switch {
	case !is(&acc.Sum), acc.Outer != nil && !is(acc.Outer), acc.Product != nil && !is(acc.Product):
		return nil
	case acc.Through32 && !narrow:
		return nil
	case n.fused && (narrow || acc.Order.Kind == Pairwise):
		return nil // no fused multiply-add of binary32; no sum of two exact products
	}
	return n
}

// begin takes the block's operands: a row of terms, filled for every row anew, and
// terms x width columns.
func (n *native[T]) begin(terms, width int, a, b []T) {
	n.terms, n.width, n.a, n.b = terms, width, a, b
	n.s, n.chunk = grown(n.s, width), grown(n.chunk, width)
}

// row forms the sums of one row of the block.
func (n *native[T]) row() []T {
	switch n.order.Kind {
	case Chunk:
		clear(n.s)
		for from := 0; from < n.terms; from += n.order.K {
			clear(n.chunk)
			n.run(n.chunk, from, min(n.terms, from+n.order.K), 1)
			addInto(n.s, n.chunk)
		}
		return n.s
	case Pairwise:
		return n.pairwise()
	case Lanes:
		nodes := n.rows(n.order.K)
		for lane, x := range nodes {
			clear(x)
			n.run(x, lane, n.terms, len(nodes))
		}
		return treeOf(nodes)
	default:
		clear(n.s)
		n.run(n.s, 0, n.terms, 1)
		return n.s
	}
}

// run adds terms from, from+step, ... below to of the block to s:
// s[j] = T(a[k] b[k,j]) + s[j], k ascending; four terms at a time share the loads
// and stores of s.
func (n *native[T]) run(s []T, from, to, step int) {
	if n.fused {
		n.runFused(any(s).([]float64), from, to, step)
		return
	}
	k, w := from, len(s)
	for ; k+3*step < to; k += 4 * step {
		b0, b1 := n.b[k*w:][:w], n.b[(k+step)*w:][:w]
		b2, b3 := n.b[(k+2*step)*w:][:w], n.b[(k+3*step)*w:][:w]
		a0, a1, a2, a3 := n.a[k], n.a[k+step], n.a[k+2*step], n.a[k+3*step]
		for j := range s {
			v := s[j] + T(a0*b0[j])
			v += T(a1 * b1[j])
			v += T(a2 * b2[j])
			s[j] = v + T(a3*b3[j])
		}
	}
	for ; k < to; k += step {
		a, b := n.a[k], n.b[k*w:][:w]
		for j := range s {
			s[j] += T(a * b[j])
		}
	}
}

// runFused is s[j] = fma(a[k], b[k,j], s[j]), k ascending, an exact zero being +0.
func (n *native[T]) runFused(s []float64, from, to, step int) {
	na, nb := any(n.a).([]float64), any(n.b).([]float64)
	for k := from; k < to; k += step {
		a, b := na[k], nb[k*len(s):][:len(s)]
		for j := range s {
			s[j] = math.FMA(a, b[j], s[j]) + 0
		}
	}
}

// pairwise forms the tree of all terms. Each eight consecutive terms are a complete
// tree of their own, and so are the last ones, whose odd ones are carried up within
// it: their sums are the nodes of the third level.
func (n *native[T]) pairwise() []T {
	full, rest := n.terms/8, n.terms%8
	count := full
	if rest > 0 || full == 0 {
		count++
	}
	nodes := n.rows(count + 8)
	for g := range full {
		n.eight(nodes[g], 8*g)
	}
	if count > full {
		last := nodes[count:][:max(rest, 1)]
		for k, x := range last {
			clear(x)
			n.run(x, 8*full+k, min(n.terms, 8*full+k+1), 1)
		}
		nodes[full] = treeOf(last)
	}
	return treeOf(nodes[:count])
}

// eight writes the tree of the eight products from term k on to s; products of -0
// and their sums become +0.
func (n *native[T]) eight(s []T, k int) {
	w, a := len(s), n.a[k:][:8]
	b0, b1, b2, b3 := n.b[k*w:][:w], n.b[(k+1)*w:][:w], n.b[(k+2)*w:][:w], n.b[(k+3)*w:][:w]
	b4, b5, b6, b7 := n.b[(k+4)*w:][:w], n.b[(k+5)*w:][:w], n.b[(k+6)*w:][:w], n.b[(k+7)*w:][:w]
	for j := range s {
		v := (T(a[0]*b0[j]) + T(a[1]*b1[j])) + (T(a[2]*b2[j]) + T(a[3]*b3[j]))
		u := (T(a[4]*b4[j]) + T(a[5]*b5[j])) + (T(a[6]*b6[j]) + T(a[7]*b7[j]))
		s[j] = (v + u) + 0
	}
}

// rows returns count scratch rows of the block's width.
func (n *native[T]) rows(count int) [][]T {
	n.node = grown(n.node, count*n.width)
	n.nodes = grown(n.nodes, count)
	for i := range n.nodes {
		n.nodes[i] = n.node[i*n.width:][:n.width]
	}
	return n.nodes
}

// treeOf adds neighbours until one is left; an odd last one is carried up.
func treeOf[T Element](x [][]T) []T {
	for len(x) > 1 {
		half := len(x) / 2
		for t := range half {
			addInto(x[2*t], x[2*t+1])
			x[t] = x[2*t]
		}
		if len(x)%2 == 1 {
			x[half] = x[len(x)-1]
			half++
		}
		x = x[:half]
	}
	return x[0]
}

// addInto adds t to s.
func addInto[T Element](s, t []T) {
	t = t[:len(s)]
	for j := range s {
		s[j] += t[j]
	}
}
