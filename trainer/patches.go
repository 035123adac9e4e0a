package trainer

import (
	"fmt"
	"math"

	"ulpine/quant"
)

// windowed is a right-hand operand read from a frame through two tables:
//
//	B[k,j] = data[row[k] + column[j]]
//
// All operands of convolutions and the forward one of average pools have this
// form, because where a window lies and where an element lies in a window add up.
type windowed[T quant.Element] struct {
	frame       *frame[T]
	row, column []int32
}

// Pack implements quant.Columns. Columns whose places are neighbours are copied
// together: an output row of a convolution without stride, a kernel row.
func (b *windowed[T]) Pack(dst []T, width, k0, k1, j0, j1 int) {
	column := b.column[j0:j1]
	var list [maxStretches]stretch
	stretches := stretchesOf(&list, column)
	for k := k0; k < k1; k++ {
		row := dst[(k-k0)*width:][:width]
		clear(row[len(column):])
		src := b.frame.data[b.row[k]:]
		if stretches == nil {
			for i, at := range column {
				row[i] = src[at]
			}
			continue
		}
		for _, r := range stretches {
			copy(row[r.to:r.end], src[r.from:])
		}
	}
}

// Padded implements quant.Columns.
func (b *windowed[T]) Padded(k, j int) bool {
	void := b.frame.void
	return void != nil && void[int(b.row[k]+b.column[j])%len(void)]
}

// stretch is a sequence of columns whose places are neighbours.
type stretch struct{ to, end, from int32 }

// Copying pays from about five elements a stretch on.
const (
	maxStretches = 16
	leastStretch = 5
)

// stretchesOf lists the stretches of a table, nil where they are many or short.
func stretchesOf(list *[maxStretches]stretch, column []int32) []stretch {
	n := 0
	for i, at := range column {
		if n > 0 && at == list[n-1].from+list[n-1].end-list[n-1].to {
			list[n-1].end++
			continue
		}
		if n == maxStretches || n > 0 && i < n*leastStretch {
			return nil
		}
		list[n] = stretch{int32(i), int32(i) + 1, at}
		n++
	}
	return list[:n]
}

// outputs are the places of the windows (sample, oy, ox) of a frame of the input.
func outputs[T quant.Element](f *frame[T], g *window, samples int) []int32 {
	table := make([]int32, 0, samples*g.outer())
	for n := range samples {
		for oy := range g.oh {
			for ox := range g.ow {
				table = append(table, int32(n*f.planes*f.plane()+oy*g.sh*f.wide+ox*g.sw))
			}
		}
	}
	return table
}

// kernel are the places of the terms (c, kr, kc) within a window of the input.
func kernel[T quant.Element](f *frame[T], g *window) []int32 {
	table := make([]int32, 0, f.planes*g.size())
	dh, dw := g.apart()
	for c := range f.planes {
		for kr := range g.kh {
			for kc := range g.kw {
				table = append(table, int32(c*f.plane()+kr*dh*f.wide+kc*dw))
			}
		}
	}
	return table
}

// inputs are the places of the inputs (sample, y, x) in a dilated frame.
func inputs[T quant.Element](f *frame[T], g *window, samples int) []int32 {
	table := make([]int32, 0, samples*g.inner())
	for n := range samples {
		for y := range g.h {
			for x := range g.w {
				table = append(table, int32(n*f.planes*f.plane()+y*f.wide+x))
			}
		}
	}
	return table
}

// turnedKernel are the places of the terms (unit, kr, kc) seen from an input: the
// kernel turned round.
func turnedKernel[T quant.Element](f *frame[T], g *window) []int32 {
	table := make([]int32, 0, f.planes*g.size())
	dh, dw := g.apart()
	for u := range f.planes {
		for kr := range g.kh {
			for kc := range g.kw {
				table = append(table, int32(u*f.plane()+(g.kh-1-kr)*dh*f.wide+(g.kw-1-kc)*dw))
			}
		}
	}
	return table
}

// checkFrame refuses frames whose places 32 bits cannot number.
func checkFrame(g *window, planes, samples int) error {
	high, wide := g.reach()
	size := float64(g.h+2*high) * float64(g.w+2*wide) * float64(planes) * float64(samples)
	if size > math.MaxInt32 {
		return fmt.Errorf("a batch of %d examples takes %.3g values with its margins; use a smaller batch or fewer channels", samples, size)
	}
	return nil
}

// unravel takes a row-major index of [.., rows, columns] apart.
func unravel(index, rows, columns int) (outer, row, column int) {
	rest := index / columns
	return rest / rows, rest % rows, index - rest*columns
}
