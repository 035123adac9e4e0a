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
	j := packBlocks(dst, data, rows, columns, width)
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

// tableBlock is the number of columns that the assembly packs at a time.
const tableBlock = 8

// packBlocks packs the leading columns of a table as far as the assembly can, and
// returns how many. Blocks may overlap: a run of a few neighbours is copied together
// with what follows it in data, and the next block, further right, covers the excess.
// Reading lines whole costs a fraction of gathering elements.
func packBlocks(dst, data []float32, rows, columns []int32, width int) int {
	l := &Sets[0].loops
	n := len(columns)
	if l.copyColumns == nil || n < tableBlock {
		return 0
	}
	end, ok := within(data, rows, columns) // a row's columns reach into data up to here
	if !ok {
		return 0
	}
	const few = 3 // neighbours whose copies are no dearer than gathering
	for j := 0; j < n; {
		run := neighbours(columns[j:min(j+tableBlock, n)])
		if run == tableBlock || run >= few && j+tableBlock <= width && int(columns[j])+tableBlock <= end {
			l.copyColumns(dst[j:], data[columns[j]:], rows, width)
			j += run
			continue
		}
		j = min(j, n-tableBlock) // the last block may go back over packed columns
		l.gatherColumns(dst[j:], data, rows, columns[j:][:tableBlock], width)
		j += tableBlock
	}
	return n
}

// neighbours is the number of leading places that follow one another.
func neighbours(c []int32) int {
	for i, at := range c {
		if at != c[0]+int32(i) {
			return i
		}
	}
	return len(c)
}

// within reports whether all places of a table lie in data, which the assembly does
// not check, and the columns that all rows have there.
func within(data []float32, rows, columns []int32) (end int, ok bool) {
	low, high := span32(rows)
	first, last := span32(columns)
	end = len(data) - int(high)
	return end, low >= 0 && first >= 0 && int(last) < end
}

// span32 returns the least and the greatest number of at least one. Places mostly
// ascend, so its branches are foreseen.
func span32(x []int32) (low, high int32) {
	low, high = x[0], x[0]
	for _, v := range x {
		if v < low {
			low = v
		}
		if v > high {
			high = v
		}
	}
	return low, high
}
