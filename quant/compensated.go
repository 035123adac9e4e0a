package quant

// compensatedTerms bounds compensated sums, so that the numbers of their additions
// stay below those that a lane of random words has.
const compensatedTerms = 1 << 24

// compensated is Kahan's sum (W. Kahan: Further remarks on reducing truncation
// errors, Comm. ACM 8, 1965), each operation rounded once in the format of the sum.
// s and c start at +0; for every term p, padding skipped:
//
//	y = R[sum](p - c)
//	t = R[sum](s + y)
//	d = R[sum](t - s)
//	c = R[sum](d - y)
//	s = t
//
// The sum is s. The addition t has the number k of its term; y, d and c of all
// terms, padding included, follow it: n + 3k, n + 3k + 1, n + 3k + 2. The next
// number is 4n. As the steps say, a sum that becomes infinite is NaN a term later.
func (r *reference[T]) compensated(a *adder, n int, term func(k int) (Real, bool)) (s float64, next int) {
	if n > compensatedTerms {
		panic("quant: compensated sum of more than 2^24 terms")
	}
	p, c := &r.acc.Sum, 0.0
	for k := range n {
		x, ok := term(k)
		if !ok {
			continue
		}
		at := n + 3*k
		y := a.round(p, x.Add(Exactly(-c)), at)
		t := a.add(p, s, Exactly(y), k)
		d := a.add(p, t, Exactly(-s), at+1)
		c = a.add(p, d, Exactly(-y), at+2)
		s = t
	}
	return s, 4 * n
}
