package kernel

import (
	"math/rand/v2"
	"testing"
)

// TestPackMatrix: packed rectangles of matrices of all strides equal their elements,
// and nothing beyond is written.
func TestPackMatrix(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 12))
	for range 400 {
		terms, columns := 1+r.IntN(50), 1+r.IntN(50)
		pad := r.IntN(3)
		row, col := columns+pad, 1
		switch r.IntN(3) {
		case 0:
			row, col = 1, terms+pad
		case 1:
			row, col = 2*columns+pad, 2
		}
		data := make([]float32, (terms-1)*row+(columns-1)*col+1)
		for i := range data {
			data[i] = r.Float32()
		}
		k0, j0 := r.IntN(terms), r.IntN(columns)
		k1, j1 := k0+1+r.IntN(terms-k0), j0+1+r.IntN(columns-j0)
		width := j1 - j0 + r.IntN(4)
		space := make([]float32, (k1-k0)*width+9)
		for i := range space {
			space[i] = guard
		}
		dst := space[:(k1-k0)*width]
		PackMatrix(dst, data, row, col, width, k0, k1, j0, j1)
		for i, v := range dst {
			k, j := k0+i/width, j0+i%width
			want := float32(0)
			if j < j1 {
				want = data[k*row+j*col]
			}
			if v != want {
				t.Fatalf("strides %d %d, rectangle %d..%d x %d..%d, width %d: (%d,%d) is %v, want %v", row, col, k0, k1, j0, j1, width, k, j, v, want)
			}
		}
		for _, v := range space[len(dst):] {
			if v != guard {
				t.Fatal("written beyond the rectangle")
			}
		}
	}
}
