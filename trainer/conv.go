package trainer

import (
	"fmt"
	"strconv"

	"ulpine/quant"
)

// Convolutions take dilation (distance of neighbouring elements of a kernel, 1) and
// groups (1): output channels and input channels are cut into that many groups in
// turn, and an output channel sums over the input channels of its own group. As
// many groups as input channels make a depthwise convolution.

// conv1dKind slides kernels along the length of [channels, length].
var conv1dKind = kind{
	name: "conv1d", usage: "conv1d out=6 width=9 stride=2 pad=0 dilation=1 groups=1", parse: parseConv1d,
	build32: newConv[float32], build64: newConv[float64],
}

// conv2dKind slides kernels over [channels, rows, columns]; size, stride, pad
// and dilation are one number, or rows x columns as in size=3x5.
var conv2dKind = kind{
	name: "conv2d", usage: "conv2d out=8 size=5 stride=1 pad=2 dilation=1 groups=1", parse: parseConv2d,
	build32: newConv[float32], build64: newConv[float64],
}

func parseConv1d(o *options, s *Spec) error {
	out, err := o.number("out", 1, -1)
	if err != nil {
		return err
	}
	g, err := readWindow(o, s.In, "width", 1, true)
	if err != nil {
		return err
	}
	s.Name = fmt.Sprintf("conv1d out=%d width=%d stride=%d pad=%d", out, g.kw, g.sw, g.pw)
	s.Out = []int{out, g.ow}
	return completeConv(o, s, g, []int{g.kw})
}

func parseConv2d(o *options, s *Spec) error {
	out, err := o.number("out", 1, -1)
	if err != nil {
		return err
	}
	g, err := readWindow(o, s.In, "size", 1, true)
	if err != nil {
		return err
	}
	s.Name = fmt.Sprintf("conv2d out=%d size=%s stride=%s pad=%s", out, pairText(g.kh, g.kw), pairText(g.sh, g.sw), pairText(g.ph, g.pw))
	s.Out = []int{out, g.oh, g.ow}
	return completeConv(o, s, g, []int{g.kh, g.kw})
}

// readWindow reads kernel, stride and, if padded, pad for an input of one or two
// spatial dimensions. stride defaults to strideFallback, or to the kernel if
// that is 0. In one dimension the kernel's key is as given; a pool's is "size".
func readWindow(o *options, in []int, key string, strideFallback int, padded bool) (g window, err error) {
	one := len(in) == 2
	if o.kind.name == conv1d && !one {
		return g, fmt.Errorf("conv1d needs an input of channels x length; give a plain signal one channel, 1x%d", volume(in))
	}
	if len(in) != 2 && len(in) != 3 || o.kind.name == conv2d && one {
		return g, fmt.Errorf("%s needs an input of channels x rows x columns%s", o.kind.name, poolShapes(o.kind.name))
	}
	g.c, g.h, g.w = in[0], 1, in[len(in)-1]
	if !one {
		g.h = in[1]
	}
	if g.kh, g.kw, err = o.pair(key, 1, -1, !one); err != nil {
		return g, err
	}
	if g.sh, g.sw, err = o.pair("stride", 1, strideFallback, !one); err != nil {
		return g, err
	}
	if g.sh == 0 { // not given: as far as the kernel reaches
		g.sh, g.sw = g.kh, g.kw
	}
	if padded {
		if g.ph, g.pw, err = o.pair("pad", 0, 0, !one); err != nil {
			return g, err
		}
		if g.dh, g.dw, err = o.pair("dilation", 1, 1, !one); err != nil {
			return g, err
		}
	}
	if one {
		g.kh, g.sh, g.ph, g.dh = 1, 1, 0, 1
	}
	if err = g.place(one); err != nil {
		return g, err
	}
	return g, g.check()
}

// The names are constants besides the rows of the table, because the rows'
// parsers ask for them.
const (
	conv1d = "conv1d"
	conv2d = "conv2d"
)

// poolShapes adds what a pool takes besides.
func poolShapes(kind string) string {
	if kind == conv2d {
		return "; for channels x length use conv1d"
	}
	return " or of channels x length"
}

