package quant

import (
	"math"
	"math/bits"
)

// maxLevels is the number of binary64 accumulators a column that an exact sum may
// take before exact reals serve it.
const maxLevels = 4

// wide forms the exact sums and rounds them once: addition terms. Each term is cut
// into multiples of falling powers of two, the places of the levels, and every
// level adds its parts exactly: places are so far apart, and so near, that neither
// the cutting nor the adding of all terms rounds (the cutting by a constant is
// that of S. M. Rump, T. Ogita, S. Oishi: Accurate floating-point summation, SIAM
// J. Sci. Comput. 31, 2008). false: operands not finite, or too wide a range.
func (e *engine) wide() (s []float64, next int, ok bool) {
	places, ok := e.places()
	if !ok {
		return nil, 0, false
	}
	n := len(places)
	e.level = grown(e.level, n*e.width)
	clear(e.level)
	before := e.products
	for k := range e.terms {
		e.term(e.t, k)
		for l, place := range places {
			level := e.level[l*e.width:][:e.width]
			if l == n-1 {
				addExact(level, e.t)
				break
			}
			cutExact(level, e.t, 1.5*powerOfTwo(place+fractionBits64))
		}
	}
	for _, v := range e.level {
		if !(math.Abs(v) <= math.MaxFloat64) { // a product overflowed
			e.products = before
			return nil, 0, false
		}
	}
	e.roundWide(n)
	return e.s, e.terms + 1, true
}

// cutExact adds the part of t[j] above the place of the constant c to level[j] and
// leaves the rest in t[j].
func cutExact(level, t []float64, c float64) {
	t = t[:len(level)]
	for j, v := range t {
		part := (v + c) - c
		level[j] += part
		t[j] = v - part
	}
}

// addExact adds t[j] to level[j].
func addExact(level, t []float64) {
	t = t[:len(level)]
	for j := range level {
		level[j] += t[j]
	}
}

// places chooses the place of every level from the largest and the finest term
// that the row and the block can form.
func (e *engine) places() ([]int, bool) {
	places := e.place[:0]
	top, fine, ok := e.extent()
	if !ok {
		return nil, false
	}
	grow := max(bits.Len(uint(e.terms)), 2) // the sum of all terms is below 2^grow of the largest
	for {
		// Parts up to 2^top, sums below 2^(top+grow), in units of 2^place.
		place := top + grow - 53
		if place <= fine {
			return append(places, fine), true
		}
		if len(places) == maxLevels-1 {
			return nil, false
		}
		places = append(places, place)
		top = place // what is left is at most half a unit of the place
	}
}

// extent returns exponents such that every term is at most 2^top and a multiple of
// 2^fine; false where an operand is not finite. Rounding a product keeps both: it
// at most doubles, or becomes the format's least value, and its last place only rises.
func (e *engine) extent() (top, fine int, ok bool) {
	maxA, fineA, okA := extentOf(e.a)
	if !okA || !e.finiteB {
		return 0, 0, false
	}
	if maxA == 0 || e.maxB == 0 {
		return 0, 0, true
	}
	top = exponentOf(maxA) + exponentOf(e.maxB) + 3
	if e.acc.Product != nil && e.product.kind != quickNative64 {
		top = max(top, e.product.emin-e.product.fraction+1)
	}
	return top, fineA + e.fineB, true
}

// extentOf returns the largest magnitude of x and the exponent of its finest unit.
func extentOf(x []float64) (largest float64, fine int, ok bool) {
	fine, ok = math.MaxInt32, true
	for _, v := range x {
		m := math.Abs(v)
		if !(m <= math.MaxFloat64) {
			return 0, 0, false
		}
		if m == 0 {
			continue
		}
		largest = max(largest, m)
		b := math.Float64bits(m)
		// binary32 numbers are normal in binary64: the last set bit of the significand.
		unit := int(b>>fractionBits64) - bias64 - fractionBits64 + bits.TrailingZeros64(b&fractionMask64|hidden64)
		fine = min(fine, unit)
	}
	return largest, fine, true
}

// roundWide rounds the sums of n levels into e.s.
func (e *engine) roundWide(n int) {
	for j := range e.s {
		v, event := e.roundLevels(n, j)
		if event != Underflowed {
			e.sums.Count(event)
		}
		e.s[j] = v + 0
	}
}

// roundLevels rounds the sum of the n levels of column j, addition terms.
func (e *engine) roundLevels(n, j int) (float64, Event) {
	word := e.sumWords.word(e.terms, j)
	if n <= 2 {
		x, rest := e.level[j], 0.0
		if n == 2 {
			low := e.level[e.width+j]
			high := x
			x = high + low
			rest = twoSumRest(x, high, low)
		}
		return e.sum.round(oddFold(x, rest), word)
	}
	var x exactSum
	for l := range n {
		x.add(Exactly(e.level[l*e.width+j]))
	}
	return e.sum.point.Round(x.total(), word)
}
