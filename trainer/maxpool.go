package trainer

import (
	"math"

	"ulpine/quant"
)

// maxPoolKind takes the largest input of each window, the first in row-major
// order among equals (+0 and -0 are equal), NaN if there is one. y =
// R[activation](largest). The gradient goes back to the chosen input. Where
// windows do not overlap nothing is computed with it and it is not rounded
// again; where they do, an input's gradient is the sum of those of the windows
// that chose it, in ascending order of outputs, at the input gradient's sum
// point, then R[input_gradient.result].
var maxPoolKind = kind{
	name: "maxpool", usage: "maxpool size=2 stride=2", parse: parseMaxPool,
	build32: newMaxPool[float32], build64: newMaxPool[float64],
}

func parseMaxPool(o *options, s *Spec) error {
	s.Points = []PointID{ForwardActivation}
	return parsePool(o, s)
}

type maxPool[T quant.Element] struct {
	place
	below, above *edge[T]
	g            window
	choice       []int32    // per output: the chosen position within its channel
	overlap      *summer[T] // nil: windows do not overlap
}

func newMaxPool[T quant.Element](b *bench[T]) (layer[T], error) {
	l := &maxPool[T]{
		place: b.place, below: b.below, above: b.above, g: b.spec.window,
		choice: make([]int32, len(b.above.value.data)),
	}
	if !l.g.overlaps() {
		return l, nil
	}
	columns := &covering[T]{dy: b.above.gradient.data, choice: l.choice, g: l.g.perChannel()}
	var err error
	l.overlap, err = newSummer[T](b.set.InputGradient.Sums, l.g.covers(), columns)
	if err != nil {
		return nil, err
	}
	return l, nil
}

func (l *maxPool[T]) forward(p *pass) {
	g := &l.g
	x, y := l.below.values(p.samples), l.above.values(p.samples)
	for plane := range p.samples * g.c {
		in := x[plane*g.inner():][:g.inner()]
		out, choice := y[plane*g.outer():][:g.outer()], l.choice[plane*g.outer():][:g.outer()]
		for oy := range g.oh {
			chooseRow(out[oy*g.ow:][:g.ow], choice[oy*g.ow:][:g.ow], in, g, oy*g.sh)
		}
	}
	round(l.place, p, ForwardActivation, opActivation, y, y, &l.set.Activation, p.first*uint64(l.above.per))
}

// chooseRow makes one row of outputs, of the windows whose top is that row of a plane.
func chooseRow[T quant.Element](out []T, choice []int32, in []T, g *window, top int) {
	if x, ok := any(in).([]float32); ok && g.kh == 2 && g.kw == 2 && g.sw == 2 {
		at := top * g.w
		chooseOfFour(any(out).([]float32), choice, x[at:][:2*g.w], int32(at))
		return
	}
	for ox := range out {
		at := largest(in, g, top, ox*g.sw)
		out[ox], choice[ox] = in[at], int32(at)
	}
}

// chooseOfFour is the usual pool, of 2 x 2 elements side by side, without a branch: x
// holds two rows of a plane, from the plane's place first on.
func chooseOfFour(out []float32, choice []int32, x []float32, first int32) {
	row := len(x) / 2
	upper, lower := x[:row], x[row:]
	upper, lower, choice = upper[:2*len(out)], lower[:2*len(out)], choice[:len(out)]
	for i := range out {
		right := 2*i + 1
		a, b := contender(upper[right-1], 3), contender(upper[right], 2)
		c, d := contender(lower[right-1], 1), contender(lower[right], 0)
		number := 3 - int(greater(greater(a, b), greater(c, d))&3)
		at := 2*i + number&1 + -(number>>1)&row
		out[i], choice[i] = x[at], first+int32(at)
	}
}

// contender is the rank of v and, below it, a number that decides between equals.
func contender(v float32, number int64) int64 {
	b := int32(math.Float32bits(v + 0)) // -0 + 0 is +0
	return int64(b^int32(uint32(b>>31)>>1))<<2 | number
}

// greater is the maximum of contenders, whose difference does not overflow.
func greater(a, b int64) int64 {
	d := b - a
	return a + d&^(d>>63)
}

// largest is the position of the choice of the window at row top, column left.
func largest[T quant.Element](in []T, g *window, top, left int) int {
	best := top*g.w + left
	high := rank(in[best])
	for r := range g.kh {
		at := (top+r)*g.w + left
		for _, v := range in[at:][:g.kw] {
			if k := rank(v); k > high {
				high, best = k, at
			}
			at++
		}
	}
	return best
}

// rank orders numbers as integers, without a branch: both zeros are equal, NaN
// (stored NaNs are positive) lies above infinity.
func rank[T quant.Element](v T) int64 {
	b := int64(math.Float64bits(float64(v) + 0)) // -0 + 0 is +0
	return b ^ int64(uint64(b>>63)>>1)
}

func (l *maxPool[T]) backward(p *pass, below bool) {
	if !below {
		return
	}
	dy, dx := l.above.gradients(p.samples), l.below.gradients(p.samples)
	if l.overlap != nil {
		l.overlap.sum(dx, 0, l.streams(p, opInputSum), l.counts(p, InputGradientSum))
		round(l.place, p, InputGradientResult, opInputResult, dx, dx, &l.set.InputGradient.Result, 0)
		return
	}
	clear(dx)
	inner, outer := l.g.inner(), l.g.outer()
	for out, v := range dy {
		dx[out/outer*inner+int(l.choice[out])] = v
	}
}

func (l *maxPool[T]) params() []*param[T] { return nil }
