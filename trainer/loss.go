package trainer

import (
	"fmt"
	"strings"

	"ulpine/quant"
)

// target is what one example should yield: a class, or in a regression values.
type target struct {
	label  int32
	values []float32
}

// truth are the targets of a batch: labels, or values [batch, outputs].
type truth struct {
	labels []int32
	values []float32
}

// of is the target of example n.
func (t truth) of(n, outputs int) target {
	if t.values != nil {
		return target{values: t.values[n*outputs:][:outputs]}
	}
	return target{label: t.labels[n]}
}

// A lossRule is the loss of one example in binary64.
type lossRule interface {
	// example returns the loss of outputs y for a target. If slope is not nil it
	// writes the derivative of the loss by each output there. Both have one
	// element an output; y may be overwritten.
	example(y []float64, t target, slope []float64) float64
	// constant is the mean loss, over a set, of a predictor that ignores its input.
	constant(s *split, outputs int) float64
	// regression reports whether targets are values.
	regression() bool
}

// lossRules are the names of losses and their rules. A new loss is one file and
// one line here.
var lossRules = []struct {
	name string
	make func(t *Training) (lossRule, error)
}{
	{"cross-entropy", newCrossEntropy},
	{"mean-squared-error", newSquaredError},
	{"huber", newHuber},
}

// LossNames are the losses there are.
func LossNames() []string {
	names := make([]string, len(lossRules))
	for i, row := range lossRules {
		names[i] = row.name
	}
	return names
}

// findLoss returns the rule a training asks for; the empty name is the first one.
func findLoss(t *Training) (lossRule, error) {
	for _, row := range lossRules {
		if t.Loss == "" || t.Loss == row.name {
			return row.make(t)
		}
	}
	return nil, fmt.Errorf("unknown loss %q; known: %s", t.Loss, strings.Join(LossNames(), ", "))
}

// Regression reports whether the training's loss takes targets of values and not
// labels of classes.
func (t Training) Regression() bool {
	r, err := findLoss(&t)
	return err == nil && r.regression()
}

// judge measures a batch: losses, right answers, the output error.
type judge[T quant.Element] struct {
	rule   lossRule
	row    []float64
	slopes []float64 // [batch, outputs]
}

func newJudge[T quant.Element](rule lossRule, batch, outputs int) *judge[T] {
	return &judge[T]{rule: rule, row: make([]float64, outputs), slopes: make([]float64, batch*outputs)}
}

// losses adds the binary64 losses of the examples of y in ascending order to sum.
func (j *judge[T]) losses(sum float64, y []T, t truth) float64 {
	c := len(j.row)
	for n := range len(y) / c {
		sum += j.rule.example(j.read(y[n*c:][:c]), t.of(n, c), nil)
	}
	return sum
}

// errors returns the summed loss and leaves (slope/B) s of every output, B the
// number of examples of y, in the scratch it returns: the output error, still to
// be rounded.
func (j *judge[T]) errors(y []T, t truth, s float64) (sum float64, slopes []float64) {
	c := len(j.row)
	slopes = j.slopes[:len(y)]
	for n := range len(y) / c {
		sum += j.rule.example(j.read(y[n*c:][:c]), t.of(n, c), slopes[n*c:][:c])
	}
	batch := float64(len(y) / c)
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
