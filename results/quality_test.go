package results

import (
	"math"
	"testing"
)

// TestQualities holds every kind to a finding worked out by hand.
func TestQualities(t *testing.T) {
	r := Run{
		Steps: make([]float64, 20), Epochs: make([]Epoch, 4), // five steps an epoch
		Findings: &Findings{
			Points: []PointFinding{
				{Epoch: 1, Layer: 2, Name: "dense 5", Point: "forward.weight", Values: 7, Signal: 1000, Noise: 1},
				{Epoch: 2, Layer: -1, Name: "loss", Point: "loss.gradient", Values: 3, Signal: 5},
			},
			Sums:    []SumFinding{{Epoch: 3, Layer: 2, Name: "dense 5", Point: "forward.sum", Count: 4, Cross: 9, Squares: 10}},
			Updates: []UpdateFinding{{Epoch: 4, Layer: 2, Param: "bias", Count: 8, Cross: 1, Squares: 4, Excess: -3, Intended: 6, Unmoved: 2}},
			Gradients: []GradientFinding{
				{Step: 5, Layer: 2, Param: "weight", Cosine: 0.5},
				{Step: 6, Layer: 2, Param: "weight", Cosine: math.NaN()},
				{Step: 20, Layer: 2, Param: "bias", Cosine: 1},
			},
		},
	}
	want := []Quality{
		{SignalToNoise, 2, "dense 5", "forward.weight", 1, 0, 7, 30},
		{SignalToNoise, -1, "loss", "loss.gradient", 2, 0, 3, math.Inf(1)},
		{SumsKept, 2, "dense 5", "forward.sum", 3, 0, 4, 0.9},
		{UpdatesKept, 2, "dense 5", "bias", 4, 0, 8, 0.25},
		{UpdateBias, 2, "dense 5", "bias", 4, 0, 8, -0.5},
		{UpdatesStill, 2, "dense 5", "bias", 4, 0, 8, 0.25},
		{GradientCosine, 2, "dense 5", "weight", 1, 5, 0, 0.5},
		{GradientCosine, 2, "dense 5", "weight", 2, 6, 0, math.NaN()},
		{GradientCosine, 2, "dense 5", "bias", 4, 20, 0, 1},
	}
	got := Qualities(&r)
	if len(got) != len(want) {
		t.Fatalf("%d qualities, want %d", len(got), len(want))
	}
	for i, w := range want {
		g := got[i]
		same := g.Value == w.Value || math.IsNaN(g.Value) && math.IsNaN(w.Value)
		g.Value, w.Value = 0, 0
		if g != w || !same {
			t.Errorf("%d: got %+v, want %+v", i, got[i], want[i])
		}
	}
	r.Findings = nil
	if Qualities(&r) != nil {
		t.Error("a run that was not looked at has qualities")
	}
}
