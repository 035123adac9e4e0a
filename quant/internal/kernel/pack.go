package kernel

import "math"

// pairsOf is the number of pairs of rows that hold n rows; the last may hold a row
// of zeros.
func pairsOf(n int) int { return (n + 1) / 2 }

// packRows writes the rows x terms matrix a times 2^scale by pairs of rows:
// dst[(i/2*terms + k)*2 + i%2].
func packRows[L, T lanes](dst []L, a []T, row, col, rows, terms, scale int) {
	factor := L(math.Ldexp(1, scale))
	for i := 0; i < rows; i += 2 {
		to := dst[i*terms:][:2*terms]
		first := a[i*row:]
		if i+1 == rows {
			for k := range terms {
				to[2*k], to[2*k+1] = L(first[k*col])*factor, 0
			}
			continue
		}
		second := a[(i+1)*row:]
		for k := range terms {
			to[2*k], to[2*k+1] = L(first[k*col])*factor, L(second[k*col])*factor
		}
	}
}

// measureRows returns the span of A, and whether all of A is finite.
func measureRows(p *Product[float32]) Span {
	e := noExtent
	for i := range p.I {
		row := p.A[i*p.ARow:]
		if p.ACol == 1 {
			e.merge(measure(row[:p.K]))
			continue
		}
		for k := range p.K {
			e.add(math.Float32bits(row[k*p.ACol]))
		}
	}
	if e.greatest >= exponentMask32 {
		e = finiteExtent(p)
	}
	return e.span()
}

// finiteExtent is the extent of the finite values of A.
func finiteExtent(p *Product[float32]) extent {
	e := noExtent
	for i := range p.I {
		for k := range p.K {
			addFinite(&e, p.A[i*p.ARow+k*p.ACol])
		}
	}
	return e
}

// measurePanel returns the span of the finite values of packed columns.
func measurePanel(x []float32) Span {
	e := measure(x)
	if e.greatest >= exponentMask32 {
		e = noExtent
		for _, v := range x {
			addFinite(&e, v)
		}
	}
	return e.span()
}

func addFinite(e *extent, v float32) {
	if c := math.Float32bits(v); c&exponentMask32 != exponentMask32 {
		e.add(c)
	}
}

// measure returns the extent of all of x.
func measure(x []float32) extent {
	e := noExtent
	for _, v := range x {
		e.add(math.Float32bits(v))
	}
	return e
}

// widen converts binary32 numbers to binary64.
func widen(dst []float64, src []float32) {
	dst = dst[:len(src)]
	for i, v := range src {
		dst[i] = float64(v)
	}
}
