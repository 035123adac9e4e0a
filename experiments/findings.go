package experiments

import (
	"slices"

	"ulpine/experiments/plan"
	"ulpine/results"
	"ulpine/trainer"
)

// findings copies what diagnostics of a training came to.
func findings(f *trainer.Findings) *results.Findings {
	out := &results.Findings{}
	for i := range f.Points {
		out.Points = append(out.Points, pointFinding(&f.Points[i]))
	}
	for _, s := range f.Sums {
		out.Sums = append(out.Sums, results.SumFinding(s))
	}
	for _, u := range f.Updates {
		out.Updates = append(out.Updates, results.UpdateFinding(u))
	}
	for _, g := range f.Gradients {
		out.Gradients = append(out.Gradients, results.GradientFinding(g))
	}
	return out
}

func pointFinding(f *trainer.PointFinding) results.PointFinding {
	p := results.PointFinding{
		Epoch: f.Epoch, Layer: f.Layer, Name: f.Name, Point: f.Point, Values: f.Values, Zeros: f.Zeros,
		Counts: results.Counts{Overflow: f.Overflow, Underflow: f.Underflow, Saturated: f.Saturated, NaN: f.NaN},
		Signal: f.Signal, Noise: f.Noise,
	}
	for _, e := range f.Exponents {
		p.Exponents = append(p.Exponents, results.ExponentCount(e))
	}
	if f.Layer >= 0 {
		return p
	}
	// As range counters call them.
	p.Name = "input"
	if f.Point == trainer.LossGradient.String() {
		p.Name = "loss"
	}
	return p
}

// diagnose adds a closer look at a run to the study if it is its arm's first one
// that was looked at, and lets its findings go: a study may hold thousands of runs.
func (r *reader) diagnose(run *results.Run) {
	isArm := slices.ContainsFunc(r.Arms, func(a plan.Arm) bool { return a.Slug == run.Arm })
	known := slices.ContainsFunc(r.study.Diagnoses, func(d results.Diagnosis) bool { return d.Arm == run.Arm })
	if isArm && !known && run.Findings != nil && len(run.Findings.Points) > 0 {
		r.study.Diagnoses = append(r.study.Diagnoses, results.Diagnose(run))
	}
	run.Findings = nil
}
