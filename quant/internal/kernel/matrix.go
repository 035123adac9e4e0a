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

// PackTable packs columns of a table of places: element (k, j) is
// data[rows[k] + columns[j]]. It writes dst[k*width + j], and zero for columns from
// len(columns) up to width.
func PackTable(dst, data []float32, rows, columns []int32, width int) {
	if len(rows) == 0 {
		return
	}
	l := &Sets[0].loops
	j := 0
	if l.copyColumns != nil && within(data, rows, columns) {
		const block = 8
		for ; j+block <= len(columns); j += block {
			c := columns[j:][:block]
			if neighbours(c) {
				l.copyColumns(dst[j:], data[c[0]:], rows, width)
			} else {
				l.gatherColumns(dst[j:], data, rows, c, width)
			}
		}
	}
	if j == width {
		return
	}
	rest := columns[j:]
	for k, at := range rows {
		to := dst[k*width+j:][:width-j]
		from := data[at:]
		for i, c := range rest {
			to[i] = from[c]
		}
		clear(to[len(rest):])
	}
}

// neighbours reports whether places follow one another.
func neighbours(c []int32) bool {
	for i, at := range c {
		if at != c[0]+int32(i) {
			return false
		}
	}
	return true
}

// within reports whether all places of a table lie in data, which the assembly does
// not check.
func within(data []float32, rows, columns []int32) bool {
	low, high := span32(rows)
	first, last := span32(columns)
	return low >= 0 && first >= 0 && int(high)+int(last) < len(data)
}

// span32 returns the least and the greatest number.
func span32(x []int32) (low, high int32) {
	for i, v := range x {
		if i == 0 || v < low {
			low = v
		}
		if i == 0 || v > high {
			high = v
		}
	}
	return low, high
}
