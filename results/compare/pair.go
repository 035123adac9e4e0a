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
	Margin       float64  // > 0
	Confidence   float64  // of the two-sided interval, in (0, 1)
	Planned      int      // pairs the plan asks for; 0: as many as there are
	LookEvery    int      // pairs between looks; 0: one look, at Planned pairs
	Headline     bool     // a contrast the plan asks for
	Classes      []string // names of the classes, for what is said of them
	Regression   bool     // there are targets of values, no classes
}

// Pair compares the runs of an arm with those of another by replicate. Runs that
// are not stored, or have no partner, are left out; the order of the arguments
// does not matter and stays as it is. The verdict is still open: Decide gives it
// to a whole table.
func Pair(q Question, arm, against []results.Run) results.Comparison {
	c := results.Comparison{
		Arm: q.Arm, Against: q.Against, Metric: q.Metric.Name, Margin: q.Margin,
		Confidence: q.Confidence, Planned: q.Planned, LookEvery: q.LookEvery, Headline: q.Headline,
		Regression: q.Regression,
	}
	mine, theirs := byReplicate(arm), byReplicate(against)
	for replicate := range mine {
		if theirs[replicate] != nil {
			c.Replicates = append(c.Replicates, replicate)
		}
	}
	slices.Sort(c.Replicates)
	identical := true
	c.Same = len(c.Replicates) > 0
	var pairs [][2]*results.Run
	var missed [2]int
	for _, replicate := range c.Replicates {
		a, b := mine[replicate], theirs[replicate]
		pairs = append(pairs, [2]*results.Run{a, b})
		c.Differences = append(c.Differences, q.Metric.Gain(q.Metric.Final(a), q.Metric.Final(b)))
		c.Diverged += count(a.Diverged != "")
		c.AgainstDiverged += count(b.Diverged != "")
		c.Stalled += count(a.Stalled)
		missed[0] += count(q.Metric.Missed(a))
		missed[1] += count(q.Metric.Missed(b))
		identical = identical && a.Digest == b.Digest && !a.Digest.IsZero()
		c.Same = c.Same && a.Key == b.Key && !a.Key.IsZero()
	}
	c.N = len(c.Differences)
	c.Classes = classDifferences(q, pairs)
	c.Items = compareItems(q, pairs)
	c.DivergedLow, c.DivergedHigh = results.ExactRate(uint64(c.Diverged), uint64(c.N), c.Confidence)
	estimate(&c)
	c.Warnings = append(doubts(&c, identical), missedDoubts(&c, missed)...)
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
	c.StudentLow, c.StudentHigh, c.FlipLow, c.FlipHigh = nan, nan, nan, nan
	c.Middle, c.RankLow, c.RankHigh = nan, nan, nan
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
	c.P, c.PWorse = pValues(c.Mean, c.SD, c.N, c.Margin)
	if c.N <= mostPairs {
		further(c)
	}
}

// mostPairs is up to how many pairs the intervals beside the t interval are
// formed: beyond, they agree with it and take long.
const mostPairs = 1000

// further sets the intervals beside the t interval.
func further(c *results.Comparison) {
	c.BootLow, c.BootHigh = bootstrap(c.Differences, mean, c.Confidence)
	c.StudentLow, c.StudentHigh = studentised(c.Differences, c.Confidence)
	c.FlipLow, c.FlipHigh = signFlip(c.Differences, c.Confidence)
	c.Middle, c.RankLow, c.RankHigh = signedRank(c.Differences, c.Confidence)
	if skewed(c) {
		c.Offered = Studentised
	}
}

// Studentised is the name of the interval that holds best for skewed differences.
const Studentised = "studentised bootstrap"

func allFinite(xs []float64) bool {
	return !slices.ContainsFunc(xs, func(x float64) bool { return math.IsNaN(x) || math.IsInf(x, 0) })
}
