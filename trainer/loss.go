package trainer

import (
	"fmt"
	"strings"

	"ulpine/quant"
)

// A lossRule is the loss of one example in binary64.
type lossRule interface {
	// example returns the loss of outputs y for a label. If slope is not nil it
	// writes the derivative of the loss by each output there. Both have one
	// element a class; y may be overwritten.
	example(y []float64, label int32, slope []float64) float64
}

// lossNames and their rules. A new loss is one file and one line here.
var lossRules = []struct {
	name string
	rule lossRule
}{
	{"cross-entropy", crossEntropy{}},
}

// findLoss returns the rule of a name; the empty name is the first one.
func findLoss(name string) (lossRule, error) {
	names := make([]string, 0, len(lossRules))
	for _, row := range lossRules {
		if name == "" || name == row.name {
			return row.rule, nil
		}
		names = append(names, row.name)
	}
	return nil, fmt.Errorf("unknown loss %q; known: %s", name, strings.Join(names, ", "))
}

// judge measures a batch: losses, right answers, the output error.
type judge[T quant.Element] struct {
	rule   lossRule
	row    []float64
	slopes []float64 // [batch, classes]
}

func newJudge[T quant.Element](rule lossRule, batch, classes int) *judge[T] {
	return &judge[T]{rule: rule, row: make([]float64, classes), slopes: make([]float64, batch*classes)}
}

// losses adds the binary64 losses of the examples in ascending order to sum.
func (j *judge[T]) losses(sum float64, y []T, labels []int32) float64 {
	c := len(j.row)
	for n, label := range labels {
		sum += j.rule.example(j.read(y[n*c:][:c]), label, nil)
	}
	return sum
}

// errors returns the summed loss and leaves (slope/B) s of every output, B the
// number of labels, in the scratch it returns: the output error, still to be
// rounded.
func (j *judge[T]) errors(y []T, labels []int32, s float64) (sum float64, slopes []float64) {
	c := len(j.row)
	slopes = j.slopes[:len(labels)*c]
	for n, label := range labels {
		sum += j.rule.example(j.read(y[n*c:][:c]), label, slopes[n*c:][:c])
	}
	batch := float64(len(labels))
	for i, d := range slopes {
		slopes[i] = float64(d/batch) * s
	}
	return sum, slopes
}

// read copies the outputs of one example to binary64.
func (j *judge[T]) read(y []T) []float64 {
	for i, v := range y {
		j.row[i] = float64(v)
	}
	return j.row
}
