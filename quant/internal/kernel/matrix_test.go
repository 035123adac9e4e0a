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

// TestPackTable: packed tables equal their elements, and nothing beyond is written.
func TestPackTable(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 14))
	for round := range 1200 {
		data := make([]float32, 1+r.IntN(300))
		for i := range data {
			data[i] = r.Float32()
		}
		half := int32(len(data)+1) / 2
		rows, columns := make([]int32, r.IntN(40)), make([]int32, r.IntN(40))
		for i := range rows {
			rows[i] = r.Int32N(half)
		}
		for i := range columns {
			columns[i] = r.Int32N(half)
			if i > 0 && round%3 > 0 && columns[i-1]+1 < half && r.IntN(2+round%11) > 0 { // runs of two to twelve
				columns[i] = columns[i-1] + 1
			}
		}
		width := len(columns) + r.IntN(9)
		space := make([]float32, len(rows)*width+9)
		for i := range space {
			space[i] = guard
		}
		PackTable(space[:len(rows)*width], data, rows, columns, width)
		for k, at := range rows {
			for j := range width {
				want := float32(0)
				if j < len(columns) {
					want = data[at+columns[j]]
				}
				if got := space[k*width+j]; got != want {
					t.Fatalf("%d rows, %d columns, width %d: (%d,%d) is %v, want %v", len(rows), len(columns), width, k, j, got, want)
				}
			}
		}
		for _, v := range space[len(rows)*width:] {
			if v != guard {
				t.Fatal("written beyond the rectangle")
			}
		}
	}
}
