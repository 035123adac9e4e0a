package trainer

import (
	"fmt"
	"strconv"

	"ulpine/quant"
)

// conv1dKind slides kernels along the length of [channels, length].
var conv1dKind = kind{
	name: "conv1d", usage: "conv1d out=6 width=9 stride=2 pad=0", parse: parseConv1d,
	build32: newConv[float32], build64: newConv[float64],
}

// conv2dKind slides kernels over [channels, rows, columns]; size, stride and pad
// are one number, or rows x columns as in size=3x5.
var conv2dKind = kind{
	name: "conv2d", usage: "conv2d out=8 size=5 stride=1 pad=2", parse: parseConv2d,
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
	s.Params = convParams(out, []int{g.c, g.kw})
	s.window = g
	completeConv(s, out)
	return nil
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
	s.Params = convParams(out, []int{g.c, g.kh, g.kw})
	s.window = g
	completeConv(s, out)
	return nil
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
	}
	if one {
		g.kh, g.sh, g.ph = 1, 1, 0
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
	return []ParamSpec{{"weight", append([]int{out}, rest...), volume(rest)}, {"bias", []int{out}, 0}}
}

// completeConv fills in what follows from the geometry.
func completeConv(s *Spec, out int) {
	g := &s.window
	terms, back := g.c*g.size(), out*g.size()
	s.Sums = Lengths{Forward: terms, InputGradient: back, WeightGradient: g.outer(), BiasGradient: g.outer()}
	work := uint64(out) * uint64(terms) * uint64(g.outer())
	s.MACs = Work{Forward: work, InputGradient: uint64(g.c) * uint64(back) * uint64(g.inner()), WeightGradient: work}
	s.Points = parameterPoints
}

// newConv binds the products of a convolution, whose patches are written
// straight into the multiplier's panels. One sum runs over input channel, kernel
// row, kernel column; the input gradient's over output channel, kernel row,
// kernel column; the weight gradient's over sample, output row, output column.
func newConv[T quant.Element](b *bench[T]) (layer[T], error) {
	g := &b.spec.window
	units, terms := b.spec.Out[0], g.c*g.size()
	if err := checkFrame(g, max(units, g.c), b.batch); err != nil {
		return nil, err
	}
	return asLayer(newLinear(b, units, terms, g.c, g.inner(), g.outer(), func(l *linear[T]) bindings[T] {
		return bindConv(l, g, units, b.batch)
	}))
}

// bindConv frames the operands. The weight gradient reads the frame of the
// forward pass unless its operand is a tensor of its own.
func bindConv[T quant.Element](l *linear[T], g *window, units, batch int) bindings[T] {
	back := units * g.size()
	x := paddedFrame(l.below.value.data, g)
	again := x
	if l.set.WeightGradient.First != nil {
		again = paddedFrame(l.activation, g)
	}
	dy := dilatedFrame(l.belowGradient, units, g)
	places, terms := outputs(x, g, batch), kernel(x, g)
	return bindings[T]{
		forward:    &windowed[T]{frame: x, row: terms, column: places},
		weight:     &windowed[T]{frame: again, row: places, column: terms},
		below:      &windowed[T]{frame: dy, row: turnedKernel(dy, g), column: inputs(dy, g, batch)},
		frames:     frames[T]{forward: x, weight: again, below: dy},
		belowLeft:  quant.Matrix[T]{Data: make([]T, g.c*back), Row: back, Col: 1},
		belowTerms: back,
		rearrange:  func(dst, weight []T) { groupByExample(dst, weight, g.c, units, g.size()) },
	}
}

// pairText writes two numbers as one where they are equal.
func pairText(a, b int) string {
	if a == b {
		return itoa(a)
	}
	return itoa(a) + "x" + itoa(b)
}

func itoa(n int) string { return strconv.Itoa(n) }
