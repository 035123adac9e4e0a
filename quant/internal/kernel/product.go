package kernel

import "ulpine/quant/random"

// Columns yields the right-hand operand of a product by rectangles.
type Columns[T lanes] interface {
	// Pack writes B[k, j] for k0 <= k < k1, j0 <= j < j1 to
	// dst[(k-k0)*width + (j-j0)], zero for padded terms and for columns beyond j1.
	Pack(dst []T, width, k0, k1, j0, j1 int)
}

// Streams are the random words of the additions: word k of lane i for the rows, of
// lane j for the columns.
type Streams struct{ Row, Column random.Draws }

// Product is one product of matrices C[i,j] = sum over k of A[i,k] B[k,j].
type Product[T lanes] struct {
	I, J, K    int
	A          []T // A[i,k] is A[i*ARow + k*ACol]
	ARow, ACol int
	B          Columns[T]
	C          []T // I x J, row-major
	Bias       []T // nil, or I values added to the finished sums of their row
	Sums       Streams
	Terms      Streams // of the rounding of products
	FirstI     uint32  // number of row 0 among the lanes of Sums.Row and Terms.Row
	FirstJ     uint32  // number of column 0 among the lanes of Sums.Column and Terms.Column
	From, To   int     // the columns to form; To 0: all of them
	Padded     bool    // B has terms that add nothing, not even to NaN, and are packed as zeros
	Tally      *Tally  // takes the events of what is formed with care; may be nil
	OddColumns bool    // the low bit of the columns' words is set, instead of the rows'
}

// end is the column behind the last one to be formed.
func (p *Product[T]) end() int {
	if p.To == 0 {
		return p.J
	}
	return p.To
}
