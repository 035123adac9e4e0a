package quant

// ParseFormat returns the format a plan's word names: binary16, fp16, bfloat16,
// bf16, binary32, fp32, binary64, fp64, E4M3, E5M2, EeMm, ...
func ParseFormat(name string) (Format, error) { panic("pending") }

// RoundSlice writes R[p](src[i]) to dst. Element i is number first+i of the
// tensor for the random bits of d. dst and src may be the same slice. n may be nil.
func RoundSlice[D, S Element](dst []D, src []S, p *Point, d Draws, first uint64, n *Counts) {
	panic("pending")
}

// ScaleSlice writes R[p](alpha src[i]), the product exact, to dst.
func ScaleSlice[D, S Element](dst []D, alpha float64, src []S, p *Point, d Draws, n *Counts) {
	panic("pending")
}

// AddSlice writes R[p](a[i] + b[i]), the sum exact, to dst.
func AddSlice[D, A, B Element](dst []D, a []A, b []B, p *Point, d Draws, n *Counts) { panic("pending") }

// SubSlice writes R[p](a[i] - b[i]), the difference exact, to dst.
func SubSlice[D, A, B Element](dst []D, a []A, b []B, p *Point, d Draws, n *Counts) { panic("pending") }

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

// Pack implements Columns: a matrix has no padding.
func (m Matrix[T]) Pack(dst []T, width, k0, k1, j0, j1 int) { panic("pending") }

// Padded implements Columns.
func (Matrix[T]) Padded(k, j int) bool { return false }

// Streams are the draws of the row table R[k,i] and of the column table V[k,j]
// of one rounding point inside a sum.
type Streams struct{ Row, Column Draws }

// Product is one product of matrices C[i,j] = sum over k of A[i,k] B[k,j].
type Product[T Element] struct {
	I, J, K int
	A       Matrix[T]
	B       Columns[T]
	C       []T     // I x J, row-major
	Bias    []T     // nil, or I values added to the finished sums of their row
	Terms   Streams // random bits of the product's rounding
	Sums    Streams // random bits of the additions
	FirstJ  uint64  // number of column 0 in the column tables
}

// Multiplier forms products of matrices in one accumulation. It owns scratch
// memory and serves one goroutine at a time.
type Multiplier[T Element] struct{}

// NewMultiplier checks that T can hold the results of acc and chooses the kernel.
func NewMultiplier[T Element](acc Accumulate) (*Multiplier[T], error) { panic("pending") }

// Mul forms the product. products and sums may be nil.
func (m *Multiplier[T]) Mul(p Product[T], products, sums *Counts) { panic("pending") }

// SumSlice forms the sum of terms without products: bias gradients, statistics.
// One sum for every row i of an I x K strided matrix, in acc.Order; acc.Product
// is not used.
func (m *Multiplier[T]) SumRows(dst []T, terms Matrix[T], rows, k int, d Streams, sums *Counts) {
	panic("pending")
}