// convParams are the shapes of kernel and bias: [out, in, ...] and [out].
func convParams(out int, rest []int) []ParamSpec {
	return []ParamSpec{{Name: "weight", Shape: append([]int{out}, rest...), FanIn: volume(rest)}, {Name: "bias", Shape: []int{out}}}
}

// completeConv reads the groups and fills in what follows from the geometry.
func completeConv(o *options, s *Spec, g window, kernel []int) error {
	groups, err := o.number("groups", 1, 1)
	if err != nil {
		return err
	}
	out := s.Out[0]
	if g.c%groups != 0 || out%groups != 0 {
		return fmt.Errorf("groups=%d does not divide %d input channels and %d output channels; use a common divisor of both", groups, g.c, out)
	}
	if dh, dw := g.apart(); dh > 1 || dw > 1 {
		if len(kernel) == 1 {
			dh = dw // one number along a length
		}
		s.Name += " dilation=" + pairText(dh, dw)
	}
	if groups > 1 {
		s.Name += " groups=" + itoa(groups)
	}
	s.window, s.groups = g, groups
	s.Params = convParams(out, append([]int{g.c / groups}, kernel...))
	terms, back := g.c/groups*g.size(), out/groups*g.size()
	s.Sums = Lengths{Forward: terms, InputGradient: back, WeightGradient: g.outer(), BiasGradient: g.outer()}
	work := uint64(out) * uint64(terms) * uint64(g.outer())
	s.MACs = Work{Forward: work, InputGradient: uint64(g.c) * uint64(back) * uint64(g.inner()), WeightGradient: work}
	s.Points = productPoints
	return nil
}

// newConv binds the products of a convolution, whose patches are written
// straight into the multiplier's panels. One sum runs over input channel, kernel
// row, kernel column; the input gradient's over output channel, kernel row,
// kernel column; the weight gradient's over sample, output row, output column.
func newConv[T quant.Element](b *bench[T]) (layer[T], error) {
	g := &b.spec.window
	units, groups := b.spec.Out[0], b.spec.groups
	if err := checkFrame(g, max(units, g.c), b.batch); err != nil {
		return nil, err
	}
	s := shape{units: units, terms: g.c / groups * g.size(), channels: g.c, inner: g.inner(), outer: g.outer(), groups: groups}
	return asLayer(newLinear(b, s, func(l *linear[T]) bindings[T] {
		return bindConv(l, g, units, b.batch)
	}))
}

// bindConv frames the operands. The weight gradient reads the frame of the
// forward pass unless its operand is a tensor of its own.
func bindConv[T quant.Element](l *linear[T], g *window, units, batch int) bindings[T] {
	channels, each := g.c/l.groups, units/l.groups // of one group
	terms, back := channels*g.size(), each*g.size()
	x := paddedFrame(l.operand, g)
	again := x
	if l.again.activation != nil {
		again = paddedFrame(l.activation, g)
	}
	dy := dilatedFrame(l.belowGradient, units, g)
	places, kernels, turned, under := outputs(x, g, batch), kernel(x, g), turnedKernel(dy, g), inputs(dy, g, batch)
	b := bindings[T]{
		frames:     frames[T]{forward: x, weight: again, below: dy},
		belowLeft:  quant.Matrix[T]{Data: make([]T, g.c*back), Row: back, Col: 1},
		belowTerms: back,
		rearrange: func(dst, weight []T) {
			size := each * terms
			for k := range l.groups {
				groupByExample(dst[k*size:][:size], weight[k*size:][:size], channels, each, g.size())
			}
		},
	}
	for k := range l.groups {
		of, back := kernels[k*terms:][:terms], turned[k*back:][:back]
		b.forward = append(b.forward, &windowed[T]{frame: x, row: of, column: places})
		b.weight = append(b.weight, &windowed[T]{frame: again, row: places, column: of})
		b.below = append(b.below, &windowed[T]{frame: dy, row: back, column: under})
	}
	return b
}

// pairText writes two numbers as one where they are equal.
func pairText(a, b int) string {
	if a == b {
		return itoa(a)
	}
	return itoa(a) + "x" + itoa(b)
}

func itoa(n int) string { return strconv.Itoa(n) }
