package trainer

import "ulpine/quant"

// frame is a tensor [samples, planes, h, w] with zeros around its elements and,
// for strided gradients, between them, so that reading a window of it never asks
// whether a position exists. Where nothing is added it is the tensor itself.
type frame[T quant.Element] struct {
	from         []T
	data         []T // [samples, planes, high, wide]
	planes, h, w int
	high, wide   int
	top, left    int    // place of element (0, 0)
	sh, sw       int    // distance between elements
	void         []bool // of one plane: holds no element; nil where every place holds one
}

// paddedFrame surrounds a convolution's input by its padding.
func paddedFrame[T quant.Element](from []T, g *window) *frame[T] {
	f := &frame[T]{
		from: from, planes: g.c, h: g.h, w: g.w,
		high: g.h + 2*g.ph, wide: g.w + 2*g.pw, top: g.ph, left: g.pw, sh: 1, sw: 1,
	}
	return f.allocate()
}

// dilatedFrame spreads a convolution's output gradient [samples, units, oh, ow]
// by the strides and surrounds it so that every kernel position of every input
// finds a place: kernel position (kr, kc) of input (y, x) is at row y + (kh-1 - kr)
// dh, column x + (kw-1 - kc) dw.
func dilatedFrame[T quant.Element](from []T, units int, g *window) *frame[T] {
	high, wide := g.reach()
	f := &frame[T]{
		from: from, planes: units, h: g.oh, w: g.ow,
		high: g.h + high - 1, wide: g.w + wide - 1,
		top: high - 1 - g.ph, left: wide - 1 - g.pw, sh: g.sh, sw: g.sw,
	}
	return f.allocate()
}

// allocate makes the memory and marks its voids.
func (f *frame[T]) allocate() *frame[T] {
	if f.high == f.h && f.wide == f.w {
		f.data = f.from
		return f
	}
	f.data = make([]T, len(f.from)/(f.h*f.w)*f.plane())
	f.void = make([]bool, f.plane())
	for i := range f.void {
		f.void[i] = true
	}
	for y := range f.h {
		for x := range f.w {
			f.void[f.place(y)+x*f.sw] = false
		}
	}
	return f
}

// plane is the size of one plane.
func (f *frame[T]) plane() int { return f.high * f.wide }

// place is the place of element (y, 0) in a plane.
func (f *frame[T]) place(y int) int { return (f.top+y*f.sh)*f.wide + f.left }

// fill copies the leading samples of the tensor into their places.
func (f *frame[T]) fill(samples int) {
	if f.void == nil {
		return
	}
	for p := range samples * f.planes {
		from, to := f.from[p*f.h*f.w:], f.data[p*f.plane():][:f.plane()]
		for y := range f.h {
			line, row := from[y*f.w:][:f.w], to[f.place(y):]
			if f.sw == 1 {
				copy(row, line)
				continue
			}
			for x, v := range line {
				row[x*f.sw] = v
			}
		}
	}
}
