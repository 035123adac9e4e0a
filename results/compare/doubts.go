package compare

import (
	"fmt"
	"math"

	"ulpine/results"
)

// fewForSkewness: below this many values a skewness says next to nothing.
const fewForSkewness = 8

// doubts are the warnings that travel with a comparison into the report.
// identical: every pair of runs has one digest.
func doubts(c *results.Comparison, identical bool) (warnings []string) {
	warn := func(format string, args ...any) { warnings = append(warnings, fmt.Sprintf(format, args...)) }
	switch {
	case c.N == 0:
		warn("no pair of runs is stored yet")
	case c.N < c.Planned:
		warn("%d of %d planned pairs are stored; the verdict waits for all of them", c.N, c.Planned)
	}
	if c.N == 1 {
		warn("one pair gives no interval and no verdict: ask for two replicates or more")
	}
	if c.Diverged > 0 {
		warn("%s diverged in %d of %d replicates; they are scored as they stood", c.Arm, c.Diverged, c.N)
	}
	if c.AgainstDiverged > 0 {
		warn("%s, which it is compared with, diverged in %d of %d replicates: no verdict", c.Against, c.AgainstDiverged, c.N)
	}
	if c.Stalled > 0 {
		warn("%s stalled in %d of %d replicates: its training loss hardly fell below a constant predictor's", c.Arm, c.Stalled, c.N)
	}
	if c.N > 0 && !allFinite(c.Differences) {
		warn("the %s of some runs is not a finite number: no mean, no interval", c.Metric)
	}
	return append(warnings, spreadDoubts(c, identical)...)
}

// spreadDoubts are the doubts about how the differences are distributed.
func spreadDoubts(c *results.Comparison, identical bool) (warnings []string) {
	switch {
	case math.IsNaN(c.SD):
		return nil
	case c.SD == 0 && !identical:
		return []string{fmt.Sprintf("all %d differences are exactly %.4g, so the interval has no width, although the runs differ: the metric is too coarse to tell", c.N, c.Mean)}
	case c.SD == 0:
		return nil
	}
	// two standard errors: common practice
	if limit := 2 * skewnessError(max(c.N, 3)); c.N >= fewForSkewness && math.Abs(c.Skewness) > limit {
		warnings = append(warnings, fmt.Sprintf(
			"the differences are skewed (skewness %.2f, more than %.2f, two standard errors): trust the bootstrap interval as much as the t interval", c.Skewness, limit))
	}
	if side(c.Low, c.High, c.Margin) != side(c.BootLow, c.BootHigh, c.Margin) {
		warnings = append(warnings, fmt.Sprintf(
			"t and bootstrap intervals do not agree about the margin (bootstrap %.4g to %.4g)", c.BootLow, c.BootHigh))
	}
	return warnings
}

// side says where an interval lies: 1 above -margin, -1 below, 0 across it.
func side(low, high, margin float64) int {
	switch {
	case low > -margin:
		return 1
	case high < -margin:
		return -1
	}
	return 0
}
