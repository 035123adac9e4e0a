package compare

import (
	"math"
	"slices"

	"ulpine/results"
)

// Question is what is asked about two arms.
type Question struct {
	Arm, Against string // slugs
	Metric       results.Metric
	Margin       float64 // > 0
	Confidence   float64 // of the two-sided interval, in (0, 1)
	Planned      int     // pairs the plan asks for; 0: as many as there are
	Headline     bool    // a contrast the plan asks for
}

// Pair compares the runs of an arm with those of another by replicate. Runs that
// are not stored, or have no partner, are left out; the order of the arguments
// does not matter and stays as it is. The verdict is still open: Decide gives it
// to a whole table.
func Pair(q Question, arm, against []results.Run) results.Comparison {
	c := results.Comparison{
		Arm: q.Arm, Against: q.Against, Metric: q.Metric.Name, Margin: q.Margin,
		Confidence: q.Confidence, Planned: q.Planned, Headline: q.Headline,
	}
	mine, theirs := byReplicate(arm), byReplicate(against)
	for replicate := range mine {
		if theirs[replicate] != nil {
			c.Replicates = append(c.Replicates, replicate)
		}
	}
	slices.Sort(c.Replicates)
	identical := true
	for _, replicate := range c.Replicates {
		a, b := mine[replicate], theirs[replicate]
		c.Differences = append(c.Differences, q.Metric.Gain(q.Metric.Final(a), q.Metric.Final(b)))
		c.Diverged += count(a.Diverged != "")
		c.AgainstDiverged += count(b.Diverged != "")
		c.Stalled += count(a.Stalled)
		identical = identical && a.Digest == b.Digest && !a.Digest.IsZero()
	}
	c.N = len(c.Differences)
	estimate(&c)
	c.Warnings = doubts(&c, identical)
	return c
}

// byReplicate indexes the stored runs of an arm.
func byReplicate(runs []results.Run) map[uint64]*results.Run {
	index := make(map[uint64]*results.Run, len(runs))
	for i := range runs {
		if runs[i].State == results.Stored {
			index[runs[i].Replicate] = &runs[i]
		}
	}
	return index
}

func count(yes bool) int {
	if yes {
		return 1
	}
	return 0
}

// estimate sets mean, SD, intervals, skewness and p-values from the differences.
// What cannot be said is NaN.
func estimate(c *results.Comparison) {
	nan := math.NaN()
	c.Mean, c.SD, c.Skewness = nan, nan, nan
	c.Low, c.High, c.BootLow, c.BootHigh = nan, nan, nan, nan
	c.P, c.Holm, c.PWorse, c.HolmWorse = nan, nan, nan, nan
	if c.N == 0 {
		return
	}
	c.Mean = mean(c.Differences)
	if c.N == 1 || !allFinite(c.Differences) {
		return
	}
	c.SD = deviation(c.Differences)
	c.Skewness = skewness(c.Differences)
	c.Low, c.High = interval(c.Mean, c.SD, c.N, c.Confidence)
	c.BootLow, c.BootHigh = bootstrap(c.Differences, mean, c.Confidence)
	c.P, c.PWorse = pValues(c.Mean, c.SD, c.N, c.Margin)
}

func allFinite(xs []float64) bool {
	return !slices.ContainsFunc(xs, func(x float64) bool { return math.IsNaN(x) || math.IsInf(x, 0) })
}
