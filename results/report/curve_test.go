package report

import (
	"math"
	"testing"

	"ulpine/results"
)

func TestTrainingCurve(t *testing.T) {
	var runs []*results.Run
	for k := range 3 {
		r := &results.Run{Replicate: uint64(k), Epochs: make([]results.Epoch, 25)}
		for i := range 400 {
			r.Steps = append(r.Steps, float64(k+1)*float64(i))
		}
		runs = append(runs, r)
	}
	// The last one diverges in step 120, which the loss shows; it holds no more.
	runs[2].Steps = append(runs[2].Steps[:120], math.NaN())
	runs[2].Diverged, runs[2].Epochs = "NaN in the loss", runs[2].Epochs[:8]
	k := newClock(runs)
	if k.per != 16 || k.steps != 400 {
		t.Fatalf("%+v", k)
	}
	c := k.training(runs)
	if len(c.X) != mostBins || c.N != 3 || c.Diverged != 1 {
		t.Fatalf("%d points, %d runs, %d diverged", len(c.X), c.N, c.Diverged)
	}
	// Bin 10 holds steps 40..43, mean 41.5; it stands at step 42.
	if c.X[10] != 42.0/16 || c.Mid[10] != 83 || c.Low[10] != 41.5 || c.High[10] != 3*41.5 {
		t.Errorf("bin 10: x %v, %v %v %v", c.X[10], c.Low[10], c.Mid[10], c.High[10])
	}
	if got := c.Each[2][29]; got != 3*117.5 {
		t.Errorf("before it diverged: %v", got)
	}
	for _, i := range []int{30, 31, 99} {
		if !math.IsInf(c.Each[2][i], 1) || !math.IsInf(c.High[i], 1) || math.IsInf(c.Mid[i], 0) {
			t.Errorf("bin %d after divergence: %v, median %v", i, c.Each[2][i], c.Mid[i])
		}
	}
}

func TestCurveOfRunsBrokenOff(t *testing.T) {
	full := &results.Run{Steps: make([]float64, 300), Epochs: make([]results.Epoch, 30)}
	part := &results.Run{Steps: make([]float64, 150), Epochs: make([]results.Epoch, 10), State: results.BrokenOff}
	for i := range full.Steps {
		full.Steps[i] = 1
	}
	for i := range part.Steps {
		part.Steps[i] = 3
	}
	c := newClock([]*results.Run{part, full}).training([]*results.Run{part, full})
	if c.Mid[10] != 2 || c.Mid[99] != 1 {
		t.Errorf("what is missing is not left out: %v, %v", c.Mid[10], c.Mid[99])
	}
}

func TestBins(t *testing.T) {
	for _, c := range []struct{ steps, epochs, want int }{{0, 10, 0}, {10, 1, 10}, {1000, 1, 24}, {1000, 10, 40}, {1000, 300, 100}} {
		if got := (clock{steps: c.steps, epochs: c.epochs}).bins(); got != c.want {
			t.Errorf("%+v: %d", c, got)
		}
	}
}

func TestCurveByEpoch(t *testing.T) {
	nan := math.NaN()
	run := func(diverged string, loss ...float64) *results.Run {
		r := &results.Run{Diverged: diverged}
		for _, l := range loss {
			r.Epochs = append(r.Epochs, results.Epoch{TestLoss: l})
		}
		return r
	}
	runs := []*results.Run{run("", nan, 2, nan, 1), run("", nan, 4, nan, 3), run("NaN", nan, 9)}
	c := clock{epochs: 4}.byEpoch(runs, func(e *results.Epoch) float64 { return e.TestLoss })
	if !math.IsNaN(c.Mid[0]) || c.Mid[1] != 4 || !math.IsNaN(c.Mid[2]) || c.Mid[3] != 3 {
		t.Errorf("medians %v", c.Mid)
	}
	if c.last() != 3 {
		t.Errorf("ends at %d", c.last())
	}
}
