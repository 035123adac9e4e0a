package compare

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/stat/distuv"
)

// The words with which a two-way interval is told, each with its source.
const (
	crossedMethod = "replicates and test examples each resampled with replacement, independently of each other (the pigeonhole bootstrap: " +
		"Owen, Ann. Appl. Statist. 1, 2007, 386-411), percentiles expanded for few replicates (Hesterberg, Am. Statist. 69, 2015, 371-386)"
	nestedMethod = "replicates resampled with replacement, each with the test examples that were drawn for it " +
		"(Davison and Hinkley, Bootstrap Methods and their Application, 1997, section 3.8), percentiles expanded for few replicates " +
		"(Hesterberg, Am. Statist. 69, 2015, 371-386)"
)

// twoWaySeed is fixed, so that a report comes out the same every time.
const twoWaySeed draws = 2007

// table holds the scores of test examples in the pairs of two arms.
type table struct {
	arm, against [][]float64 // [pairs][examples]
	aggregate    func(mean float64) float64
	linear       bool    // aggregate is the identity
	sign         float64 // of the gain: 1 where more of the metric is better
	resamples    int
}

// gain is the metric's gain of pair r, its examples counted weight times.
func (t *table) gain(r int, weight []float64) float64 {
	var a, b, sum float64
	for i, w := range weight {
		a += w * t.arm[r][i]
		b += w * t.against[r][i]
		sum += w
	}
	return t.sign * (t.aggregate(a/sum) - t.aggregate(b/sum))
}

// crossed is the two-way interval of the mean gain where every pair has the same
// test examples. Both other replicates and other test examples could have been
// drawn, and a sample of one is no sample of the other, so each is resampled by
// itself. The interval errs on the wide side: variation that belongs to neither
// alone counts three times (Owen, theorem 3), which matters where each example goes
// its own way in each replicate.
func (t *table) crossed(confidence float64) (low, high float64) {
	n, m := len(t.arm), len(t.arm[0])
	resample := t.general(n, m)
	if t.linear {
		resample = t.sparse(n, m)
	}
	means := make([]float64, t.resamples)
	for k := range means {
		means[k] = resample(twoWaySeed.stream(k))
	}
	slices.Sort(means)
	return expanded(means, n, confidence)
}

// sparse resamples gains that are means over examples. Examples in which no pair of
// runs differs add nothing: how many of a resample are among the others follows the
// binomial law, and only those are drawn.
func (t *table) sparse(n, m int) func(draws) float64 {
	var columns [][]float64 // [examples that differ somewhere][pairs]
	for i := range m {
		column := make([]float64, n)
		differs := false
		for r := range column {
			column[r] = t.sign * (t.arm[r][i] - t.against[r][i])
			differs = differs || column[r] != 0
		}
		if differs {
			columns = append(columns, column)
		}
	}
	totals, weight := make([]float64, len(columns)), make([]float64, n)
	hits := newHits(m, len(columns))
	return func(d draws) float64 {
		clear(weight)
		for j := range n {
			weight[d.below(uint64(j), n)]++
		}
		for i, column := range columns {
			totals[i] = 0
			for r, w := range weight {
				totals[i] += w * column[r]
			}
		}
		var sum float64
		for j := range hits.draw(d.word(uint64(n))) {
			sum += totals[d.below(uint64(n+1+j), len(totals))]
		}
		return sum / float64(n) / float64(m)
	}
}

// hits draws from the binomial law: how many of m draws among m fall on one of k.
type hits struct {
	first      int
	cumulative []float64 // chance of first + i or fewer
}

// farHits is how many standard deviations from its mean a draw is looked for.
const farHits = 12

func newHits(m, k int) hits {
	if k == 0 || k == m {
		return hits{first: k, cumulative: []float64{1}}
	}
	law := distuv.Binomial{N: float64(m), P: float64(k) / float64(m)}
	reach := int(farHits*law.StdDev()) + 1
	h := hits{first: max(0, k-reach)}
	for i := h.first; i <= min(m, k+reach); i++ {
		before := 0.0
		if n := len(h.cumulative); n > 0 {
			before = h.cumulative[n-1]
		}
		h.cumulative = append(h.cumulative, before+law.Prob(float64(i)))
	}
	return h
}

