package trainer

import (
	"math"

	"ulpine/quant"
)

// divider writes R[point](x/n) of exact quotients by a small whole number.
//
// A binary64 quotient that is not exact is first rounded to odd: its last bit
// then says that a rest was cut off, so rounding it again at a point that decides
// at even significands only (Point.OddSafe) gives what the exact quotient would
// (S. Boldo, G. Melquiond, Emulation of FMA and correctly rounded sums: proved
// algorithms using rounding to odd, IEEE TC 2008). Other points go through the
// exact scalar rounding, element by element.
type divider[T quant.Element] struct {
	n     float64
	point *quant.Point
	road  int
	spare []float64
}

// The roads to an exact result.
const (
	byOddQuotient = iota
	byNearestQuotient
	byScalar
)

func newDivider[T quant.Element](n int, point *quant.Point, capacity int) *divider[T] {
	d := &divider[T]{n: float64(n), point: point, road: byScalar}
	limits := point.Format.Limits()
	_, single := any(T(0)).(float32)
	switch {
	// binary32 inputs keep quotient and residue far from binary64's subnormals.
	case single && point.OddSafe():
		d.road = byOddQuotient
	case limits.Exponent == 11 && limits.Fraction == 52 && point.Rounding.Mode == quant.NearestEven:
		d.road = byNearestQuotient // the division itself is the rounding
	}
	if d.road != byScalar {
		d.spare = make([]float64, capacity)
	}
	return d
}

// divide writes R[point](src[i]/n) to dst[i]; element 0 is number first of the
// tensor. dst and src may be the same slice; counts may be nil.
func (d *divider[T]) divide(dst, src []T, draws quant.Draws, first uint64, counts *quant.Counts) {
	if d.road == byScalar {
		d.divideScalar(dst, src, draws, first, counts)
		return
	}
	q := d.spare[:len(src)]
	for i, v := range src {
		q[i] = float64(v) / d.n
	}
	if d.road == byOddQuotient {
		for i, v := range src {
			q[i] = toOdd(q[i], float64(v), d.n)
		}
	}
	quant.RoundSlice(dst, q, d.point, draws, first, counts)
}

func (d *divider[T]) divideScalar(dst, src []T, draws quant.Draws, first uint64, counts *quant.Counts) {
	for i, v := range src {
		var word uint32
		if d.point.Rounding.Mode == quant.Stochastic {
			word = d.point.Rounding.Word(draws, first+uint64(i))
		}
		r, event := d.point.Round(quant.ExactQuotient(float64(v), d.n), word)
		dst[i] = T(r)
		counts.Count(event)
	}
}

// toOdd turns the nearest quotient q of a/b into the one rounded to odd: the
// neighbour toward zero with its last bit set, unless the quotient is exact.
func toOdd(q, a, b float64) float64 {
	rest := math.FMA(-q, b, a) // exact: the remainder of a correctly rounded division
	if rest == 0 || rest != rest {
		return q // exact, or not finite
	}
	bits := math.Float64bits(q)
	if (rest < 0) == (q > 0) {
		bits-- // q lies beyond a/b: truncate
	}
	return math.Float64frombits(bits | 1)
}
