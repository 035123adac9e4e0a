package quant

// reference forms sums one result at a time in exact reals: the definition that
// every faster path is tested against, and the path of formats that have none.
type reference[T Element] struct {
	acc   Accumulate
	outer *Point
	leaf  []Real // terms of one result, for the orders that form trees
}

func newReference[T Element](acc Accumulate) reference[T] {
	r := reference[T]{acc: acc, outer: acc.Outer}
	if r.outer == nil {
		r.outer = &acc.Sum
	}
	return r
}

// adder performs the additions of one result (i, j).
type adder struct {
	through32 bool
	draws     Streams
	i, j      uint32
	counts    *Counts
}

// The points of the two native formats: binary32 also serves the adder that
// passes through it.
var (
	binary32Point = Point{Format: Binary32}
	binary64Point = Point{Format: Binary64}
)

// round returns R[p](x) for addition k, zero as +0.
func (a *adder) round(p *Point, x Real, k int) float64 {
	var w uint32
	if p.Rounding.Mode == Stochastic {
		w = a.draws.from(p.Rounding.Source, uint32(k), a.i, a.j)
	}
	return a.roundWord(p, x, w)
}

// roundWord is round with the random word given.
func (a *adder) roundWord(p *Point, x Real, w uint32) float64 {
	overflowed := false
	if a.through32 {
		v, _ := binary32Point.Round(x, 0)
		y := Exactly(v)
		overflowed = x.Kind == Finite && y.Kind == Infinite
		x = y
	}
	v, e := p.Round(x, w)
	// The adder's own overflow is one of the point, whatever the policy made of
	// the infinity.
	if overflowed && e != Saturated {
		e = Overflowed
	}
	if e != Underflowed { // not counted inside sums
		a.counts.Count(e)
	}
	if v == 0 {
		return 0
	}
	return v
}

// add returns R[p](s + t) for addition k.
func (a *adder) add(p *Point, s float64, t Real, k int) float64 {
	return a.round(p, Exactly(s).Add(t), k)
}

// mul forms the whole product, element by element.
func (r *reference[T]) mul(p *Product[T], products, sums *Counts) {
	column := make([]T, p.K)
	for j := range p.J {
		p.B.Pack(column, 1, 0, p.K, j, j+1)
		for i := range p.I {
			p.C[i*p.J+j] = r.element(p, column, i, j, products, sums)
		}
	}
}

// element forms C[i,j] from the packed column j.
func (r *reference[T]) element(p *Product[T], column []T, i, j int, products, sums *Counts) T {
	lane := uint32(p.FirstJ) + uint32(j)
	row := p.firstI + uint32(i)
	rounding := adder{draws: p.Terms, i: row, j: lane, counts: products}
	term := func(k int) (Real, bool) {
		if p.B.Padded(k, j) {
			return Real{}, false
		}
		x := ExactProduct(float64(p.A.At(i, k)), float64(column[k]))
		if r.acc.Product != nil {
			x = Exactly(rounding.round(r.acc.Product, x, k))
		}
		return x, true
	}
	a := adder{through32: r.acc.Through32, draws: p.Sums, i: row, j: lane, counts: sums}
	s, next := r.sum(&a, p.K, term)
	if p.Scale != nil {
		s = a.round(&r.acc.Sum, ExactProduct(p.Scale[i], s), next)
		next++
	}
	if p.Bias != nil {
		s = a.add(r.outer, s, Exactly(float64(p.Bias[i])), next)
	}
	return T(s)
}

// sumRows forms one sum of stored terms a row, rows i0, i0+1, ...
func (r *reference[T]) sumRows(dst []T, terms Matrix[T], k, i0 int, d Streams, sums *Counts) {
	for i := range dst {
		a := adder{through32: r.acc.Through32, draws: d, i: uint32(i0 + i), counts: sums}
		s, _ := r.sum(&a, k, func(k int) (Real, bool) { return Exactly(float64(terms.At(i0+i, k))), true })
		dst[i] = T(s)
	}
}

// sum adds terms 0..n-1 in the order of the accumulation; term reports false for
// padding. next is the number of the first addition after it.
func (r *reference[T]) sum(a *adder, n int, term func(k int) (Real, bool)) (s float64, next int) {
	switch r.acc.Order.Kind {
	case Chunk:
		return r.chunks(a, n, term)
	case Wide:
		return r.wide(a, n, term)
	case Pairwise:
		return r.pairwise(a, n, term)
	case Lanes:
		return r.lanes(a, n, term)
	case Compensated:
		return r.compensated(a, n, term)
	case Aligned:
		return r.aligned(a, n, term)
	default:
		return r.sequential(a, 0, n, 1, term), n
	}
}

// sequential adds terms from, from+step, ... below to, starting from +0.
func (r *reference[T]) sequential(a *adder, from, to, step int, term func(k int) (Real, bool)) (s float64) {
	for k := from; k < to; k += step {
		if t, ok := term(k); ok {
			s = a.add(&r.acc.Sum, s, t, k)
		}
	}
	return s
}

// chunks adds every K consecutive terms from +0 in sum and the finished chunks,
// in turn, from +0 in outer: additions n, n+1, ...
func (r *reference[T]) chunks(a *adder, n int, term func(k int) (Real, bool)) (s float64, next int) {
	next = n
	for from := 0; from < n; from += r.acc.Order.K {
		chunk := r.sequential(a, from, min(n, from+r.acc.Order.K), 1, term)
		s = a.add(r.outer, s, Exactly(chunk), next)
		next++
	}
	return s, next
}

// wide rounds the exact sum once: addition n.
func (r *reference[T]) wide(a *adder, n int, term func(k int) (Real, bool)) (s float64, next int) {
	var x exactSum
	for k := range n {
		if t, ok := term(k); ok {
			x.add(t)
		}
	}
	return a.round(&r.acc.Sum, x.total(), n), n + 1
}

// pairwise adds neighbours, level by level; an odd last one is carried up as it
// is. Padding feeds the tree a zero, and a single term is added to one.
func (r *reference[T]) pairwise(a *adder, n int, term func(k int) (Real, bool)) (s float64, next int) {
	r.leaf = r.leaf[:0]
	for k := range n {
		t, _ := term(k)
		r.leaf = append(r.leaf, t)
	}
	if n == 1 {
		r.leaf = append(r.leaf, Real{})
	}
	return r.tree(a, r.leaf, n)
}

// lanes adds term k to lane k mod K from +0 and then the lanes pairwise.
func (r *reference[T]) lanes(a *adder, n int, term func(k int) (Real, bool)) (s float64, next int) {
	r.leaf = r.leaf[:0]
	for lane := range r.acc.Order.K {
		r.leaf = append(r.leaf, Exactly(r.sequential(a, lane, n, r.acc.Order.K, term)))
	}
	return r.tree(a, r.leaf, n)
}

// tree adds neighbours until one is left; its additions are next, next+1, ...,
// level by level and left to right.
func (r *reference[T]) tree(a *adder, x []Real, next int) (float64, int) {
	for len(x) > 1 {
		half := len(x) / 2
		for t := range half {
			x[t] = Exactly(a.round(&r.acc.Sum, x[2*t].Add(x[2*t+1]), next))
			next++
		}
		if len(x)%2 == 1 {
			x[half] = x[len(x)-1]
			half++
		}
		x = x[:half]
	}
	if len(x) == 0 {
		return 0, next
	}
	return toFloat(x[0]), next
}
