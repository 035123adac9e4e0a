package trainer

import (
	"math"

	"ulpine/quant"
)

// twin computes gradients of the same network in binary64 throughout.
type twin struct{ *engine[float64] }

// newTwin builds the network a second time; its optimizer is never asked.
func newTwin(job *Job, parts parts) (*twin, error) {
	copied := *job
	copied.Arm = Everything(quant.Point{Format: quant.Binary64}, len(job.Network.Layers), 0)
	copied.Training.Optimizer = Optimizer{Kind: sgdKind.name}
	parts.rule = &sgdKind
	e, err := newEngine[float64](&copied, parts.train, parts)
	if err != nil {
		return nil, err
	}
	return &twin{e}, nil
}

// observe makes what the job's diagnostics need.
func (e *engine[T]) observe(job *Job, parts parts) (err error) {
	d := job.Diagnostics
	if d.Every == 0 && d.Gradient == 0 {
		return nil
	}
	e.observer = newObserver(d, e.net)
	if d.Gradient > 0 {
		e.twin, err = newTwin(job, parts)
	}
	return err
}

// cosines takes the batch and the masters of an engine that has just walked back,
// and appends the angle of every parameter's gradient. Dropout draws the same masks.
func cosines[T quant.Element](w *twin, e *engine[T], batch []int32, found *Findings) {
	for i, q := range e.params {
		for k, v := range q.master.data {
			w.params[i].master.data[k] = float64(v)
		}
		copy(w.params[i].working.data, w.params[i].master.data)
	}
	p := &w.pass
	p.step, p.samples = e.pass.step, len(batch)
	w.epoch = e.epoch
	y := w.forward(p, w.fetch(batch))
	_, slopes := w.judge.errors(y, w.truths(len(batch)), 1)
	w.backward(p, slopes)
	for i, q := range e.params {
		if !q.fixed {
			found.Gradients = append(found.Gradients, GradientFinding{
				Step: int(e.pass.step), Layer: q.layer, Param: q.name, Cosine: cosine(q.gradient.data, w.params[i].gradient.data),
			})
		}
	}
}

// cosine of the angle between two vectors; NaN where one is zero or not finite.
// Both are scaled by their largest element first, so that nothing overflows.
func cosine[T quant.Element](a []T, b []float64) float64 {
	var highA, highB float64
	for i := range a {
		highA, highB = max(highA, math.Abs(float64(a[i]))), max(highB, math.Abs(b[i]))
	}
	var cross, squareA, squareB float64
	for i := range a {
		x, y := float64(a[i])/highA, b[i]/highB
		cross += float64(x * y)
		squareA += float64(x * x)
		squareB += float64(y * y)
	}
	return cross / math.Sqrt(float64(squareA*squareB))
}
