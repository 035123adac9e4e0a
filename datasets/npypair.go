package datasets

import (
	"fmt"
	"math"
	"path/filepath"
	"slices"
	"strconv"

	"ulpine/datasets/npy"
)

// arrayPair is inputs and what belongs to them, n examples.
type arrayPair struct {
	file       string // for errors
	key        string
	n, outputs int
	shape      []int // of one example
	inputs     []float64
	truths     []float64 // [n, outputs]
}

// pair reads the two arrays of a set and holds them to each other.
func (s *NPY) pair(set string, inputs []string, truths string) (*arrayPair, error) {
	kind := "_labels"
	if s.Regression {
		kind = "_targets"
	}
	x, err := s.joined(set+"_inputs", inputs)
	if err != nil {
		return nil, err
	}
	y, err := s.array(set+kind, truths)
	if err != nil {
		return nil, err
	}
	p := &arrayPair{file: orElse(s.Archive, truths), key: set + kind, inputs: x.Values, truths: y.Values}
	return p, p.measure(x, y, s.Regression)
}

// joined reads the inputs of a set, joined along the first axis of an example.
func (s *NPY) joined(key string, names []string) (*npy.Array, error) {
	var all []*npy.Array
	for _, name := range names {
		a, err := s.array(key, name)
		if err != nil {
			return nil, err
		}
		all = append(all, a)
		first := all[0]
		fault := func(reason string) error {
			return &FileError{File: orElse(s.Archive, name), Offset: -1, Reason: fmt.Sprintf("%s: %q of shape %v %s %q of shape %v", key, filepath.Base(name), a.Shape, reason, filepath.Base(names[0]), first.Shape), Remedy: "join arrays of the same number of examples that differ in their second axis only"}
		}
		switch {
		case len(names) == 1:
			return a, nil
		case len(a.Shape) < 2:
			return nil, fault("has no axis along which to join it to")
		case len(a.Shape) != len(first.Shape) || a.Shape[0] != first.Shape[0] || !slices.Equal(a.Shape[2:], first.Shape[2:]):
			return nil, fault("does not fit")
		}
	}
	return join(all), nil
}

// join concatenates arrays along their second axis.
func join(all []*npy.Array) *npy.Array {
	out := &npy.Array{Shape: slices.Clone(all[0].Shape), Wide: true}
	out.Shape[1] = 0
	for _, a := range all {
		out.Shape[1] += a.Shape[1]
	}
	for n := range out.Shape[0] {
		for _, a := range all {
			per := volume(a.Shape[1:])
			out.Values = append(out.Values, a.Values[int(n*per):][:per]...)
		}
	}
	return out
}

func (p *arrayPair) fault(reason, remedy string) error {
	return &FileError{File: p.file, Offset: -1, Reason: p.key + ": " + reason, Remedy: remedy}
}

// measure reads sizes off the shapes.
func (p *arrayPair) measure(x, y *npy.Array, regression bool) error {
	if len(x.Shape) == 0 || len(x.Values) == 0 || x.Shape[0] > maxExamples {
		return p.fault(fmt.Sprintf("the inputs have the shape %v", x.Shape), fmt.Sprintf("give 1 to %d examples along the first axis, none of them empty", maxExamples))
	}
	p.n, p.shape = x.Shape[0], slices.Clone(x.Shape[1:])
	if len(p.shape) == 0 {
		p.shape = []int{1}
	}
	if len(y.Shape) == 0 || y.Shape[0] != p.n || len(y.Shape) > 2 {
		return p.fault(fmt.Sprintf("its shape is %v, but there are %d inputs", y.Shape, p.n), "give one label, or one row of targets, an input")
	}
	p.outputs = len(y.Values) / p.n
	if p.outputs < 1 || p.outputs > maxClasses || !regression && p.outputs != 1 {
		return p.fault(fmt.Sprintf("it has %d values an example", p.outputs), fmt.Sprintf("give one label an example, or 1 to %d targets", maxClasses))
	}
	return nil
}

// fits holds a test set to the training set.
func (p *arrayPair) fits(main *arrayPair) error {
	if !slices.Equal(p.shape, main.shape) || p.outputs != main.outputs {
		return p.fault(fmt.Sprintf("examples of shape %v with %d values each do not fit the training's %v with %d", p.shape, p.outputs, main.shape, main.outputs), "give arrays of the same shape")
	}
	return nil
}

// names are the classes given, or the numbers from 0 to the largest label.
func (p *arrayPair) names(given []string) ([]string, error) {
	if given != nil {
		return given, nil
	}
	most := slices.Max(p.truths)
	if most < 1 || most >= maxClasses || most != math.Floor(most) {
		return nil, p.fault(fmt.Sprintf("the largest label is %g", most), fmt.Sprintf("give whole numbers from 0, of 2 to %d classes; for a regression name the file as targets", maxClasses))
	}
	names := make([]string, int(most)+1)
	for i := range names {
		names[i] = strconv.Itoa(i)
	}
	return names, nil
}

// pick copies the given examples.
func (p *arrayPair) pick(rows []int, e *examples) (rawSet, error) {
	s := rawSet{at: slice(gather(p.inputs, rows, volume(p.shape)))}
	s.where = func(i int) string { return fmt.Sprintf("example %d of the file, counted from 0", rows[i]) }
	truths := gather(p.truths, rows, p.outputs)
	if e.targetNames != nil {
		s.targets = truths
		return s, nil
	}
	s.labels = make([]int32, len(rows))
	for i, x := range truths {
		if x < 0 || x >= float64(len(e.classNames)) || x != math.Floor(x) {
			return s, p.fault(fmt.Sprintf("example %d has the label %g", rows[i], x), fmt.Sprintf("give whole numbers from 0 to %d, or list all classes under classes", len(e.classNames)-1))
		}
		s.labels[i] = int32(x)
	}
	return s, nil
}
