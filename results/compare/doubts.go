package compare

import (
	"fmt"
	"math"

	"ulpine/results"
)

// fewForSkewness: below this many values a skewness says next to nothing.
const fewForSkewness = 8

// doubts are the warnings that travel with a comparison into the report.
// Their readers put the arm's name before them, so none begins with it.
// identical: every pair of runs has one digest.
func doubts(c *results.Comparison, identical bool) (warnings []string) {
	warn := func(format string, args ...any) { warnings = append(warnings, fmt.Sprintf(format, args...)) }
	switch {
	case c.N == 0:
		warn("no pair of runs is stored yet")
	case c.Same:
		warn("it has the arithmetic of the arm it is compared with, so their runs are the very same, in any replicate: this decides at once")
	case c.N < c.Planned && complete(c):
		warn("%s: looked at after %d of at most %d pairs; the chance of error is shared out among the looks, but the drawn interval is not widened for them",
			lookWords(c), lookedAt(c), c.Planned)
	case c.N < c.Planned:
		warn("%d of %d planned pairs are stored; the verdict waits for %s", c.N, c.Planned, awaited(c))
	}
	if c.N == 1 {
		warn("one pair gives no interval and no verdict: ask for two replicates or more")
	}
	if c.Diverged > 0 && c.AgainstDiverged > 0 {
		warn("diverged in %d of %s, and the arm it is compared with in %d: no verdict", c.Diverged, number(c.N, "replicate"), c.AgainstDiverged)
	} else if c.Diverged > 0 {
		low, high := results.ExactRate(uint64(c.Diverged), uint64(c.N), c.Confidence)
		warn("diverged in %d of %s (exact %s %% interval %s to %s %%); they are scored as they stood",
			c.Diverged, number(c.N, "replicate"), amount(100*c.Confidence), amount(100*low), amount(100*high))
	}
	if c.AgainstDiverged > 0 && c.Diverged == 0 {
		warn("the arm it is compared with diverged in %d of %s: no verdict", c.AgainstDiverged, number(c.N, "replicate"))
	}
	if c.Stalled > 0 {
		warn("stalled in %d of %s: the training loss hardly fell below a constant predictor's", c.Stalled, number(c.N, "replicate"))
	}
	if c.N > 0 && !allFinite(c.Differences) {
		warn("the %s of some runs is not a finite number: no mean, no interval", c.Metric)
	}
	if c.Diverged > 0 || c.AgainstDiverged > 0 {
		return warnings // no interval decides anything
	}
	return append(warnings, spreadDoubts(c, identical)...)
}

// missedDoubts are about runs that never reached the target of the metric, in the
// arm and in the one it is compared with.
func missedDoubts(c *results.Comparison, missed [2]int) (warnings []string) {
	for i, who := range []string{"", "the arm it is compared with "} {
		if missed[i] > 0 {
			warnings = append(warnings, fmt.Sprintf(
				"%snever reached the target in %d of %s: one epoch more than was trained for is counted, the least it can have needed",
				who, missed[i], number(c.N, "replicate")))
		}
	}
	return warnings
}

// lookWords is which look the latest one is: "look 2 of 8".
func lookWords(c *results.Comparison) string {
	l, _ := looks(c)
	at := l.At()
	number := 0
	for number < len(at) && at[number] <= c.N {
		number++
	}
	return fmt.Sprintf("look %d of %d", number, len(at))
}

// awaited says which pairs a verdict waits for.
func awaited(c *results.Comparison) string {
	if l, several := looks(c); several {
		return fmt.Sprintf("the first look at %d", l.At()[0])
	}
	return "all of them"
}

// spreadDoubts are the doubts about how the differences are distributed.
func spreadDoubts(c *results.Comparison, identical bool) (warnings []string) {
	w := newMeasure(c)
	switch {
	case math.IsNaN(c.SD):
		return nil
	case c.SD == 0 && !identical:
		return []string{fmt.Sprintf("all %d differences are exactly %s, so the interval has no width, although the runs differ: the metric is too coarse to tell",
			c.N, w.with(amount(w.scale(c.Mean))))}
	case c.SD == 0:
		return nil
	}
	if c.Offered != "" {
		warnings = append(warnings, fmt.Sprintf(
			"the differences are skewed (skewness %s, beyond two standard errors), and the t interval then misses too often; the %s interval holds best: %s",
			minus(fmt.Sprintf("%.2f", c.Skewness)), c.Offered, w.with(w.span(c.StudentLow, c.StudentHigh))))
		if where := side(c.StudentLow, c.StudentHigh, c.Margin); where != side(c.Low, c.High, c.Margin) {
			warnings = append(warnings, fmt.Sprintf("the %s interval and the t interval do not agree about the margin", c.Offered))
		}
	}
	return append(warnings, disagreement(c)...)
}

// skewed reports whether the skewness lies beyond two of its standard errors
// (common practice); below a few pairs it says next to nothing.
func skewed(c *results.Comparison) bool {
	return c.N >= fewForSkewness && math.Abs(c.Skewness) > 2*skewnessError(c.N)
}

// disagreement says which intervals see the margin elsewhere than the t interval
// does. One without ends, for want of pairs, sees nothing.
func disagreement(c *results.Comparison) (warnings []string) {
	w := newMeasure(c)
	type named struct {
		name      string
		low, high float64
	}
	var others []named
	switch {
	case c.N >= results.FewForBCa:
		others = append(others, named{"BCa bootstrap", c.BootLow, c.BootHigh})
	case c.Offered == "": // else told of already
		others = append(others, named{Studentised, c.StudentLow, c.StudentHigh})
	}
	if i := c.Items; i != nil && i.Crossed && !math.IsNaN(i.Low) && side(c.Low, c.High, c.Margin) != side(i.Low, i.High, c.Margin) {
		warnings = append(warnings, fmt.Sprintf("the verdict is about these %d test examples, which all replicates share: over other examples too the interval is %s (two-way bootstrap), which lies otherwise to the margin",
			i.Items, w.with(w.span(i.Low, i.High))))
	}
	for _, other := range append(others, named{"sign-flip", c.FlipLow, c.FlipHigh}) {
		if math.IsNaN(other.low) || math.IsInf(other.low, 0) || side(c.Low, c.High, c.Margin) == side(other.low, other.high, c.Margin) {
			continue
		}
		warnings = append(warnings, fmt.Sprintf("t and %s intervals do not agree about the margin (%s %s)",
			other.name, other.name, w.with(w.span(other.low, other.high))))
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
