package quant

import "math"

// add replaces s[j] by R[q](s[j] + t[j]) for addition k, zero as +0; s and t hold
// no -0 both. fold says that binary64 sums need their rest.
func (e *engine) add(s, t []float64, q *quick, k int, fold bool) {
	switch {
	case q.kind == quickNearest && fold:
		e.addNearestFold(s, t, q, k)
	case q.kind == quickNearest && q == &e.sum && e.splitSum:
		e.addSplit(s, t, k)
	case q.kind == quickNearest:
		e.addNearest(s, t, q, k)
	case q.kind == quickNative32 && fold:
		e.addNative32Fold(s, t, q, k)
	case q.kind == quickNative32:
		e.addNative32(s, t, q, k)
	case q.kind == quickStochastic:
		e.addStochastic(s, t, q, k, fold)
	case q.kind == quickDirected:
		e.addDirected(s, t, q, k)
	default:
		e.addGeneral(s, t, q, k)
	}
}

// through rounds a binary64 sum, exact or rounded to odd, to binary32 where the
// adder passes through it; what underflows there is +0.
func (e *engine) through(x float64) float64 {
	if e.acc.Through32 {
		return float64(float32(x)) + 0
	}
	return x
}

// split is the factor 2^drop + 1 of addSplit.
func (q *quick) split() float64 { return powerOfTwo(int(q.drop)) + 1 }

// addSplit is addGeneral for nearest-even where no sum needs its rest and all terms
// are multiples of the format's last place, so that sums below its least normal
// value are exact. It rounds to 53 - drop bits by Veltkamp's splitting (T. J.
// Dekker: A floating-point technique for extending the available precision, Numer.
// Math. 18, 1971): g = x (2^drop + 1), y = g - (g - x) is x to nearest. It takes ties
// to even as well: let x = (X + 1/2) 2^drop in units of its last place, 2^52 <= x <
// 2^53. Then x is even, g/2^drop = x + X + 1/2 is again a tie, and so rounds to the
// even one of x + X and x + X + 1, that is by the even one of X and X + 1; the
// difference g - x is a tie for which the same holds. (The last places of g and
// g - x are 2^drop unless x lies within 2^(53-drop) units of 2^53, where there is no
// tie if drop > 26.)
func (e *engine) addSplit(s, t []float64, k int) {
	split, limit := e.sum.split(), e.sum.max
	t = t[:len(s)]
	for j, v := range s {
		x := v + t[j]
		g := float64(x * split)
		y := g - (g - x)
		if !(math.Abs(y) <= limit) {
			y = e.oddSum(&e.sum, v, t[j], x, k, j)
		}
		s[j] = y
	}
}

// addNearest is addGeneral for nearest-even without rests, see quick.blockNearest.
func (e *engine) addNearest(s, t []float64, q *quick, k int) {
	low, lift, limit := q.low, q.lift, q.max
	t = t[:len(s)]
	for j, v := range s {
		x := e.through(v + t[j])
		c := math.Float64frombits(max(math.Float64bits(x)&exponentMask64, low) + lift)
		y := (x + c) - c
		if !(math.Abs(y) <= limit) {
			y = e.oddSum(q, v, t[j], x, k, j)
		}
		s[j] = y
	}
}

// addNearestFold is addGeneral for nearest-even.
func (e *engine) addNearestFold(s, t []float64, q *quick, k int) {
	low, lift, limit := q.low, q.lift, q.max
	t = t[:len(s)]
	for j, v := range s {
		x := v + t[j]
		if rest := twoSumRest(x, v, t[j]); rest != 0 {
			x = oddFold(x, rest)
		}
		x = e.through(x)
		c := math.Float64frombits(max(math.Float64bits(x)&exponentMask64, low) + lift)
		y := (x + c) - c
		if !(math.Abs(y) <= limit) {
			y = e.oddFolded(q, v, t[j], x, k, j)
		}
		s[j] = y
	}
}

// addNative32 is addGeneral for nearest-even to binary32 without rests.
func (e *engine) addNative32(s, t []float64, q *quick, k int) {
	t = t[:len(s)]
	for j, v := range s {
		x := v + t[j]
		y := float64(float32(x)) + 0 // -0 becomes +0
		if !(math.Abs(y) <= math.MaxFloat32) {
			y = e.oddSum(q, v, t[j], x, k, j)
		}
		s[j] = y
	}
}

// addNative32Fold is addGeneral for nearest-even to binary32.
func (e *engine) addNative32Fold(s, t []float64, q *quick, k int) {
	t = t[:len(s)]
	for j, v := range s {
		x := v + t[j]
		rest := twoSumRest(x, v, t[j])
		y := float64(float32(oddFoldQuick(x, rest))) + 0
		if !(math.Abs(y) <= math.MaxFloat32) {
			y = e.oddSum(q, v, t[j], x, k, j)
		}
		s[j] = y
	}
}

