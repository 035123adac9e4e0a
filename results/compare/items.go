package compare

import (
	"math"

	"gonum.org/v1/gonum/stat/distuv"

	"ulpine/results"
)

// mostItems bounds the examples of two-way intervals: beyond, resampling takes long
// and the choice of examples hardly matters.
const mostItems = 100_000

// compareItems compares pairs of runs example by example; nil unless every pair has
// predictions, as many as each other.
func compareItems(q Question, pairs [][2]*results.Run) *results.ItemComparison {
	if !predicted(pairs) {
		return nil
	}
	c := &results.ItemComparison{
		Items: pairs[0][0].Predictions.Examples(), Replicates: len(pairs), Crossed: sameData(pairs),
		Low: math.NaN(), High: math.NaN(), ItemShare: math.NaN(),
	}
	for _, p := range pairs {
		if p[0].Predictions.Outputs > 0 {
			break
		}
		f := flips(p)
		c.Flips = append(c.Flips, f)
		c.Gained, c.Lost, c.Changed = c.Gained+f.Gained, c.Lost+f.Lost, c.Changed+f.Changed
	}
	twoWay(c, q, pairs)
	return c
}

// predicted reports whether all runs of all pairs kept what they said of equally
// many examples, at least one.
func predicted(pairs [][2]*results.Run) bool {
	examples := 0
	for _, pair := range pairs {
		for _, r := range pair {
			p := r.Predictions
			if p == nil || !p.Sound() || p.Examples() == 0 || examples > 0 && p.Examples() != examples {
				return false
			}
			examples = p.Examples()
		}
	}
	return len(pairs) > 0
}

// sameData reports whether all runs were tested on the same examples.
func sameData(pairs [][2]*results.Run) bool {
	first := pairs[0][0].Data
	for _, pair := range pairs {
		if pair[0].Data != first || pair[1].Data != first {
			return false
		}
	}
	return !first.IsZero()
}

// flips counts the discordant examples of a pair of runs (McNemar, Psychometrika
// 12, 1947, 153-157) with the exact binomial p-value.
func flips(pair [2]*results.Run) results.Flips {
	f := results.Flips{Replicate: pair[0].Replicate, P: 1}
	a, b := pair[0].Predictions, pair[1].Predictions
	for i := range a.Called {
		right, other := a.Right(i), b.Right(i)
		f.Gained += count(right && !other)
		f.Lost += count(other && !right)
		f.Changed += count(a.Called[i] != b.Called[i])
	}
	if n := f.Gained + f.Lost; n > 0 {
		law := distuv.Binomial{N: float64(n), P: 0.5}
		f.P = min(1, 2*law.CDF(float64(min(f.Gained, f.Lost))))
	}
	return f
}

// twoWay sets the interval over replicates and examples and the examples' share of
// the variance, where the metric follows from predictions and there are two pairs.
func twoWay(c *results.ItemComparison, q Question, pairs [][2]*results.Run) {
	score, aggregate, ok := q.Metric.ItemScore()
	if !ok || len(pairs) < 2 || len(pairs) > mostPairs || c.Items > mostItems {
		return
	}
	classes := pairs[0][0].Predictions.Outputs == 0
	if classes != q.Metric.Share {
		return // a metric of the other kind of task
	}
	t := &table{aggregate: aggregate, linear: classes, sign: q.Metric.Gain(1, 0), resamples: resamples}
	var gains []float64
	for _, pair := range pairs {
		var rows [2][]float64
		for k, r := range pair {
			rows[k] = make([]float64, c.Items)
			for i := range rows[k] {
				rows[k][i] = score(r.Predictions, i)
			}
		}
		if !allFinite(rows[0]) || !allFinite(rows[1]) {
			return // a network's output was no number
		}
		t.arm, t.against = append(t.arm, rows[0]), append(t.against, rows[1])
		gains = append(gains, q.Metric.Gain(q.Metric.Final(pair[0]), q.Metric.Final(pair[1])))
	}
	if !allFinite(gains) {
		return
	}
	c.Method, c.ItemShare = nestedMethod, t.itemShare(gains, c.Crossed)
	if c.Crossed {
		c.Method = crossedMethod
		c.Low, c.High = t.crossed(q.Confidence)
		return
	}
	c.Low, c.High = nested(gains, resamples, q.Confidence)
}
