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

// Pack implements quant.Columns.
func (b *windowed[T]) Pack(dst []T, width, k0, k1, j0, j1 int) {
	quant.PackTable(dst, b.frame.data, b.row[k0:k1], b.column[j0:j1], width)
}

// Padded implements quant.Columns.
func (b *windowed[T]) Padded(k, j int) bool {
	void := b.frame.void
	return void != nil && void[int(b.row[k]+b.column[j])%len(void)]
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
