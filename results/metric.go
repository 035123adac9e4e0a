package results

import (
	"math"
	"strings"
)

// Metric is a figure by which runs are compared: how it is called, whether more
// of it is better, and how it is read from an epoch.
type Metric struct {
	Name   string
	Higher bool   // more is better
	Data   string // "training", "validation" or "test": the examples it is measured on
	Share  bool   // a share of one, printed per cent; its differences in percentage points
	Unit   string // of a difference as it is printed, in the singular: "percentage point", "nat"
	read   func(*Epoch) float64
}

// Units of differences; losses are cross-entropies with natural logarithms.
const (
	point = "percentage point"
	nat   = "nat"
)

// metrics is the table of what a plan may claim something about. A new metric
// is one more line.
var metrics = []Metric{
	{"test accuracy", true, "test", true, point, func(e *Epoch) float64 { return e.TestMetric }},
	{"test loss", false, "test", false, nat, func(e *Epoch) float64 { return e.TestLoss }},
	{"validation accuracy", true, "validation", true, point, func(e *Epoch) float64 { return e.ValidationMetric }},
	{"validation loss", false, "validation", false, nat, func(e *Epoch) float64 { return e.ValidationLoss }},
	{"training accuracy", true, "training", true, point, func(e *Epoch) float64 { return e.TrainMetric }},
	{"training loss", false, "training", false, nat, func(e *Epoch) float64 { return e.TrainLoss }},
}

// FindMetric returns the metric of that name.
func FindMetric(name string) (Metric, bool) {
	for _, m := range metrics {
		if m.Name == strings.TrimSpace(name) {
			return m, true
		}
	}
	return Metric{}, false
}

// MetricNames are the names that FindMetric knows.
func MetricNames() []string {
	names := make([]string, len(metrics))
	for i, m := range metrics {
		names[i] = m.Name
	}
	return names
}

// Final is the metric after the last epoch of a run, never the best one. A run
// that diverged is scored as it stands. NaN: the run has no epoch, or the
// metric was not evaluated at its last one.
func (m Metric) Final(r *Run) float64 {
	if len(r.Epochs) == 0 {
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
