package report

import (
	"math"

	"ulpine/results"
)

// A drawn training curve has four points an epoch, and within these bounds: the
// losses of single steps scatter too much to be read as a line.
const (
	binsAnEpoch = 4
	leastBins   = 24
	mostBins    = 100
)

// bins is the number of points of a training curve.
func (c clock) bins() int {
	return min(max(leastBins, min(mostBins, binsAnEpoch*c.epochs)), c.steps)
}

// curve is one figure of an arm over training time: the median over replicates
// and the band between the quartiles, and each replicate by itself. X is in
// epochs. A run that diverged counts as infinite from there on.
type curve struct {
	X, Low, Mid, High []float64
	Each              [][]float64 // one a run, over X
	Runs              []*results.Run
	N                 int // runs with at least one value
	Diverged          int
}

// empty reports whether there is nothing to draw.
func (c *curve) empty() bool {
	for _, v := range c.Mid {
		if !math.IsNaN(v) && !math.IsInf(v, 0) {
			return false
		}
	}
	return true
}

// last is the index of the last point whose median is finite; -1: none.
func (c *curve) last() int {
	for i := len(c.Mid) - 1; i >= 0; i-- {
		if !math.IsNaN(c.Mid[i]) && !math.IsInf(c.Mid[i], 0) {
			return i
		}
	}
	return -1
}

// clock is the common time axis of a study's curves.
type clock struct {
	steps  int     // steps of a full run; 0: runs hold no steps, and epochs are the unit
	epochs int     // epochs of a full run
	per    float64 // steps an epoch
}

// newClock reads the axis off the longest run.
func newClock(runs []*results.Run) clock {
	var c clock
	for _, r := range runs {
		c.steps = max(c.steps, len(r.Steps))
		c.epochs = max(c.epochs, len(r.Epochs))
	}
	for _, r := range runs {
		if c.epochs > 0 && len(r.Epochs) == c.epochs && len(r.Steps) > 0 && r.Diverged == "" {
			c.per = float64(len(r.Steps)) / float64(c.epochs)
		}
	}
	if c.per == 0 {
		c.per = math.Max(1, float64(c.steps)/math.Max(1, float64(c.epochs)))
	}
	return c
}

// training is the training loss of runs by step, averaged within bins.
func (c clock) training(runs []*results.Run) curve {
	if c.steps == 0 {
		return c.byEpoch(runs, func(e *results.Epoch) float64 { return e.TrainLoss })
	}
	n := c.bins()
	var out curve
	for b := range n {
		// A bin stands at the middle of its steps.
		out.X = append(out.X, (float64(b)+0.5)*float64(c.steps)/float64(n)/c.per)
	}
	for _, r := range runs {
		y := make([]float64, n)
		for b := range n {
			y[b] = binned(r, b*c.steps/n, (b+1)*c.steps/n)
		}
		out.add(r, y)
	}
	out.summarise()
	return out
}

// binned is the mean loss of steps from..to of a run: NaN where the run has
// none, infinite where it had diverged.
func binned(r *results.Run, from, to int) float64 {
	sum, n := 0.0, 0
	for i := from; i < to; i++ {
		if i >= len(r.Steps) {
			if r.Diverged != "" {
				return math.Inf(1)
			}
			break
		}
		if v := r.Steps[i]; math.IsNaN(v) || math.IsInf(v, 0) {
			return math.Inf(1)
		}
		sum += r.Steps[i]
		n++
	}
	if n == 0 {
		return math.NaN()
	}
	return sum / float64(n)
}

// byEpoch is a figure that is known once an epoch.
func (c clock) byEpoch(runs []*results.Run, read func(*results.Epoch) float64) curve {
	var out curve
	for e := range c.epochs {
		out.X = append(out.X, float64(e+1))
	}
	for _, r := range runs {
		y := make([]float64, c.epochs)
		for e := range y {
			switch {
			case e < len(r.Epochs):
				y[e] = read(&r.Epochs[e])
			case r.Diverged != "":
				y[e] = math.Inf(1)
			default:
				y[e] = math.NaN()
			}
		}
		out.add(r, y)
	}
	out.summarise()
	return out
}

// add takes a run's values; a run without any is left out.
func (c *curve) add(r *results.Run, y []float64) {
	some := false
	for _, v := range y {
		some = some || !(math.IsNaN(v) || math.IsInf(v, 0))
	}
	if r.Diverged != "" {
		c.Diverged++
	}
	if some {
		c.N++
		c.Each = append(c.Each, y)
		c.Runs = append(c.Runs, r)
	}
}

// summarise forms median and band at every point. Points at which nothing was
// evaluated stay NaN.
func (c *curve) summarise() {
	at := make([]float64, len(c.Each))
	for i := range c.X {
		finite := false
		for k, y := range c.Each {
			at[k] = y[i]
			finite = finite || !(math.IsNaN(y[i]) || math.IsInf(y[i], 0))
		}
		lo, mid, hi, _ := middle(at)
		if !finite {
			lo, mid, hi = math.NaN(), math.NaN(), math.NaN()
		}
		c.Low, c.Mid, c.High = append(c.Low, lo), append(c.Mid, mid), append(c.High, hi)
	}
}
