package experiments

import (
	"runtime/debug"

	"ulpine/results"
	"ulpine/trainer"
)

// record copies what a training came to into a run; what it said of every test
// example only if that is to be kept.
func record(r *results.Run, o *trainer.Outcome, keep bool) {
	r.Steps = o.Steps
	r.Diverged, r.DivergedStep, r.Stalled = o.Diverged, o.DivergedStep, o.Stalled
	for i := range o.Epochs {
		r.Epochs = append(r.Epochs, epoch(&o.Epochs[i]))
	}
	for _, c := range o.Counters {
		r.Counters = append(r.Counters, results.PointCounts{
			Layer: c.Layer, Name: c.Name, Point: c.Point, Counts: results.Counts(c.Counts),
		})
	}
	r.Initial, r.Final = tensors(o.Initial), tensors(o.Final)
	if o.Test != nil {
		r.Confusion, r.Classes = o.Test.Confusion, o.Test.Classes
	}
	if keep {
		r.Predictions = predictions(o.Test)
	}
	if o.Findings != nil {
		r.Findings = findings(o.Findings)
	}
}

// predictions are those of the last evaluation of the test set; nil if there was
// none.
func predictions(s *trainer.Scores) *results.Predictions {
	switch {
	case s == nil:
		return nil
	case s.Classes == 0:
		return &results.Predictions{Outputs: s.Outputs, Values: s.Values, Targets: s.Targets}
	}
	return &results.Predictions{Called: s.Called, Truth: s.Truth}
}

func epoch(e *trainer.Epoch) results.Epoch {
	return results.Epoch{
		TrainLoss: e.TrainLoss, TrainMetric: e.TrainAccuracy, TrainRMSE: orZero(e.TrainRMSE),
		ValidationLoss: e.ValidationLoss, ValidationMetric: e.ValidationAccuracy, ValidationRMSE: orZero(e.ValidationRMSE),
		TestLoss: e.TestLoss, TestMetric: e.TestAccuracy, TestRMSE: orZero(e.TestRMSE),
		Ties: e.Ties, LossScale: e.LossScale, Skipped: e.Skipped,
		Validation: classScores(e.Validation), Test: classScores(e.Test),
	}
}

// orZero is 0 where there is no RMSE: a classification, or not evaluated.
func orZero(x float64) float64 {
	if x != x {
		return 0
	}
	return x
}

func classScores(s *trainer.ClassScores) *results.ClassScores {
	if s == nil {
		return nil
	}
	return &results.ClassScores{Examples: s.Examples, Right: s.Right, Missed: s.Missed}
}

func tensors(params []trainer.Param) []results.Tensor {
	all := make([]results.Tensor, len(params))
	for i, p := range params {
		all[i] = results.Tensor{Name: p.Name, Shape: p.Shape, Wide: p.Wide, Values: p.Values}
	}
	return all
}

func params(tensors []results.Tensor) []trainer.Param {
	all := make([]trainer.Param, len(tensors))
	for i, t := range tensors {
		all[i] = trainer.Param{Name: t.Name, Shape: t.Shape, Wide: t.Wide, Values: t.Values}
	}
	return all
}

// CodeVersion is the version of the program as its build states it: a release,
// or the revision it was built from; "unversioned" under "go run" and in tests.
func CodeVersion() string {
	info, ok := debug.ReadBuildInfo()
	if !ok {
		return "unversioned"
	}
	if v := info.Main.Version; v != "" && v != "(devel)" {
		return v
	}
	revision, changed := "", false
	for _, s := range info.Settings {
		switch s.Key {
		case "vcs.revision":
			revision = s.Value
		case "vcs.modified":
			changed = s.Value == "true"
		}
	}
	switch {
	case revision == "":
		return "unversioned"
	case changed:
		return revision[:min(12, len(revision))] + " with changes"
	}
	return revision[:min(12, len(revision))]
}
