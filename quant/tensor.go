package quant

import (
	"math"
	"sync"
)

// Shape is a tensor seen along the reduction axis of a product: Outer x Axis x
// Inner, Inner varying fastest. A line is the Axis elements that share outer and
// inner indices.
type Shape struct{ Outer, Axis, Inner int }

// Scaling is what the elements of a whole tensor share.
type Scaling struct {
	// Factor multiplies the finished sums of a product once, see Product.Scale; 1
	// where there is none. A positive binary32 number, so that the product of two is
	// exact in binary64.
	Factor float64
	Zero   int64 // the code that stands for zero, 0 where codes have no such offset
}

// Blocked is a format whose values share scales: blocks with a common exponent
// along the reduction axis, integers under the scale of a tensor. Its Bracket and
// Limits are those of an element. Points of a Blocked format round tensors with
// RoundTensor, anew for each product, because each has its own reduction axis; they
// round nothing else.
type Blocked interface {
	Format
	// Scaling works out what a tensor shares from all its elements.
	Scaling(x []float64) Scaling
	// RoundLine replaces the values of one line by their terms in a product: the
	// decoded reals of their blocks over the tensor's factor, or codes minus zero
	// point. The top bits of word[i] are the random bits of element i; word is nil
	// where the rounding draws none. n may be nil.
	RoundLine(line []float64, s Scaling, p *Point, word []uint32, n *Counts)
}

// RoundTensor writes the terms that the elements of src give in a product along
// the axis of shape to dst, and returns the factor that multiplies the finished
// sums: 1 but for a Blocked format. A scalar format rounds every element by
// itself, as RoundSlice. Element i is number first+i for the random bits of d. dst
// and src may be the same slice.
func RoundTensor[D, S Element](dst []D, src []S, shape Shape, p *Point, d Draws, first uint64, n *Counts) float64 {
	blocked, ok := p.Format.(Blocked)
	if !ok {
		RoundSlice(dst, src, p, d, first, n)
		return 1
	}
	if PerChannel(p.Format) && shape.Outer > 1 {
		panic("quant: " + p.Format.String() + " has a scale per channel: round with RoundChannels")
	}
	sameLength(len(dst), len(src))
	sameLength(len(src), shape.Outer*shape.Axis*shape.Inner)
	fits[D](p)
	m := borrowScratch()
	defer m.giveBack()
	x := grown(m.tensor, len(src))
	m.tensor = x
	for i, v := range src {
		x[i] = float64(v)
	}
	s := blocked.Scaling(x)
	m.element = elementPoint(blocked, s, p)
	quickly, isQuick := newFastLines(blocked, s, &m.element)
	m.line = grown(m.line, shape.Axis)
	l := lines{words: newWords(d, p.Rounding), first: first, line: m.line}
	if l.words.on {
		m.word = grown(m.word, shape.Axis)
		l.word = m.word
	}
	for outer := range shape.Outer {
		for inner := range shape.Inner {
			at := outer*shape.Axis*shape.Inner + inner
			l.gather(x, at, shape.Inner)
			if isQuick {
				quickly.round(l.line, l.word, n)
			} else {
				blocked.RoundLine(l.line, s, p, l.word, n)
			}
			for i, v := range l.line {
				dst[at+i*shape.Inner] = D(v)
			}
		}
	}
	return s.Factor
}

// scratch is memory for the rounding of one tensor: training rounds the same shapes
// again and again and should not allocate.
type scratch struct {
	tensor, line []float64
	word         []uint32
	element      Point // of the lines
}

var scratches = sync.Pool{New: func() any { return new(scratch) }}

func borrowScratch() *scratch { return scratches.Get().(*scratch) }

func (m *scratch) giveBack() { scratches.Put(m) }

// lines walks over the lines of a tensor.
type lines struct {
	words words
	first uint64
	line  []float64
	word  []uint32 // nil where nothing is drawn
}

// gather takes the line whose elements are at, at+step, ... and their words.
func (l *lines) gather(x []float64, at, step int) {
	for i := range l.line {
		l.line[i] = x[at+i*step]
	}
	for i := range l.word {
		l.word[i] = l.words.at(l.first + uint64(at+i*step))
	}
}

// PerChannel reports whether each channel of a tensor has a scale of its own.
func PerChannel(f Format) bool {
	i, ok := f.(Integer)
	return ok && i.spec.Channel
}

// RoundChannels is RoundTensor for an operand whose outer indices are channels, the
// rows of the left-hand operand of a product: where the format has a scale per
// channel, each outer index is a tensor of its own. It writes the factor of each to
// factors, which has shape.Outer entries: Product.Scale, but for the factor of the
// other operand.
func RoundChannels[D, S Element](dst []D, src []S, shape Shape, p *Point, d Draws, first uint64, n *Counts, factors []float64) {
	sameLength(len(factors), shape.Outer)
	if !PerChannel(p.Format) {
		f := RoundTensor(dst, src, shape, p, d, first, n)
		for i := range factors {
			factors[i] = f
		}
		return
	}
	sameLength(len(dst), len(src))
	size := shape.Axis * shape.Inner
	channel := Shape{Outer: 1, Axis: shape.Axis, Inner: shape.Inner}
	for i := range factors {
		at := i * size
		factors[i] = RoundTensor(dst[at:][:size], src[at:][:size], channel, p, d, first+uint64(at), n)
	}
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
