package trainer

import (
	"math"
	"sync"

	"ulpine/quant"
)

// arithmetic is an operation on two numbers.
type arithmetic uint8

const (
	sum arithmetic = iota
	difference
	product
	quotient
)

// combineLength is the number of elements held in binary64 at a time; a multiple
// of four, the words of one block of draws.
const combineLength = 256

// combine writes R[point](a[i] how b[i]), the result exact before it is rounded,
// element 0 being number first of the tensor. A b of one element serves all. dst
// may be a or b; counts may be nil.
//
// The road is that of the divider: binary64 gives the nearest value and the sign
// of what it leaves, which is folded into the last bit (rounding to odd), so that
// rounding again to a short format is rounding once. A quotient by zero is that
// of IEEE 754.
func combine[T quant.Element](dst, a, b []T, how arithmetic, point *quant.Point, draws quant.Draws, first uint64, counts *quant.Counts) {
	x := blocks.Get().(*[combineLength]float64)
	defer blocks.Put(x)
	odd, native := roads(point)
	mask := -1 // of the indices into b
	if len(b) == 1 {
		mask = 0
	}
	for at := 0; at < len(dst); at += combineLength {
		end := min(at+combineLength, len(dst))
		block, right := x[:end-at], b[at&mask:]
		if (odd || native) && fold(block, a[at:end], right, mask, how, odd) {
			quant.RoundSlice(dst[at:end], block, point, draws, first+uint64(at), counts)
			continue
		}
		combineScalar(dst[at:end], a[at:end], right, mask, how, point, draws, first+uint64(at), counts)
	}
}

// blocks lends the scratch of combine: rounding by vector would move it to the heap,
// and a training step allocates nothing.
var blocks = sync.Pool{New: func() any { return new([combineLength]float64) }}

// roads reports which of the fast roads a point may take: one rounding to odd
// first, or binary64's own arithmetic.
func roads(point *quant.Point) (odd, native bool) {
	limits, random := point.Format.Limits(), 0
	if point.Rounding.Mode == quant.Stochastic {
		random = 32 // the most there can be
	}
	native = limits.Exponent == 11 && limits.Fraction == 52 && point.Rounding.Mode == quant.NearestEven && !limits.Flush
	if limits.Bits+random <= 50 {
		switch point.Format.(type) {
		case quant.Float, quant.Draft:
			return true, native // asked in every step: without the memory that OddSafe takes
		}
	}
	return point.OddSafe(), native
}

// fold writes the results to x, rounded to odd if odd is set, else to nearest. It
// reports whether binary64 can say so of all: results at its bounds and specials
// are left to exact reals.
func fold[T quant.Element](x []float64, a, b []T, mask int, how arithmetic, odd bool) bool {
	regular := true
	for i := range x {
		s, t := float64(a[i]), float64(b[i&mask])
		v, rest := valueAndRest(s, t, how)
		m := math.Abs(v)
		// Below 2^-900 the rest of a product or quotient may be lost.
		regular = regular && (m >= 0x1p-900 && m <= 0x1p1000 || m == 0 && (s == 0 || how <= difference))
		if odd {
			v = foldRest(v, rest)
		}
		x[i] = v
	}
	return regular
}

// valueAndRest is the nearest binary64 number to s how t and a number of the sign
// of what it leaves.
func valueAndRest(s, t float64, how arithmetic) (v, rest float64) {
	switch how {
	case product:
		v = float64(s * t)
		return v, math.FMA(s, t, -v)
	case quotient:
		v = s / t
		rest = math.FMA(-v, t, s)
		if t < 0 {
			rest = -rest
		}
		return v, rest
	case difference:
		t = -t
	}
	v = s + t
	z := v - s
	return v, (s - (v - z)) + (t - z) // D. E. Knuth, The Art of Computer Programming 2, 4.2.2
}

// foldRest rounds to odd: toward zero where the rest says that v lies beyond the
// exact value, and the last bit set where there is a rest.
func foldRest(v, rest float64) float64 {
	if rest == 0 || rest != rest {
		return v
	}
	bits := math.Float64bits(v)
	if (rest < 0) == (v > 0) {
		bits--
	}
	return math.Float64frombits(bits | 1)
}

// combineScalar is combine by exact reals.
func combineScalar[T quant.Element](dst, a, b []T, mask int, how arithmetic, point *quant.Point, draws quant.Draws, first uint64, counts *quant.Counts) {
	for i := range dst {
		var word uint32
		if point.Rounding.Mode == quant.Stochastic {
			word = point.Rounding.Word(draws, first+uint64(i))
		}
		v, event := point.Round(exactly(float64(a[i]), float64(b[i&mask]), how), word)
		dst[i] = T(v)
		counts.Count(event)
	}
}

// exactly is the exact real s how t.
func exactly(s, t float64, how arithmetic) quant.Real {
	switch how {
	case product:
		return quant.ExactProduct(s, t)
	case quotient:
		if t == 0 || t-t != 0 {
			return quant.Exactly(s / t)
		}
		return quant.ExactQuotient(s, t)
	case difference:
		return quant.Exactly(s).Add(quant.Exactly(-t))
	}
	return quant.Exactly(s).Add(quant.Exactly(t))
}
