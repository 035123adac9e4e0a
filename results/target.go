package results

import (
	"math"
	"strconv"
	"strings"
)

// targetPrefix opens the name of a metric that counts epochs.
const targetPrefix = "epochs to "

// findTarget returns the metric "epochs to test accuracy 0.9": how many epochs a
// run takes until another metric first reaches a target. It is no row of the table
// of metrics, since it takes a number. Fewer is better.
func findTarget(name string) (Metric, bool) {
	rest, isTarget := strings.CutPrefix(name, targetPrefix)
	at := strings.LastIndexByte(rest, ' ')
	if !isTarget || at < 0 {
		return Metric{}, false
	}
	of, known := FindMetric(rest[:at])
	target, err := strconv.ParseFloat(rest[at+1:], 64)
	if !known || of.of != nil || err != nil || !(target > 0) || math.IsInf(target, 0) || of.Share && target > 1 {
		return Metric{}, false
	}
	return Metric{Name: name, Data: of.Data, Unit: "epoch", Target: target, of: &of}, true
}

// epochsTo counts the epochs until the target is reached; the first is 1. A run
// that was trained to the end without reaching it counts as one epoch more than
// it was trained for, the least that it can have needed; Missed tells of it. NaN:
// it diverged before, or the metric was not evaluated at every epoch up to there.
func (m Metric) epochsTo(r *Run) float64 {
	for i := range r.Epochs {
		x := m.of.read(&r.Epochs[i])
		switch {
		case x != x:
			return math.NaN()
		case m.of.Gain(x, m.Target) >= 0:
			return float64(i + 1)
		}
	}
	if r.Diverged != "" || len(r.Epochs) == 0 {
		return math.NaN()
	}
	return float64(len(r.Epochs) + 1)
}

// Missed reports whether a run never reached the target of a metric that has one,
// so that its count of epochs is only a lower bound.
func (m Metric) Missed(r *Run) bool {
	return m.of != nil && m.epochsTo(r) > float64(len(r.Epochs))
}
