package trainer

import (
	"gorgonia.org/tensor"

	"ulpine/quant"
)

// array is a tensor and its memory. The tensor owns shape and storage; the slice
// is taken once, because asking the tensor for it in every step would allocate.
type array[T quant.Element] struct {
	dense *tensor.Dense
	data  []T
}

// newArray returns a zeroed tensor of a shape, row-major.
func newArray[T quant.Element](shape ...int) array[T] {
	return viewArray(make([]T, volume(shape)), shape...)
}

// viewArray gives memory that exists a shape.
func viewArray[T quant.Element](data []T, shape ...int) array[T] {
	return array[T]{
		dense: tensor.New(tensor.WithShape(shape...), tensor.WithBacking(data)),
		data:  data,
	}
}

// volume is the number of elements of a shape.
func volume(shape []int) int {
	n := 1
	for _, d := range shape {
		n *= d
	}
	return n
}

// edge lies between two layers: the values that flow forward, the gradients that
// flow back. Both have shape [batch, shape of one example...]; a short batch
// uses the leading examples.
type edge[T quant.Element] struct {
	value, gradient array[T]
	per             int // elements of one example
}

func newEdge[T quant.Element](batch int, shape []int) *edge[T] {
	full := append([]int{batch}, shape...)
	return &edge[T]{value: newArray[T](full...), gradient: newArray[T](full...), per: volume(shape)}
}

// reshaped is the same memory under another shape of one example.
func (e *edge[T]) reshaped(batch int, shape []int) *edge[T] {
	full := append([]int{batch}, shape...)
	return &edge[T]{
		value:    viewArray(e.value.data, full...),
		gradient: viewArray(e.gradient.data, full...),
		per:      e.per,
	}
}

// first is the number of the batch's first element in the tensor of the whole set.
func (e *edge[T]) first(p *pass) uint64 { return p.first * uint64(e.per) }

// values are the first n examples.
func (e *edge[T]) values(n int) []T { return e.value.data[:n*e.per] }

// gradients are those of the first n examples.
func (e *edge[T]) gradients(n int) []T { return e.gradient.data[:n*e.per] }

// notFinite reports whether a slice holds an infinity or a NaN.
func notFinite[T quant.Element](x []T) bool {
	for _, v := range x {
		if v-v != 0 { // Inf - Inf and NaN - NaN are NaN
			return true
		}
	}
	return false
}
