package trainer

import "ulpine/quant"

// flattenKind gives the input's memory one dimension, row-major. It computes
// nothing and so rounds nothing: its output is its input.
var flattenKind = kind{
	name: "flatten", usage: "flatten", parse: parseFlatten, view: true,
	build32: newFlatten[float32], build64: newFlatten[float64],
}

func parseFlatten(_ *options, s *Spec) error {
	s.Name, s.Out = "flatten", []int{volume(s.In)}
	return nil
}

type flatten[T quant.Element] struct{}

func newFlatten[T quant.Element](*bench[T]) (layer[T], error) { return flatten[T]{}, nil }

func (flatten[T]) forward(*pass)        {}
func (flatten[T]) backward(*pass, bool) {}
func (flatten[T]) params() []*param[T]  { return nil }
