package trainer

import "fmt"

// window is the geometry of a convolution or a pool: a kernel of kh x kw that
// moves over a plane of h x w, padded by ph rows and pw columns of nothing on
// each side, in strides of sh and sw. Neighbouring elements of a kernel lie dh rows
// and dw columns apart (0 counts as 1). In one dimension everything vertical is 1
// (padding 0).
type window struct {
	c, h, w int // channels, rows, columns of the input
	kh, kw  int
	sh, sw  int
	ph, pw  int
	dh, dw  int
	oh, ow  int // rows and columns of the output
}

// inner and outer are the numbers of positions of one channel, below and above.
func (g *window) inner() int { return g.h * g.w }
func (g *window) outer() int { return g.oh * g.ow }

// size is the number of positions of the kernel.
func (g *window) size() int { return g.kh * g.kw }

// apart is the distance of neighbouring elements of the kernel, along each axis.
func (g *window) apart() (rows, columns int) { return max(1, g.dh), max(1, g.dw) }

// reach is how many rows and columns the kernel covers, gaps included.
func (g *window) reach() (rows, columns int) {
	dh, dw := g.apart()
	return (g.kh-1)*dh + 1, (g.kw-1)*dw + 1
}

// place computes the output's extent, or says why there is none.
func (g *window) place(oneDimension bool) error {
	var err error
	high, wide := g.reach()
	if g.ow, err = extent("length", g.w, wide, g.sw, g.pw); err != nil || oneDimension {
		g.oh = 1
		return err
	}
	if g.ow, err = extent("width", g.w, wide, g.sw, g.pw); err != nil {
		return err
	}
	g.oh, err = extent("height", g.h, high, g.sh, g.ph)
	return err
}

// extent is the number of places of a kernel along one axis.
func extent(axis string, in, kernel, stride, pad int) (int, error) {
	room := in + 2*pad - kernel
	if room < 0 {
		short := (kernel - in + 1) / 2
		return 0, fmt.Errorf("output %s (%d + 2*%d - %d)/%d + 1 is below 1: the kernel's reach of %d does not fit the padded input of %d; use a kernel that reaches over at most %d or pad=%d",
			axis, in, pad, kernel, stride, kernel, in+2*pad, in+2*pad, short)
	}
	return room/stride + 1, nil
}

// check finds the mistakes of padding that fit but make no sense: a kernel that
// sees padding only.
func (g *window) check() error {
	high, wide := g.reach()
	if g.ph >= high && g.ph > 0 {
		return fmt.Errorf("pad=%d is not smaller than the kernel's %d rows: some outputs would see padding only; use pad=%d or less", g.ph, high, high-1)
	}
	if g.pw >= wide && g.pw > 0 {
		return fmt.Errorf("pad=%d is not smaller than the kernel's %d columns: some outputs would see padding only; use pad=%d or less", g.pw, wide, wide-1)
	}
	return nil
}
