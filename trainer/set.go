package trainer

import (
	"fmt"

	"gorgonia.org/tensor"
)

// Set is labelled data.
type Set struct {
	Inputs *tensor.Dense // [n, shape of one example...], float32, row-major
	Labels []int32       // n classes, counted from 0
}

// split is a checked set.
type split struct {
	name   string
	inputs []float32
	labels []int32
	per    int // values of one example
}

func (s *split) size() int { return len(s.labels) }

// rows are the inputs of n examples from the given one on.
func (s *split) rows(first, n int) []float32 { return s.inputs[first*s.per:][:n*s.per] }

// open checks a set against a network. A set without labels is empty.
func (n *Network) open(name string, set Set, classes int) (*split, error) {
	s := &split{name: name, labels: set.Labels, per: volume(n.Input)}
	if len(set.Labels) == 0 {
		return s, nil
	}
	if set.Inputs == nil || set.Inputs.Dtype() != tensor.Float32 || set.Inputs.RequiresIterator() {
		return nil, fmt.Errorf("%s data: inputs must be one contiguous tensor of float32", name)
	}
	shape := set.Inputs.Shape()
	if shape.TotalSize() != len(set.Labels)*s.per || shape[0] != len(set.Labels) {
		return nil, fmt.Errorf("%s data: inputs of shape %s do not hold %d examples of %s, the network's input", name, shapeText(shape), len(set.Labels), shapeText(n.Input))
	}
	s.inputs = set.Inputs.Float32s()
	return s, s.check(classes)
}

// check finds labels without an output and inputs that are not numbers.
func (s *split) check(classes int) error {
	for i, label := range s.labels {
		if label < 0 || int(label) >= classes {
			return fmt.Errorf("%s data: example %d has label %d, but the network has %d outputs, classes 0 to %d; widen the last layer or correct the label", s.name, i, label, classes, classes-1)
		}
	}
	for i, v := range s.inputs {
		if v-v != 0 {
			return fmt.Errorf("%s data: example %d holds %g; remove it or replace it by a number", s.name, i/s.per, v)
		}
	}
	return nil
}
