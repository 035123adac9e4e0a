package trainer

import (
	"fmt"

	"gorgonia.org/tensor"
)

// Set is labelled data, or in a regression data with targets.
type Set struct {
	Inputs  *tensor.Dense // [n, shape of one example...], float32, row-major
	Labels  []int32       // n classes, counted from 0
	Targets *tensor.Dense // [n, outputs], float32, row-major; nil but in a regression
}

// split is a checked set.
type split struct {
	name    string
	inputs  []float32
	labels  []int32
	targets []float32
	n       int
	per     int // values of one example
	outputs int
}

func (s *split) size() int { return s.n }

// rows are the inputs of n examples from the given one on.
func (s *split) rows(first, n int) []float32 { return s.inputs[first*s.per:][:n*s.per] }

// truths are the targets of n examples from the given one on.
func (s *split) truths(first, n int) truth {
	if s.targets != nil {
		return truth{values: s.targets[first*s.outputs:][:n*s.outputs]}
	}
	return truth{labels: s.labels[first:][:n]}
}

// open checks a set against a network's inputs and outputs. A set without labels,
// or in a regression without targets, is empty.
func (n *Network) open(name string, set Set, outputs int, regression bool) (*split, error) {
	s := &split{name: name, labels: set.Labels, n: len(set.Labels), per: volume(n.Input), outputs: outputs}
	if regression {
		s.labels, s.n = nil, 0
		if err := s.openTargets(set); err != nil {
			return nil, err
		}
	}
	if s.n == 0 {
		return s, nil
	}
	if set.Inputs == nil || set.Inputs.Dtype() != tensor.Float32 || set.Inputs.RequiresIterator() {
		return nil, fmt.Errorf("%s data: inputs must be one contiguous tensor of float32", name)
	}
	shape := set.Inputs.Shape()
	if shape.TotalSize() != s.n*s.per || shape[0] != s.n {
		return nil, fmt.Errorf("%s data: inputs of shape %s do not hold %d examples of %s, the network's input", name, shapeText(shape), s.n, shapeText(n.Input))
	}
	s.inputs = set.Inputs.Float32s()
	return s, s.check(outputs)
}

// openTargets takes the targets of a regression.
func (s *split) openTargets(set Set) error {
	t := set.Targets
	switch {
	case t == nil && len(set.Labels) > 0:
		return fmt.Errorf("%s data: labels, but no targets; this loss is one of values: give targets, or take cross-entropy", s.name)
	case t == nil:
		return nil
	case t.Dtype() != tensor.Float32 || t.RequiresIterator():
		return fmt.Errorf("%s data: targets must be one contiguous tensor of float32", s.name)
	}
	shape := t.Shape()
	if shape.TotalSize() != shape[0]*s.outputs {
		return fmt.Errorf("%s data: targets of shape %s do not fit the network's %d outputs; they need the shape examples x %d", s.name, shapeText(shape), s.outputs, s.outputs)
	}
	s.targets, s.n = t.Float32s(), shape[0]
	for i, v := range s.targets {
		if v-v != 0 {
			return fmt.Errorf("%s data: a target of example %d is %g; remove the example or replace it by a number", s.name, i/s.outputs, v)
		}
	}
	return nil
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
