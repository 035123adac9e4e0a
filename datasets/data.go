package datasets

import (
	"crypto/sha256"
	"encoding/binary"
	"hash"
	"math"

	"gorgonia.org/tensor"
)

// Set is labelled data. An empty set has nil Inputs and no Labels.
type Set struct {
	Inputs *tensor.Dense // [n, shape of one example...], float32, row-major
	Labels []int32       // n classes, counted from 0
	// Targets are those of a regression, [n, outputs], float32; nil where Labels serve.
	Targets *tensor.Dense
}

// Len is the number of examples.
func (s Set) Len() int {
	if s.Targets != nil {
		return s.Targets.Shape()[0]
	}
	return len(s.Labels)
}

// Data is what a replicate trains, validates and tests on. It may be shared
// between runs and is not to be written to.
type Data struct {
	Train, Validation, Test Set

	Shape      []int // of one example
	Classes    int
	ClassNames []string
	// TargetNames are the outputs of a regression, in order; it has no classes.
	TargetNames []string
	// Mean and Std are what inputs were standardised with, in the units of the
	// source: one value for images and signals, one a feature for tables. Both
	// are nil where nothing was standardised.
	Mean, Std []float64
	// Hash is SHA-256 of everything a training can see: shape, classes, inputs,
	// labels or targets, of all three sets.
	Hash        [32]byte
	Description string   // one line; says "invented" of generated data
	Warnings    []string // doubts that a reader of results should know of
}

// Facts are what is known of a source before any training.
type Facts struct {
	Shape                   []int // of one example
	ClassNames              []string
	TargetNames             []string // of a regression, one an output; it has no classes
	Train, Validation, Test int      // examples
	PerReplicate            bool     // drawn anew from the seed of each replicate
	Description             string
	Warnings                []string
}

// facts are those of loaded data.
func (d *Data) facts() Facts {
	return Facts{
		Shape: d.Shape, ClassNames: d.ClassNames, TargetNames: d.TargetNames,
		Train: d.Train.Len(), Validation: d.Validation.Len(), Test: d.Test.Len(),
		Description: d.Description, Warnings: d.Warnings,
	}
}

// seal computes the hash; everything else must be in place.
func (d *Data) seal() {
	h := sha256.New()
	writeWords(h, uint64(d.Classes), uint64(len(d.Shape)))
	for _, n := range d.Shape {
		writeWords(h, uint64(n))
	}
	for _, s := range []Set{d.Train, d.Validation, d.Test} {
		writeWords(h, uint64(s.Len()))
		s.write(h)
	}
	h.Sum(d.Hash[:0])
}

// write feeds inputs and labels, or the number of outputs and targets, to a hash, little-endian.
func (s Set) write(h hash.Hash) {
	if s.Len() == 0 {
		return
	}
	buffer := make([]byte, 0, 4096)
	put := func(word uint32) {
		buffer = binary.LittleEndian.AppendUint32(buffer, word)
		if len(buffer) == cap(buffer) {
			h.Write(buffer)
			buffer = buffer[:0]
		}
	}
	for _, v := range s.Inputs.Float32s() {
		put(math.Float32bits(v))
	}
	for _, label := range s.Labels {
		put(uint32(label))
	}
	if s.Targets != nil {
		put(uint32(s.Targets.Shape()[1]))
		for _, v := range s.Targets.Float32s() {
			put(math.Float32bits(v))
		}
	}
	h.Write(buffer)
}

func writeWords(h hash.Hash, words ...uint64) {
	for _, w := range words {
		h.Write(binary.LittleEndian.AppendUint64(nil, w))
	}
}

// newSet wraps examples of one shape; values has len(labels) times the volume of
// the shape.
func newSet(shape []int, values []float32, labels []int32) Set {
	if len(labels) == 0 {
		return Set{}
	}
	full := append([]int{len(labels)}, shape...)
	return Set{Inputs: tensor.New(tensor.WithShape(full...), tensor.WithBacking(values)), Labels: labels}
}

// newTargetSet wraps the examples of a regression; targets has outputs values for each.
func newTargetSet(shape []int, values []float32, outputs int, targets []float32) Set {
	if len(targets) == 0 {
		return Set{}
	}
	n := len(targets) / outputs
	full := append([]int{n}, shape...)
	return Set{
		Inputs:  tensor.New(tensor.WithShape(full...), tensor.WithBacking(values)),
		Targets: tensor.New(tensor.WithShape(n, outputs), tensor.WithBacking(targets)),
	}
}

// volume is the number of values of one example.
func volume(shape []int) int {
	n := 1
	for _, d := range shape {
		n = int(n * d)
	}
	return n
}
