package compare

import (
	"fmt"
	"math"

	"ulpine/results"
)

// recallOf is how often a run found a class after its last epoch; false: it was
// not counted, or the test data has none of the class.
func recallOf(r *results.Run, class int) (share float64, ok bool) {
	if class >= r.Classes || len(r.Confusion) != r.Classes*r.Classes {
		return 0, false
	}
	row := r.Confusion[class*r.Classes : (class+1)*r.Classes]
	var of uint64
	for _, n := range row {
		of += n
	}
	return float64(row[class]) / float64(of), of > 0
}

// classDifferences compares recall class by class over the pairs of runs; empty
// when no run was counted. A mean over all classes hides the loss of one.
func classDifferences(q Question, pairs [][2]*results.Run) []results.ClassDifference {
	classes := 0
	for _, p := range pairs {
		classes = max(classes, min(p[0].Classes, p[1].Classes))
	}
	all := make([]results.ClassDifference, classes)
	ps := make([]float64, classes)
	for k := range all {
		all[k] = classDifference(q, k, pairs)
		ps[k] = all[k].P
	}
	for k, p := range Holm(ps) {
		all[k].Holm = p
	}
	return all
}

func classDifference(q Question, class int, pairs [][2]*results.Run) results.ClassDifference {
	nan := math.NaN()
	d := results.ClassDifference{Class: class, Mean: nan, Low: nan, High: nan, Worst: nan, P: nan}
	if class < len(q.Classes) {
		d.Name = q.Classes[class]
	}
	var xs []float64
	for _, p := range pairs {
		a, okA := recallOf(p[0], class)
		b, okB := recallOf(p[1], class)
		if !okA || !okB {
			continue
		}
		xs = append(xs, a-b)
		if !(a-b >= d.Worst) {
			d.Worst, d.Replicate = a-b, p[0].Replicate
		}
	}
	if d.N = len(xs); d.N == 0 {
		return d
	}
	if d.Mean = mean(xs); d.N >= 2 {
		sd := deviation(xs)
		d.Low, d.High = interval(d.Mean, sd, d.N, q.Confidence)
		_, d.P = pValues(d.Mean, sd, d.N, 0)
	}
	return d
}

// noteClasses warns of classes that an arm within the margin on the whole loses
// more of than the margin allows on the whole, as far as the pairs can tell.
func noteClasses(c *results.Comparison) {
	for i := range c.Classes {
		d := &c.Classes[i]
		if !(d.Holm < tail(c)) || newMeasure(c).metric.Share && d.Mean >= -c.Margin {
			continue
		}
		name := d.Name
		if name == "" {
			name = fmt.Sprint(d.Class)
		}
		recall := newMeasure(&results.Comparison{Metric: "test accuracy", Margin: 0.01})
		c.Warnings = append(c.Warnings, fmt.Sprintf(
			"within the margin on the whole, but class %s is found less often: recall differs by %s (%s %% interval %s, %s)",
			name, recall.with(recall.figure(d.Mean)), amount(100*c.Confidence), recall.span(d.Low, d.High), number(d.N, "pair")))
	}
}
