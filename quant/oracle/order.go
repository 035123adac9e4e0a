package oracle

import "fmt"

// Order is a summation order in words.
type Order struct {
	Kind string // sequential, chunk, lanes, pairwise
	K    int    // chunk length or number of lanes
}

// Step is one addition of a sum.
type Step struct {
	Number int    // the addition's number, which its random bits are drawn by
	Term   int    // the term it adds, -1 for the addition of two partial sums
	Outer  bool   // it adds a finished chunk
	Where  string // "", "lane 2", "chunk 0", "outer", "level 1 node 0"
}

// Walk adds terms 0 to n-1 in an order, calling add for every addition, and
// returns the sum. V is whatever holds partial sums and terms.
func Walk[V any](o Order, n int, zero V, term func(k int) V, add func(s Step, a, b V) V) (V, error) {
	w := walker[V]{n: n, zero: zero, term: term, add: add}
	switch o.Kind {
	case "sequential":
		return w.run(0, n, 1, ""), nil
	case "chunk":
		total := zero
		for c := 0; c*o.K < n; c++ {
			part := w.run(c*o.K, min(n, (c+1)*o.K), 1, fmt.Sprintf("chunk %d", c))
			total = add(Step{Number: n + c, Term: -1, Outer: true, Where: "outer"}, total, part)
		}
		return total, nil
	case "lanes":
		var lanes []V
		for l := range o.K {
			lanes = append(lanes, w.run(l, n, o.K, fmt.Sprintf("lane %d", l)))
		}
		return w.tree(lanes), nil
	case "pairwise":
		var leaves []V
		for k := range n {
			leaves = append(leaves, term(k))
		}
		if n == 1 {
			leaves = append(leaves, zero)
		}
		return w.tree(leaves), nil
	}
	return zero, fmt.Errorf("oracle: no definition of the order %s here", o.Kind)
}

type walker[V any] struct {
	n    int
	zero V
	term func(k int) V
	add  func(s Step, a, b V) V
}

// run adds terms from, from+step, ... below to, in turn, to zero.
func (w *walker[V]) run(from, to, step int, where string) V {
	s := w.zero
	for k := from; k < to; k += step {
		s = w.add(Step{Number: k, Term: k, Where: where}, s, w.term(k))
	}
	return s
}

// tree adds neighbours, level by level; an odd last one is carried up.
func (w *walker[V]) tree(x []V) V {
	number := w.n
	for level := 1; len(x) > 1; level++ {
		var up []V
		for t := 0; t+1 < len(x); t += 2 {
			where := fmt.Sprintf("level %d node %d", level, t/2)
			up = append(up, w.add(Step{Number: number, Term: -1, Where: where}, x[t], x[t+1]))
			number++
		}
		if len(x)%2 == 1 {
			up = append(up, x[len(x)-1])
		}
		x = up
	}
	if len(x) == 0 {
		return w.zero
	}
	return x[0]
}
