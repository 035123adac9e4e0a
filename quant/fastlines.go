package quant

import "math"

// fastLines rounds the lines of a tensor whose format has shared scales with the
// quick rounding of its elements; RoundLine, in exact reals, is the definition.
//
// The element is R[element](v/u) for a unit u. Where u is a power of two the quotient
// is exact. Elsewhere the rest v - (v/u) u of the nearest quotient is a binary64
// number, which FMA gives exactly, and its sign tells on which side of the nearest one
// the exact quotient lies: rounded to odd with it, the quotient rounds as the exact
// one does (see oddFold), ties and near-ties included.
type fastLines struct {
	q      quick
	block  Block // its Element is nil for integers under one scale
	floor  bool  // scales are powers of two by the floor rule
	top    int   // exponent of the largest element
	factor float64
}

// elementPoint is the point of the elements of a format with shared scales; without
// a format where there is no such type.
func elementPoint(f Blocked, s Scaling, p *Point) Point {
	e := Point{Rounding: p.Rounding, Overflow: p.Overflow}
	switch f := f.(type) {
	case Block:
		e.Format = f.spec.Element
	case Integer:
		if e.Format = f.code; s.Zero != f.spec.Zero {
			e.Format = f.terms(s.Zero)
		}
	}
	return e
}

// newFastLines returns the fast path of f, whose elements have the point e; false
// where there is none.
func newFastLines(f Blocked, s Scaling, e *Point) (l fastLines, ok bool) {
	l.q, l.factor = newQuick(e), s.Factor
	largest, lowest := l.q.limit[0], l.q.limit[1]
	if l.q.kind == quickNone || l.q.kind == quickNative64 || largest < regularLeast || lowest < regularLeast {
		return l, false
	}
	// The loops look no further than the nearer limit: the codes of a scaled integer
	// need not reach as far down as up.
	l.q.max = min(largest, lowest)
	if b, is := f.(Block); is {
		l.block, l.top = b, exponentOf(largest)
		l.floor = b.spec.Rule == ScaleFloor && b.spec.Scale == Format(PowerScale{}) && s.Factor == 1
	}
	return l, true
}

// round is RoundLine.
func (l *fastLines) round(line []float64, word []uint32, n *Counts) {
	if l.block.spec.Element == nil {
		l.divide(line, l.factor, word, n)
		return
	}
	size := l.block.spec.Size
	for at := 0; at < len(line); at += size {
		block := line[at:min(at+size, len(line))]
		x := l.scale(block)
		w := word
		if w != nil {
			w = word[at:]
		}
		l.divide(block, float64(x*l.factor), w, n)
		for i, r := range block {
			block[i] = float64(r * x)
		}
	}
}

// scale is Block.scale.
func (l *fastLines) scale(block []float64) float64 {
	b := &l.block
	if !l.floor {
		return b.scale(block, l.factor)
	}
	x := 1.0
	if m := largestFinite(block); m != 0 {
		x = powerOfTwo(min(max(exponentOf(m)-l.top, powerLeast), powerLargest))
	}
	return max(min(x, b.largest), b.least)
}

// The magnitudes that divide takes. Units lie in 2^-298 to 2^256, products of two
// binary32 numbers, so that neither quotient nor rest leaves the normal numbers.
const (
	regularLeast   = 0x1p-600
	regularLargest = 0x1p600
)

// divide replaces x[i] by R[element](x[i]/unit).
func (l *fastLines) divide(x []float64, unit float64, word []uint32, n *Counts) {
	exact := math.Float64bits(unit)&fractionMask64 == 0
	if !l.regular(x) || !exact && !l.q.foldable {
		l.divideReals(x, unit, word, n)
		return
	}
	if exact {
		inverse := 1 / unit
		for i, v := range x {
			x[i] = float64(v * inverse)
		}
	} else {
		for i, v := range x {
			d := v / unit
			x[i] = oddFold(d, math.FMA(-d, unit, v))
		}
	}
	if l.q.kind == quickNearest || l.q.kind == quickNative32 {
		l.q.block(x, nil, 0, n)
		return
	}
	for i, v := range x {
		var w uint32
		if word != nil {
			w = word[i]
		}
		l.q.one(x, i, v, w, n)
	}
}

// regular reports whether all of x are zero, regular or not finite.
func (l *fastLines) regular(x []float64) bool {
	ok := true
	for _, v := range x {
		m := math.Abs(v)
		ok = ok && (m >= regularLeast && m <= regularLargest || v == 0 || v-v != 0)
	}
	return ok
}

// divideReals is divide in exact reals.
func (l *fastLines) divideReals(x []float64, unit float64, word []uint32, n *Counts) {
	for i, v := range x {
		var w uint32
		if word != nil {
			w = word[i]
		}
		r, e := l.q.point.Round(ExactQuotient(v, unit), w)
		n.Count(e)
		x[i] = r
	}
}
