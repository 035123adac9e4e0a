package quant

// maxAligned bounds the bits of aligned terms: sums of 2^25 of them stay exact in
// 128 bits.
const maxAligned = 64

// aligned models a datapath that adds products as integers. K consecutive terms
// form a group, the last one may be short; padding keeps its place in a group and
// adds nothing. With 2^e the largest power of two at most the largest magnitude of
// a group, every term is cut, toward zero, to a multiple of 2^(e - W + 1), so that
// the largest keeps W bits; the cut terms are added exactly, and the group is added
// to the sum: s = R[sum](s + group), from +0. Group number g is addition n + g.
//
// The terms are the products as the product point leaves them, exact where none is
// set; sums without products align their terms likewise. Infinities and NaN of a
// group decide its sum as they decide an exact one.
func (r *reference[T]) aligned(a *adder, n int, term func(k int) (Real, bool)) (s float64, next int) {
	next = n
	for from := 0; from < n; from += r.acc.Order.K {
		r.leaf = r.leaf[:0]
		for k := from; k < min(n, from+r.acc.Order.K); k++ {
			if t, ok := term(k); ok {
				r.leaf = append(r.leaf, t)
			}
		}
		if len(r.leaf) > 0 {
			s = a.add(&r.acc.Sum, s, alignedSum(r.leaf, r.acc.Order.W), next)
		}
		next++
	}
	return s, next
}

// alignedSum cuts the terms to w bits of the largest and adds them.
func alignedSum(terms []Real, w int) Real {
	var largest Real // of exponent
	for _, t := range terms {
		if t.Kind == Finite && !t.IsZero() && (largest.IsZero() || t.Exp > largest.Exp) {
			largest = t
		}
	}
	var sum Real
	for _, t := range terms {
		sum = sum.Add(t.cut(largest.Exp + 128 - w))
	}
	return sum
}

// cut returns the finite real a, not sticky, without its part below 2^q.
func (a Real) cut(q int) Real {
	if a.Kind != Finite || a.IsZero() || q <= a.Exp {
		return a
	}
	switch drop := uint(q - a.Exp); {
	case drop >= 128:
		return Real{Neg: a.Neg}
	case drop >= 64:
		a.Hi, a.Lo = a.Hi>>(drop-64)<<(drop-64), 0
	default:
		a.Lo = a.Lo >> drop << drop
	}
	return a
}
