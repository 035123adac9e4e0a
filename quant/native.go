package quant

import "math"

// native forms sums in the machine's own arithmetic, where all points are the
// format of the tensor's elements, to nearest-even: the baseline in binary32 and
// its control in binary64. The machine rounds each operation as the points do, and
// infinities and NaN stick: a row of finite results had no event. Other rows are
// formed again where events are counted.
type native[T Element] struct {
	order Order
	fused bool // the product is exact (binary64 only)

	terms, width int
	a, b         []T
	s, chunk     []T
	node         []T
	nodes        [][]T

	// run adds terms from, from+step, ... below to of the block to s.
	run func(n *native[T], s []T, from, to, step int)
}

// newNative returns the native arithmetic of acc in T, nil where there is none.
func newNative[T Element](acc Accumulate) *native[T] {
	kind, run := quickNative64, any(runNative64)
	var t T
	if _, narrow := any(t).(float32); narrow {
		kind, run = quickNative32, any(runNative32)
	}
	is := func(p *Point) bool {
		q := newQuick(p)
		return q.kind == kind && p.policy() == ToInfinity
	}
	n := &native[T]{order: acc.Order}
	switch {
	case acc.Order.Kind == Wide, !is(&acc.Sum), acc.Outer != nil && !is(acc.Outer):
		return nil
	case acc.Through32 && kind == quickNative64:
		return nil
	case acc.Product != nil:
		if !is(acc.Product) {
			return nil
		}
	case kind == quickNative32, acc.Order.Kind == Pairwise:
		return nil
	default:
		n.fused, run = true, any(runFused64)
	}
	n.run = run.(func(*native[T], []T, int, int, int))
	return n
}

// runNative32 is s[j] = float32(a[k] b[k,j]) + s[j], k ascending; four terms at a
// time share the loads and stores of s.
func runNative32(n *native[float32], s []float32, from, to, step int) {
	k, w := from, len(s)
	for ; k+3*step < to; k += 4 * step {
		b0, b1 := n.b[k*w:][:w], n.b[(k+step)*w:][:w]
		b2, b3 := n.b[(k+2*step)*w:][:w], n.b[(k+3*step)*w:][:w]
		a0, a1, a2, a3 := n.a[k], n.a[k+step], n.a[k+2*step], n.a[k+3*step]
		for j := range s {
			v := s[j] + float32(a0*b0[j])
			v += float32(a1 * b1[j])
			v += float32(a2 * b2[j])
			s[j] = v + float32(a3*b3[j])
		}
	}
	for ; k < to; k += step {
		a, b := n.a[k], n.b[k*w:][:w]
		for j := range s {
			s[j] += float32(a * b[j])
		}
	}
}

// runNative64 is s[j] = float64(a[k] b[k,j]) + s[j], k ascending, as runNative32.
func runNative64(n *native[float64], s []float64, from, to, step int) {
	k, w := from, len(s)
	for ; k+3*step < to; k += 4 * step {
		b0, b1 := n.b[k*w:][:w], n.b[(k+step)*w:][:w]
		b2, b3 := n.b[(k+2*step)*w:][:w], n.b[(k+3*step)*w:][:w]
		a0, a1, a2, a3 := n.a[k], n.a[k+step], n.a[k+2*step], n.a[k+3*step]
		for j := range s {
			v := s[j] + float64(a0*b0[j])
			v += float64(a1 * b1[j])
			v += float64(a2 * b2[j])
			s[j] = v + float64(a3*b3[j])
		}
	}
	for ; k < to; k += step {
		a, b := n.a[k], n.b[k*w:][:w]
		for j := range s {
			s[j] += float64(a * b[j])
		}
	}
}

// runFused64 is s[j] = fma(a[k], b[k,j], s[j]), k ascending.
func runFused64(n *native[float64], s []float64, from, to, step int) {
	for k := from; k < to; k += step {
		a, b := n.a[k], n.b[k*len(s):][:len(s)]
		for j := range s {
			s[j] = math.FMA(a, b[j], s[j]) + 0 // an exact zero is +0
		}
	}
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
			n.run(n, n.chunk, from, min(n.terms, from+n.order.K), 1)
			addInto(n.s, n.chunk)
		}
		return n.s
	case Pairwise:
		nodes := n.rows(max(n.terms, 1))
		for k, x := range nodes {
			clear(x)
			n.run(n, x, k, min(n.terms, k+1), 1)
		}
		return treeOf(nodes)
	case Lanes:
		nodes := n.rows(n.order.K)
		for lane, x := range nodes {
			clear(x)
			n.run(n, x, lane, n.terms, len(nodes))
		}
		return treeOf(nodes)
	default:
		clear(n.s)
		n.run(n, n.s, 0, n.terms, 1)
		return n.s
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
