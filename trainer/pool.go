package trainer

import (
	"fmt"

	"ulpine/quant"
)

// parsePool reads "maxpool size=2 stride=2" on [channels, length] or [channels,
// rows, columns]. The stride is the size where it is not given; pools take no
// padding; rows and columns that no window reaches are left out.
func parsePool(o *options, s *Spec) error {
	g, err := readWindow(o, s.In, "size", 0, false)
	if err != nil {
		return err
	}
	s.window = g
	s.Out = []int{g.c, g.ow}
	if len(s.In) == 3 {
		s.Out = []int{g.c, g.oh, g.ow}
	}
	size, stride := itoa(g.kw), itoa(g.sw)
	if len(s.In) == 3 {
		size, stride = pairText(g.kh, g.kw), pairText(g.sh, g.sw)
	}
	s.Name = fmt.Sprintf("%s size=%s stride=%s", o.kind.name, size, stride)
	if g.overlaps() {
		s.Sums.InputGradient = g.covers()
		s.MACs.InputGradient = uint64(g.covers()) * uint64(g.c*g.inner())
		s.Points = append(append(s.Points, inputSums...), InputGradientResult)
	}
	return nil
}

// overlaps reports whether some input lies in more than one window.
func (g *window) overlaps() bool { return g.sh < g.kh || g.sw < g.kw }

// across is the largest number of windows over one input, along each axis.
func (g *window) across() (rows, columns int) {
	return (g.kh + g.sh - 1) / g.sh, (g.kw + g.sw - 1) / g.sw
}

// covers is the largest number of windows over one input.
func (g *window) covers() int {
	rows, columns := g.across()
	return rows * columns
}

// perChannel is the same window over one channel: pools treat channels as if
// they were examples.
func (g window) perChannel() window {
	g.c = 1
	return g
}

// covering is the right-hand operand of a pool's input gradient: B[(wr, wc), j] =
// dy of the window (wr, wc) among those over input j, in ascending order of
// outputs. There is no term where no such window exists, or, in a max-pool, where
// the window chose another input. j is the element's number in the input tensor.
type covering[T quant.Element] struct {
	dy     []T
	choice []int32 // per output, the position of its choice in the channel; nil: every covered input
	g      window
}

// output is the number of the window (k) over input j in the output tensor.
func (b *covering[T]) output(k, j int) (int, bool) {
	g := &b.g
	rows, columns := g.across()
	plane, y, x := unravel(j, g.h, g.w)
	oy := y/g.sh - rows + 1 + k/columns
	ox := x/g.sw - columns + 1 + k%columns
	if oy < 0 || oy >= g.oh || ox < 0 || ox >= g.ow || y-oy*g.sh >= g.kh || x-ox*g.sw >= g.kw {
		return 0, false
	}
	out := (plane*g.oh+oy)*g.ow + ox
	return out, b.choice == nil || int(b.choice[out]) == y*g.w+x
}

// Pack implements quant.Columns.
func (b *covering[T]) Pack(dst []T, width, k0, k1, j0, j1 int) {
	for k := k0; k < k1; k++ {
		row := dst[(k-k0)*width:][:width]
		clear(row)
		for j := j0; j < j1; j++ {
			if out, ok := b.output(k, j); ok {
				row[j-j0] = b.dy[out]
			}
		}
	}
}

// Padded implements quant.Columns.
func (b *covering[T]) Padded(k, j int) bool {
	_, ok := b.output(k, j)
	return !ok
}

// summer forms sums without products by the same kernels that form products:
// the left operand is a row of ones and the product is exact, so each sum is
// that of the right operand's column. A column's number is its element's number.
type summer[T quant.Element] struct {
	mul     *quant.Multiplier[T]
	product quant.Product[T]
}

func newSummer[T quant.Element](acc quant.Accumulate, terms int, columns quant.Columns[T]) (*summer[T], error) {
	acc.Product = nil
	mul, err := multiplier[T](acc)
	if err != nil {
		return nil, err
	}
	ones := make([]T, terms)
	for i := range ones {
		ones[i] = 1
	}
	left := quant.Matrix[T]{Data: ones, Row: terms, Col: 1}
	return &summer[T]{mul, quant.Product[T]{I: 1, K: terms, A: left, B: columns}}, nil
}

// sum writes one sum per element of dst; element 0 has number first.
func (s *summer[T]) sum(dst []T, first uint64, draws quant.Streams, counts *quant.Counts) {
	s.product.J, s.product.C, s.product.FirstJ = len(dst), dst, first
	s.product.Sums = draws
	s.mul.Mul(s.product, nil, counts)
}