// oddFoldQuick is oddFold without branches, for rests that are often not zero.
func oddFoldQuick(x, rest float64) float64 {
	b, r := math.Float64bits(x), math.Float64bits(rest)
	inexact := -(r &^ signBit64) >> 63    // 1 where rest != 0
	even := ^b & inexact & 1              // 1 where the odd neighbour is wanted
	toward := uint64(int64(b^r)>>63) << 1 // 0, or -2 where the rest has the other sign
	return math.Float64frombits(b + (even & 1) + (toward & -even))
}

// magnitude splits the code of x. Whatever is added to the magnitude of a NaN below
// the last kept place may carry into the sign bit, but compared as an integer the
// result is beyond every limit all the same.
func magnitude(x float64) (sign, n uint64) {
	b := math.Float64bits(x)
	return b & signBit64, b &^ signBit64
}

// addStochastic is addGeneral for stochastic rounding, see quick.blockStochastic.
func (e *engine) addStochastic(s, t []float64, q *quick, k int, fold bool) {
	low, limit, centre, keep := q.low-1, math.Float64bits(q.max), q.centre, ^uint64(0)<<q.drop
	mask, up := uint32(0xffff)&^(1<<(16-q.random)-1), q.drop-16
	row, column := e.sumWords.at(k)
	t, column = t[:len(s)], column[:len(s)]
	for j, v := range s {
		x := v + t[j]
		if fold {
			if rest := twoSumRest(x, v, t[j]); rest != 0 {
				x = oddFold(x, rest)
			}
		}
		x = e.through(x)
		u := halves(row, column[j])
		sign, n := magnitude(x)
		r := (n + uint64(u&mask)<<up + centre) & keep
		y := math.Float64frombits(r | sign)
		if n-1 < low || r > limit {
			y = e.generalSum(q, v, t[j], x, u<<16, k, j)
		}
		s[j] = y
	}
}

// addDirected is addGeneral for the modes of quick.blockDirected.
func (e *engine) addDirected(s, t []float64, q *quick, k int) {
	low, limit, keep := q.low-1, math.Float64bits(q.max), ^uint64(0)<<q.drop
	drop, add, even := q.drop&63, q.add, q.even
	t = t[:len(s)]
	for j, v := range s {
		x := v + t[j]
		if rest := twoSumRest(x, v, t[j]); rest != 0 {
			x = oddFold(x, rest)
		}
		x = e.through(x)
		sign, n := magnitude(x)
		r := (n + add[sign>>63] + n>>drop&even) & keep
		y := math.Float64frombits(r | sign)
		if n-1 < low || r > limit {
			y = e.generalSum(q, v, t[j], x, 0, k, j)
		}
		s[j] = y
	}
}

// addGeneral rounds every sum on its own.
func (e *engine) addGeneral(s, t []float64, q *quick, k int) {
	random := q.point.Rounding.Mode == Stochastic
	t = t[:len(s)]
	for j, v := range s {
		x := v + t[j]
		x = e.through(oddFold(x, twoSumRest(x, v, t[j])))
		var word uint32
		if random {
			word = e.sumWords.word(k, j)
		}
		s[j] = e.generalSum(q, v, t[j], x, word, k, j)
	}
}

// generalSum rounds x, which stands for s + t.
func (e *engine) generalSum(q *quick, s, t, x float64, word uint32, k, j int) float64 {
	if !(math.Abs(x) <= math.MaxFloat64 && math.Abs(s+t) <= math.MaxFloat64) {
		return e.oddFolded(q, s, t, x, k, j)
	}
	v, event := q.round(x, word)
	if event != Underflowed {
		e.sums.Count(event)
	}
	return v + 0 // -0 becomes +0
}

// oddFolded is oddSum for an x that has gone through oddFold, which knows finite
// sums only.
func (e *engine) oddFolded(q *quick, s, t, x float64, k, j int) float64 {
	if raw := s + t; !(math.Abs(raw) <= math.MaxFloat64) {
		x = raw
	}
	return e.oddSum(q, s, t, x, k, j)
}

// oddSum returns the sum of s and t that is not finite or rounds beyond the largest
// finite value; x is s + t after the adder's own rounding. Padding leaves s alone.
func (e *engine) oddSum(q *quick, s, t, x float64, k, j int) float64 {
	if e.isPadded(k, j) {
		return s
	}
	fresh := math.Abs(s) <= math.MaxFloat64 && math.Abs(t) <= math.MaxFloat64
	v, event := q.odd(x, fresh)
	e.sums.Count(event)
	return v
}
