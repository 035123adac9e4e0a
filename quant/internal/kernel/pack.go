package kernel

import "math"

// pairsOf is the number of pairs of rows that hold n rows; the last may hold a row
// of zeros.
func pairsOf(n int) int { return (n + 1) / 2 }

// packRows writes the rows x terms matrix a times 2^scale by pairs of rows:
// dst[(i/2*terms + k)*2 + i%2].
func packRows[L, T lanes](l *loops, dst []L, a []T, row, col, rows, terms, scale int) {
	factor := L(math.Ldexp(1, scale))
	for i := 0; i < rows; i += 2 {
		to := dst[i*terms:][:2*terms]
		first, second := a[i*row:], a[i*row:]
		last := i+1 == rows
		if !last {
			second = a[(i+1)*row:]
		}
		if to32, ok := any(to).([]float32); ok && col == 1 && !last {
			l.interleaved(to32, any(first[:terms]).([]float32), any(second[:terms]).([]float32), float32(factor))
			continue
		}
		for k := range terms {
			to[2*k], to[2*k+1] = L(first[k*col])*factor, L(second[k*col])*factor
		}
		if last {
			for k := range terms {
				to[2*k+1] = 0
			}
		}
	}
}

// measureRows returns the span of the finite values of A, and whether all are finite.
func (m *Multiplier) measureRows() (Span, bool) {
	p := m.p
	e := noExtent
	rows, terms, row, col := p.I, p.K, p.ARow, p.ACol
	if p.ARow == 1 {
		rows, terms, row, col = p.K, p.I, p.ACol, 1
	}
	for i := range rows {
		x := p.A[i*row:]
		if col == 1 {
			e.merge(m.loops.extentOf(x[:terms]))
			continue
		}
		for k := range terms {
			e.add(math.Float32bits(x[k*col]))
		}
	}
	finite := e.greatest < exponentMask32
	if !finite {
		e = noExtent
		for i := range p.I {
			for k := range p.K {
				addFinite(&e, p.A[i*p.ARow+k*p.ACol])
			}
		}
	}
	return e.span(), finite
}

// spanOf returns the span of the finite values of x.
func (l *loops) spanOf(x []float32) Span {
	e := l.extentOf(x)
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