// draw inverts the law at a random word.
func (h hits) draw(word uint64) int {
	u := float64(word>>11) / (1 << 53)
	i, _ := slices.BinarySearch(h.cumulative, u)
	return h.first + min(i, len(h.cumulative)-1)
}

// general resamples gains of any aggregate.
func (t *table) general(n, m int) func(draws) float64 {
	examples := make([]float64, m)
	return func(d draws) float64 {
		clear(examples)
		for j := range m {
			examples[d.below(uint64(n+j), m)]++
		}
		known := make([]float64, n)
		done := make([]bool, n)
		var sum float64
		for j := range n {
			r := d.below(uint64(j), n)
			if !done[r] {
				known[r], done[r] = t.gain(r, examples), true
			}
			sum += known[r]
		}
		return sum / float64(n)
	}
}

// nested is the interval of the mean gain where each pair has test examples of its
// own: the gains of pairs vary with their examples already, and resampling those
// within a pair as well would count their variation twice.
func nested(gains []float64, resamples int, confidence float64) (low, high float64) {
	if allEqual(gains) {
		return gains[0], gains[0]
	}
	n := len(gains)
	means := make([]float64, resamples)
	for k := range means {
		d := twoWaySeed.stream(k)
		var sum float64
		for j := range n {
			sum += gains[d.below(uint64(j), n)]
		}
		means[k] = sum / float64(n)
	}
	slices.Sort(means)
	return expanded(means, n, confidence)
}

// expanded reads percentiles of ascending resampled means, further out than the
// confidence says: means of resamples of n values vary less than they should by
// sqrt((n-1)/n), and normal quantiles stand where those of t with n-1 degrees of
// freedom belong (Hesterberg's expanded percentile interval).
func expanded(means []float64, n int, confidence float64) (low, high float64) {
	t := student(n).Quantile((1 + confidence) / 2)
	tail := distuv.UnitNormal.CDF(-t * math.Sqrt(float64(n)/float64(n-1)))
	return quantile(means, tail), quantile(means, 1-tail)
}

// itemShare is the share of the variance of the mean gain that comes of the choice
// of test examples. Nested: the variation within pairs, over that between their
// gains. Crossed: by the analysis of variance of a table of pairs x examples with
// one value a cell (random effects, estimates below zero taken as zero), the part
// of the examples over all parts of the mean's variance. NaN without variance, and
// where gains are no means of examples.
func (t *table) itemShare(gains []float64, crossed bool) float64 {
	n, m := len(t.arm), len(t.arm[0])
	if !t.linear || n < 2 || m < 2 || allEqual(gains) && !crossed {
		return math.NaN()
	}
	if !crossed {
		var within float64
		for r := range t.arm {
			d := t.differences(r)
			within += moment(d, 2) / float64(m-1) / float64(m)
		}
		return min(1, within/float64(n)/(moment(gains, 2)/float64(n-1)))
	}
	columns, total := make([]float64, m), 0.0
	var all float64
	for r := range t.arm {
		for i, d := range t.differences(r) {
			columns[i] += d / float64(n)
			all += d * d
			total += d
		}
	}
	grand := total / float64(n*m)
	pairs := moment(gains, 2) * float64(m)
	examples := moment(columns, 2) * float64(n)
	rest := max(0, all-float64(n*m)*grand*grand-pairs-examples) / float64((n-1)*(m-1))
	ofPairs := max(0, pairs/float64(n-1)-rest) / float64(m)
	ofExamples := max(0, examples/float64(m-1)-rest) / float64(n)
	variance := ofPairs/float64(n) + ofExamples/float64(m) + rest/float64(n*m)
	if !(variance > 0) {
		return math.NaN()
	}
	return ofExamples / float64(m) / variance
}

// differences are the gains of pair r example by example.
func (t *table) differences(r int) []float64 {
	d := make([]float64, len(t.arm[r]))
	for i := range d {
		d[i] = t.sign * (t.arm[r][i] - t.against[r][i])
	}
	return d
}
