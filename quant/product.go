package quant

import "ulpine/quant/internal/kernel"

// Columns yields the right-hand operand of a product by rectangles, so that a
// convolution's patches need never be materialised.
type Columns[T Element] interface {
	// Pack writes B[k, j] for k0 <= k < k1, j0 <= j < j1 to
	// dst[(k-k0)*width + (j-j0)], zero for padded terms; columns beyond j1 up
	// to width are zero.
	Pack(dst []T, width, k0, k1, j0, j1 int)
	// Padded reports whether term k of column j is padding: it adds nothing and
	// draws nothing, even where the other operand is not finite.
	Padded(k, j int) bool
}

// Matrix is a strided view: element (r, c) is Data[r*Row + c*Col].
type Matrix[T Element] struct {
	Data     []T
	Row, Col int
}

// At returns element (r, c).
func (m Matrix[T]) At(r, c int) T { return m.Data[r*m.Row+c*m.Col] }

// Pack implements Columns: a matrix has no padding.
func (m Matrix[T]) Pack(dst []T, width, k0, k1, j0, j1 int) {
	if to, ok := any(dst).([]float32); ok {
		kernel.PackMatrix(to, any(m.Data).([]float32), m.Row, m.Col, width, k0, k1, j0, j1)
		return
	}
	for k := k0; k < k1; k++ {
		row := dst[(k-k0)*width:][:width]
		for j := j0; j < j1; j++ {
			row[j-j0] = m.Data[k*m.Row+j*m.Col]
		}
		clear(row[j1-j0:])
	}
}

// PackTable packs columns of a table of places, as convolutions have them: element
// (k, j) is data[rows[k] + columns[j]]. It writes dst[k*width + j], and zero for
// columns from len(columns) up to width.
func PackTable[T Element](dst, data []T, rows, columns []int32, width int) {
	if to, ok := any(dst).([]float32); ok {
		kernel.PackTable(to, any(data).([]float32), rows, columns, width)
		return
	}
	for k, at := range rows {
		to := dst[k*width:][:width]
		for j, c := range columns {
			to[j] = data[at+c]
		}
		clear(to[len(columns):])
	}
}

// Padded implements Columns.
func (Matrix[T]) Padded(k, j int) bool { return false }

// Streams are the draws of the row table R[k,i] and of the column table V[k,j]
// of one rounding point inside a sum.
type Streams struct{ Row, Column Draws }

// Word returns the random word of addition k of result (i, j), i and j counted as the
// tables count them; only its top 16 bits are random, the others are zero.
func (s Streams) Word(k, i, j uint32) uint32 {
	return mix(s.Row.Lane(k, i), s.Column.Lane(k, j)) << 16
}

// mix combines a row word and a column word into 16 random bits: the sum of the
// products of their low and high halves, the row word's low half forced odd,
// modulo 2^16. Sums and products of 16-bit halves agree modulo 2^16 whether the
// halves are read as signed or not.
func mix(r, v uint32) uint32 { return halves(r|1, v) }

// halves is mix with the row word's low half odd already; a and b may change places.
func halves(a, b uint32) uint32 { return (a*b + (a>>16)*(b>>16)) & 0xffff }

// Product is one product of matrices C[i,j] = sum over k of A[i,k] B[k,j].
type Product[T Element] struct {
	I, J, K int
	A       Matrix[T]
	B       Columns[T]
	C       []T       // I x J, row-major
	Scale   []float64 // nil, or I factors that multiply the finished sums of their row once, before the bias
	Bias    []T       // nil, or I values added to the finished sums of their row
	Terms   Streams   // random bits of the product's rounding
	Sums    Streams   // random bits of the additions
	FirstJ  uint64    // number of column 0 in the column tables

	// A part of a shared product, see share.go: its columns, and the number of row 0
	// in the row tables. Mul sets them for a whole product.
	from, to int
	firstI   uint32
}

// check panics when the shapes do not fit one another.
func (p *Product[T]) check() {
	switch {
	case p.I < 0 || p.J < 0 || p.K < 0:
		panic("quant: product with a negative dimension")
	case len(p.C) < p.I*p.J:
		panic("quant: the result of a product is shorter than I x J")
	case p.Bias != nil && len(p.Bias) < p.I:
		panic("quant: fewer than I biases")
	case p.Scale != nil && len(p.Scale) < p.I:
		panic("quant: fewer than I scales")
	case p.FirstJ+uint64(p.J) > 1<<32:
		panic("quant: column numbers beyond 2^32")
	case p.K >= 1<<25:
		panic("quant: sum of 2^25 terms or more") // terms and tree nodes have numbers below 2^26
	}
}
