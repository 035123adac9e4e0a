package quant

import "math"

// block replaces x[i] by R[q](x[i]) in place, element i being number first+i of
// its stream, and counts the events; false, with nothing done, where q has no
// quick rounding.
func (q *quick) block(x []float64, w *words, first uint64, n *Counts) bool {
	switch q.kind {
	case quickNearest, quickNative32:
		q.blockNearest(x, n)
	case quickStochastic:
		q.blockStochastic(x, w, first, n)
	case quickDirected:
		q.blockDirected(x, n)
	case quickGeneral:
		for i, v := range x {
			q.one(x, i, v, w.at(first+uint64(i)), n)
		}
	case quickNative64:
		for i, v := range x {
			if !(math.Abs(v) <= math.MaxFloat64) {
				q.one(x, i, v, 0, n)
			}
		}
	default:
		return false
	}
	if q.oneZero {
		for i := range x {
			x[i] += 0 // -0 becomes +0
		}
	}
	return true
}

// one rounds a single element with everything that can happen to it.
func (q *quick) one(x []float64, i int, v float64, word uint32, n *Counts) {
	r, e := q.round(v, word)
	x[i] = r
	n.Count(e)
}

// blockNearest rounds to nearest-even. With e = max(exponent of x, emin), adding
// and subtracting 1.5 x 2^(e+drop), whose unit in the last place is the place of
// the last kept bit, rounds at that place. The exponent is capped in the binade
// beyond the format's, which keeps the constant finite: what lies there is beyond
// max however it is rounded.
func (q *quick) blockNearest(x []float64, n *Counts) {
	var lost uint64
	for i, v := range x {
		b := math.Float64bits(v)
		e := min(max(b&exponentMask64, q.low), q.high)
		c := math.Float64frombits(e + q.lift)
		r := (v + c) - c
		if !(math.Abs(r) <= q.max) {
			q.one(x, i, v, 0, n)
			continue
		}
		// r is +0 where v rounds to zero: give it the sign of v back, and count,
		// without a branch, what was not zero before.
		mag := math.Float64bits(r) &^ signBit64
		lost += ((mag - 1) >> 63) & (-(b &^ signBit64) >> 63)
		x[i] = math.Float64frombits(mag | b&signBit64)
	}
	if n != nil {
		n.Underflow += lost
	}
}

// blockStochastic adds the random bits, and for Centred half a unit of their last
// place, to the exact magnitude below its last kept place and cuts there: the
// carry out of the cut part says T + U >= 2^r. Magnitudes below the least normal
// value, whose last place is another, and beyond the format go one by one.
func (q *quick) blockStochastic(x []float64, w *words, first uint64, n *Counts) {
	keep := ^uint64(0) << q.drop
	up := q.drop - q.random
	for i, v := range x {
		b := math.Float64bits(v)
		word := w.at(first + uint64(i))
		r := math.Float64frombits((b + uint64(word>>(32-q.random))<<up + q.centre) & keep)
		if b&^signBit64-q.low >= q.high-q.low || !(math.Abs(r) <= q.max) {
			q.one(x, i, v, word, n)
			continue
		}
		x[i] = r
	}
}

// blockDirected adds what the mode asks for below the last kept place of the exact
// magnitude and cuts there; magnitudes below the least normal value and beyond the
// format go one by one.
func (q *quick) blockDirected(x []float64, n *Counts) {
	keep := ^uint64(0) << q.drop
	for i, v := range x {
		b := math.Float64bits(v)
		r := math.Float64frombits((b + q.add[b>>63] + b>>q.drop&q.even) & keep)
		if b&^signBit64-q.low >= q.high-q.low || !(math.Abs(r) <= q.max) {
			q.one(x, i, v, 0, n)
			continue
		}
		x[i] = r
	}
}
