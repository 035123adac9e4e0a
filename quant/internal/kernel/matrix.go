package kernel

// PackMatrix packs columns of a strided matrix: element (k, j) is
// data[k*row + j*col]. It writes dst[(k-k0)*width + (j-j0)], and zero for columns
// from j1 up to width.
func PackMatrix(dst, data []float32, row, col, width, k0, k1, j0, j1 int) {
	switch {
	case col == 1:
		for k := k0; k < k1; k++ {
			to := dst[(k-k0)*width:][:width]
			clear(to[copy(to, data[k*row+j0:k*row+j1]):])
		}
	case row == 1:
		packTransposed(dst, data, col, width, k0, k1, j0, j1)
	default:
		for k := k0; k < k1; k++ {
			to := dst[(k-k0)*width:][:width]
			for j := j0; j < j1; j++ {
				to[j-j0] = data[k*row+j*col]
			}
			clear(to[j1-j0:])
		}
	}
}

// packTransposed packs columns that lie contiguous in memory, col apart.
func packTransposed(dst, data []float32, col, width, k0, k1, j0, j1 int) {
	const block = 8
	transpose := Sets[0].loops.transpose
	n, j := k1-k0, j0
	if blocks := n / block; transpose != nil && blocks > 0 {
		for ; j+block <= j1; j += block {
			from := data[j*col+k0:]
			transpose(dst[j-j0:], from, width, col, blocks)
			for k := blocks * block; k < n; k++ {
				to := dst[k*width+j-j0:][:block]
				for i := range to {
					to[i] = from[i*col+k]
				}
			}
		}
	}
	for ; j < j1; j++ {
		from := data[j*col+k0:][:n]
		for k, v := range from {
			dst[k*width+j-j0] = v
		}
	}
	if j1-j0 < width {
		for k := range n {
			clear(dst[k*width+j1-j0:][:width-(j1-j0)])
		}
	}
}
