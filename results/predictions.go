package results

import "math"

// Predictions are what a run said of every test example after its last epoch, in
// the order of the test set. Of a classification Called and Truth are set, of a
// regression Values and Targets. They change no bit of a run and are not in its
// digest: they follow from its weights.
type Predictions struct {
	Called []int32 // class called; -1: none, an output was NaN
	Truth  []int32 // class

	Outputs int       // of a regression; 0: a classification
	Values  []float32 // [examples, outputs], rounded to binary32 where the network had more
	Targets []float32 // [examples, outputs]
}

// Examples is the number of test examples.
func (p *Predictions) Examples() int {
	if p.Outputs > 0 {
		return len(p.Values) / p.Outputs
	}
	return len(p.Called)
}

// Sound reports whether every example has what belongs to it.
func (p *Predictions) Sound() bool {
	if p.Outputs > 0 {
		return len(p.Values) == len(p.Targets) && len(p.Values)%p.Outputs == 0 && len(p.Called) == 0
	}
	return len(p.Called) == len(p.Truth)
}

// Right reports whether example i was called what it is.
func (p *Predictions) Right(i int) bool { return p.Called[i] == p.Truth[i] }

// SquaredError is the mean over outputs of the squared distance of example i from
// its target, in binary64.
func (p *Predictions) SquaredError(i int) float64 {
	var sum float64
	for k := i * p.Outputs; k < (i+1)*p.Outputs; k++ {
		d := float64(p.Values[k]) - float64(p.Targets[k])
		sum += float64(d * d)
	}
	return sum / float64(p.Outputs)
}

// ItemScore scores a test example such that the metric is an aggregate of the mean
// of those scores over the test set: the accuracy is the mean of right answers, the
// RMSE the root of the mean of squared distances. ok is false for metrics that
// predictions do not determine.
func (m Metric) ItemScore() (score func(p *Predictions, i int) float64, aggregate func(mean float64) float64, ok bool) {
	switch m.Name {
	case "test accuracy":
		return func(p *Predictions, i int) float64 {
			if p.Right(i) {
				return 1
			}
			return 0
		}, func(mean float64) float64 { return mean }, true
	case "test RMSE":
		return (*Predictions).SquaredError, math.Sqrt, true
	}
	return nil, nil, false
}

// ItemComparison compares two arms test example by test example, from the stored
// predictions of their pairs.
type ItemComparison struct {
	Items      int     `json:"items"` // test examples of a replicate
	Replicates int     `json:"replicates"`
	Crossed    bool    `json:"crossed"` // every replicate has the same test examples; else each its own
	Method     string  `json:"method"`  // of the interval, in words with its source
	Low        float64 `json:"-"`       // two-way bootstrap over replicates and examples; NaN: none
	High       float64 `json:"-"`
	// ItemShare is the estimated share of the variance of the mean difference that
	// comes of which examples are tested on; NaN where it cannot be told.
	ItemShare float64 `json:"-"`
	// Of a classification, summed over pairs: examples that only the arm calls
	// rightly, those that only the other does, and those called differently.
	Gained  int `json:"gained"`
	Lost    int `json:"lost"`
	Changed int `json:"changed"`
	// Flips are the same, one a pair, in the order of the comparison's replicates.
	Flips []Flips `json:"flips,omitempty"`
}

// Flips are the discordant test examples of one pair of runs, the off-diagonal
// counts of McNemar's table.
type Flips struct {
	Replicate uint64 `json:"replicate"`
	Gained    int    `json:"gained"` // right in the arm, wrong in the other
	Lost      int    `json:"lost"`   // wrong in the arm, right in the other
	Changed   int    `json:"changed"`
	// P is the exact two-sided p-value of McNemar's test on these two runs alone:
	// gained and lost are as likely. It says nothing of other replicates.
	P float64 `json:"p"`
}
