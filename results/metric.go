package results

import (
	"math"
	"strings"
)

// Metric is a figure by which runs are compared: how it is called, whether more
// of it is better, and how it is read from an epoch.
type Metric struct {
	Name   string
	Higher bool    // more is better
	Data   string  // "training", "validation" or "test": the examples it is measured on
	Share  bool    // a share of one, printed per cent; its differences in percentage points
	Unit   string  // of a difference as it is printed, in the singular: "percentage point", "nat"
	Target float64 // of a metric that counts epochs to a target, else 0
	read   func(*Epoch) float64
	of     *Metric // what is to reach the target; nil: not a metric of epochs

	// Of missed faults: the share of false alarms, and the answers they are told from.
	falseAlarms float64
	alarms      func(*Epoch) *ClassScores
}

// Units of differences; cross-entropies have natural logarithms.
const (
	point  = "percentage point"
	nat    = "nat"
	target = "unit of the target"
	loss   = "unit of the loss" // of a regression's loss, whichever it is
)

// metrics is the table of what a plan may claim something about. A new metric
// is one more line.
var metrics = []Metric{
	{Name: "test accuracy", Higher: true, Data: "test", Share: true, Unit: point, read: func(e *Epoch) float64 { return e.TestMetric }},
	{Name: "test loss", Higher: false, Data: "test", Share: false, Unit: nat, read: func(e *Epoch) float64 { return e.TestLoss }},
	{Name: "validation accuracy", Higher: true, Data: "validation", Share: true, Unit: point, read: func(e *Epoch) float64 { return e.ValidationMetric }},
	{Name: "validation loss", Higher: false, Data: "validation", Share: false, Unit: nat, read: func(e *Epoch) float64 { return e.ValidationLoss }},
	{Name: "test RMSE", Higher: false, Data: "test", Share: false, Unit: target, read: func(e *Epoch) float64 { return rmse(e.TestRMSE, e.TestLoss, e.TestMetric) }},
	{Name: "validation RMSE", Higher: false, Data: "validation", Share: false, Unit: target, read: func(e *Epoch) float64 { return rmse(e.ValidationRMSE, e.ValidationLoss, e.ValidationMetric) }},
	{Name: "training accuracy", Higher: true, Data: "training", Share: true, Unit: point, read: func(e *Epoch) float64 { return e.TrainMetric }},
	{Name: "training loss", Higher: false, Data: "training", Share: false, Unit: nat, read: func(e *Epoch) float64 { return e.TrainLoss }},
	{Name: "training RMSE", Higher: false, Data: "training", Share: false, Unit: target, read: func(e *Epoch) float64 { return rmse(e.TrainRMSE, e.TrainLoss, e.TrainMetric) }},
}

// rmse is NaN of epochs without an evaluation, of classifications, and of runs
// recorded before this RMSE was: an RMSE of 0 has a loss of 0.
func rmse(x, loss, accuracy float64) float64 {
	if loss != loss || accuracy == accuracy || x == 0 && loss != 0 {
		return math.NaN()
	}
	return x
}

// RMSE are those of an epoch, NaN where there is none.
func (e *Epoch) RMSE() (training, validation, test float64) {
	return rmse(e.TrainRMSE, e.TrainLoss, e.TrainMetric),
		rmse(e.ValidationRMSE, e.ValidationLoss, e.ValidationMetric),
		rmse(e.TestRMSE, e.TestLoss, e.TestMetric)
}

// Of is the metric as it is of classes or of a regression, whose losses are no
// cross-entropies and so not in nats.
func (m Metric) Of(regression bool) Metric {
	if regression && m.Unit == nat {
		m.Unit = loss
	}
	return m
}

// Units are the unit in the plural, empty where there is none.
func (m Metric) Units() string {
	switch rest, counted := strings.CutPrefix(m.Unit, "unit "); {
	case m.Unit == "":
		return ""
	case counted:
		return "units " + rest
	}
	return m.Unit + "s"
}

// FindMetric returns the metric of that name; besides those that MetricNames
// lists, those of one class or of alarms (see QualifyMetric), and "epochs to test
// accuracy 0.9" and its like with any of them and any target.
func FindMetric(name string) (Metric, bool) {
	name = strings.TrimSpace(name)
	for _, m := range metrics {
		if m.Name == name {
			return m, true
		}
	}
	if m, known := findQualified(name); known {
		return m, true
	}
	return findTarget(name)
}

// MetricNames are the names of the metrics that take neither class, nor rate, nor
// target.
func MetricNames() []string {
	names := make([]string, len(metrics))
	for i, m := range metrics {
		names[i] = m.Name
	}
	return names
}

// Final is the metric after the last epoch of a run, never the best one. A run
// that diverged is scored as it stands. NaN: the run has no epoch, or the
// metric was not evaluated at its last one. A metric that counts epochs to a
// target is read from all of them.
func (m Metric) Final(r *Run) float64 {
	switch {
	case m.of != nil:
		return m.epochsTo(r)
	case len(r.Epochs) == 0:
		return math.NaN()
	}
	return m.read(&r.Epochs[len(r.Epochs)-1])
}

// Gain is how much better a is than b: a - b where more is better, b - a where
// less is.
func (m Metric) Gain(a, b float64) float64 {
	if m.Higher {
		return a - b
	}
	return b - a
}
