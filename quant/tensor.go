package quant

import "math"

// Shape is a tensor seen along the reduction axis of a product: Outer x Axis x
// Inner, Inner varying fastest. A line is the Axis elements that share outer and
// inner indices.
type Shape struct{ Outer, Axis, Inner int }

// Blocked is a format whose values share scales: blocks with a common exponent
// along the reduction axis, integers under the scale of a tensor. Its Bracket and
// Limits are those of an element. Points of a Blocked format round tensors with
// RoundTensor, anew for each product, because each has its own reduction axis.
type Blocked interface {
	Format
	// TensorScale returns the factor that a whole tensor with this largest finite
	// magnitude shares, 1 where there is none. It multiplies the finished sums of
	// a product once: see Product.Scale.
	TensorScale(largest float64) float64
	// RoundLine replaces the values of one line by their terms in a product: the
	// decoded reals of their blocks, or codes minus zero point, over the tensor's
	// scale. The top bits of word[i] are the random bits of element i; word is nil
	// where the rounding draws none. n may be nil.
	RoundLine(line []float64, scale float64, p *Point, word []uint32, n *Counts)
}

// RoundTensor writes the terms that the elements of src give in a product along
// the axis of shape to dst, and returns the factor that multiplies the finished
// sums: 1 but for a Blocked format. A scalar format rounds every element by
// itself, as RoundSlice. Element i is number first+i for the random bits of d. A
// scale per channel is the scale of a tensor of its own: call it channel by channel.
func RoundTensor[D, S Element](dst []D, src []S, shape Shape, p *Point, d Draws, first uint64, n *Counts) float64 {
	blocked, ok := p.Format.(Blocked)
	if !ok {
		RoundSlice(dst, src, p, d, first, n)
		return 1
	}
	sameLength(len(dst), len(src))
	sameLength(len(src), shape.Outer*shape.Axis*shape.Inner)
	fits[D](p)
	scale := blocked.TensorScale(largestFinite(src))
	line := make([]float64, shape.Axis)
	w := newWords(d, p.Rounding)
	var word []uint32
	if w.on {
		word = make([]uint32, shape.Axis)
	}
	for outer := range shape.Outer {
		for inner := range shape.Inner {
			at := outer*shape.Axis*shape.Inner + inner
			for i := range line {
				line[i] = float64(src[at+i*shape.Inner])
			}
			for i := range word {
				word[i] = w.at(first + uint64(at+i*shape.Inner))
			}
			blocked.RoundLine(line, scale, p, word, n)
			for i, v := range line {
				dst[at+i*shape.Inner] = D(v)
			}
		}
	}
	return scale
}

// largestFinite returns the largest finite magnitude of x, 0 where there is none.
func largestFinite[T Element](x []T) float64 {
	largest := 0.0
	for _, v := range x {
		if m := math.Abs(float64(v)); m > largest && m <= math.MaxFloat64 {
			largest = m
		}
	}
	return largest
}
