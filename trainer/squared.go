package trainer

import (
	"fmt"
	"math"

	"ulpine/quant"
)

// squaredError is half the squared distance of outputs y and targets t, so that the
// batch mean has the output error (y - t)/B. In binary64, outputs ascending:
//
//	d[c] = y[c] - t[c]
//	loss = d[0] d[0]/2 + d[1] d[1]/2 + ...
//	slope[c] = d[c]
type squaredError struct{}

func newSquaredError(t *Training) (lossRule, error) { return squaredError{}, t.plainTargets() }

func (squaredError) regression() bool { return true }

func (squaredError) example(y []float64, t target, slope []float64) float64 {
	var loss float64
	for c, v := range y {
		d := v - float64(t.values[c])
		loss += float64(0.5 * float64(d*d))
		if slope != nil {
			slope[c] = d
		}
	}
	return loss
}

// constant is the loss of predicting the mean target, the least there is.
func (r squaredError) constant(s *split, outputs int) float64 { return lossOfMean(r, s, outputs) }

// huber is the loss of P. J. Huber (Robust estimation of a location parameter,
// Annals of Mathematical Statistics 35, 1964) of width w, a binary32 number, summed
// over the outputs in ascending order. In binary64, d = y[c] - t[c]:
//
//	|d| <= w:  d d/2, slope[c] = d
//	beyond:    w (|d| - w/2), slope[c] = w of the sign of d
type huber struct{ width float64 }

// huberWidth is the width where none is given: common practice.
const huberWidth = 1

func newHuber(t *Training) (lossRule, error) {
	w := single(t.HuberWidth)
	if w == 0 {
		w = huberWidth
	}
	if !(w > 0) || math.IsInf(w, 0) {
		return nil, fmt.Errorf("the width of the huber loss is %g; it must be positive and finite in binary32", t.HuberWidth)
	}
	if t.LabelSmoothing != 0 {
		return nil, t.plainTargets()
	}
	return huber{w}, nil
}

func (huber) regression() bool { return true }

func (r huber) example(y []float64, t target, slope []float64) float64 {
	var loss float64
	for c, v := range y {
		d := v - float64(t.values[c])
		g := d
		switch {
		case d > r.width:
			g = r.width
		case d < -r.width:
			g = -r.width
		}
		if g == d || d != d {
			loss += float64(0.5 * float64(d*d))
		} else {
			loss += float64(r.width * (math.Abs(d) - float64(0.5*r.width)))
		}
		if slope != nil {
			slope[c] = g
		}
	}
	return loss
}

// constant is the loss of predicting the mean target.
func (r huber) constant(s *split, outputs int) float64 { return lossOfMean(r, s, outputs) }

// addSquares adds the squared distances of outputs and targets to sum, in order.
func addSquares[T quant.Element](sum float64, y []T, values []float32) float64 {
	for i, v := range y {
		d := float64(v) - float64(values[i])
		sum += float64(d * d)
	}
	return sum
}

// plainTargets refuses what belongs to classes.
func (t *Training) plainTargets() error {
	if t.LabelSmoothing != 0 {
		return fmt.Errorf("label smoothing of %g with the loss %s; it belongs to cross-entropy", t.LabelSmoothing, t.Loss)
	}
	return nil
}

// lossOfMean is the mean loss of a predictor that always answers with the mean
// target: binary64 sums over the examples in order.
func lossOfMean(r lossRule, s *split, outputs int) float64 {
	mean, y := make([]float64, outputs), make([]float64, outputs)
	for i, v := range s.targets {
		mean[i%outputs] += float64(v)
	}
	for c := range mean {
		mean[c] /= float64(s.size())
	}
	var loss float64
	for n := range s.size() {
		copy(y, mean)
		loss += r.example(y, s.truths(n, 1).of(0, outputs), nil)
	}
	return loss / float64(s.size())
}
