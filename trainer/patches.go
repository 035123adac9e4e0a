package trainer

import "ulpine/quant"

// patches is the right-hand operand of a convolution's forward product and of an
// average pool's sums: B[(c, kr, kc), (n, oy, ox)] = x[n, c, oy sh + kr - ph,
// ox sw + kc - pw], padding where that lies outside. x is [n, c, h, w].
type patches[T quant.Element] struct {
	x []T
	g window
}

// Pack implements quant.Columns.
func (b *patches[T]) Pack(dst []T, width, k0, k1, j0, j1 int) {
	g := &b.g
	n0, oy0, ox0 := unravel(j0, g.oh, g.ow)
	for k := k0; k < k1; k++ {
		row := dst[(k-k0)*width:][:width]
		clear(row[j1-j0:])
		row = row[:j1-j0]
		c, kr, kc := unravel(k, g.kh, g.kw)
		n, oy, ox := n0, oy0, ox0
		for len(row) > 0 { // one output row of one example at a time
			m := min(len(row), g.ow-ox)
			if y := oy*g.sh + kr - g.ph; y >= 0 && y < g.h {
				line := b.x[((n*g.c+c)*g.h+y)*g.w:][:g.w]
				gather(row[:m], line, ox*g.sw+kc-g.pw, g.sw)
			} else {
				clear(row[:m])
			}
			row, ox = row[m:], 0
			if oy++; oy == g.oh {
				oy, n = 0, n+1
			}
		}
	}
}

// Padded implements quant.Columns.
func (b *patches[T]) Padded(k, j int) bool {
	g := &b.g
	_, kr, kc := unravel(k, g.kh, g.kw)
	_, oy, ox := unravel(j, g.oh, g.ow)
	return g.outside(oy*g.sh+kr-g.ph, ox*g.sw+kc-g.pw)
}

// turnedPatches is the same operand turned round, for the weight gradient:
// B[(n, oy, ox), (c, kr, kc)].
type turnedPatches[T quant.Element] struct {
	x []T
	g window
}

// Pack implements quant.Columns.
func (b *turnedPatches[T]) Pack(dst []T, width, k0, k1, j0, j1 int) {
	g := &b.g
	c0, kr0, kc0 := unravel(j0, g.kh, g.kw)
	n, oy, ox := unravel(k0, g.oh, g.ow)
	for k := k0; k < k1; k++ {
		row := dst[(k-k0)*width:][:width]
		clear(row[j1-j0:])
		row = row[:j1-j0]
		c, kr, kc := c0, kr0, kc0
		top, left := oy*g.sh-g.ph, ox*g.sw-g.pw
		for len(row) > 0 { // one kernel row of one channel at a time
			m := min(len(row), g.kw-kc)
			if y := top + kr; y >= 0 && y < g.h {
				gather(row[:m], b.x[((n*g.c+c)*g.h+y)*g.w:][:g.w], left+kc, 1)
			} else {
				clear(row[:m])
			}
			row, kc = row[m:], 0
			if kr++; kr == g.kh {
				kr, c = 0, c+1
			}
		}
		if ox++; ox == g.ow {
			ox, oy = 0, oy+1
			if oy == g.oh {
				oy, n = 0, n+1
			}
		}
	}
}

// Padded implements quant.Columns.
func (b *turnedPatches[T]) Padded(k, j int) bool {
	return (&patches[T]{g: b.g}).Padded(j, k)
}

// holes is the right-hand operand of a convolution's input gradient:
// B[(o, kr, kc), (n, y, x)] = dy[n, o, oy, ox] where the output (oy, ox) met the
// input (y, x) with kernel position (kr, kc); elsewhere, between strides and
// beyond the edge, there is no term. dy is [n, units, oh, ow].
type holes[T quant.Element] struct {
	dy    []T
	units int
	g     window
}

// Pack implements quant.Columns.
func (b *holes[T]) Pack(dst []T, width, k0, k1, j0, j1 int) {
	g := &b.g
	n0, y0, x0 := unravel(j0, g.h, g.w)
	for k := k0; k < k1; k++ {
		row := dst[(k-k0)*width:][:width]
		clear(row[j1-j0:])
		row = row[:j1-j0]
		o, kr, kc := unravel(k, g.kh, g.kw)
		n, y, x := n0, y0, x0
		for len(row) > 0 { // one input row of one example at a time
			m := min(len(row), g.w-x)
			if oy, ok := origin(y+g.ph-kr, g.sh, g.oh); ok {
				line := b.dy[((n*b.units+o)*g.oh+oy)*g.ow:][:g.ow]
				spread(row[:m], line, x+g.pw-kc, g.sw)
			} else {
				clear(row[:m])
			}
			row, x = row[m:], 0
			if y++; y == g.h {
				y, n = 0, n+1
			}
		}
	}
}

// Padded implements quant.Columns.
func (b *holes[T]) Padded(k, j int) bool {
	g := &b.g
	_, kr, kc := unravel(k, g.kh, g.kw)
	_, y, x := unravel(j, g.h, g.w)
	_, rows := origin(y+g.ph-kr, g.sh, g.oh)
	_, columns := origin(x+g.pw-kc, g.sw, g.ow)
	return !rows || !columns
}

// outside reports whether a position lies in the padding.
func (g *window) outside(y, x int) bool { return y < 0 || y >= g.h || x < 0 || x >= g.w }

// origin is the output place that starts at distance at from the first one, if
// there is one: at must be a multiple of the stride within the output.
func origin(at, stride, places int) (int, bool) {
	if at < 0 || at%stride != 0 {
		return 0, false
	}
	return at / stride, at/stride < places
}

// unravel takes a row-major index of [.., rows, columns] apart.
func unravel(index, rows, columns int) (outer, row, column int) {
	rest := index / columns
	return rest / rows, rest % rows, index - rest*columns
}

// gather copies line[at + i stride] to dst[i], zero where that lies outside.
func gather[T quant.Element](dst, line []T, at, stride int) {
	first := 0
	if at < 0 {
		first = min((stride-1-at)/stride, len(dst))
	}
	end := first
	if at < len(line) {
		end = max(first, min((len(line)-at+stride-1)/stride, len(dst)))
	}
	clear(dst[:first])
	switch {
	case first == end: // nothing but padding
	case stride == 1:
		copy(dst[first:end], line[at+first:])
	default:
		for i := first; i < end; i++ {
			dst[i] = line[at+i*stride]
		}
	}
	clear(dst[end:])
}

// spread is the reverse: dst[i] = line[(at + i) / stride] where stride divides
// at + i and the place exists, zero elsewhere.
func spread[T quant.Element](dst, line []T, at, stride int) {
	if stride == 1 {
		gather(dst, line, at, 1)
		return
	}
	clear(dst)
	place := max(0, (at+stride-1)/stride)
	for i := place*stride - at; i < len(dst) && place < len(line); i += stride {
		dst[i] = line[place]
		place++
	}
}
