package main

import (
	"math"
	"strings"
	"testing"

	"ulpine/results"
)

// TestShowFindings: sums over epochs, the noisiest point, the least cosine.
func TestShowFindings(t *testing.T) {
	f := &results.Findings{
		Points: []results.PointFinding{
			{Epoch: 1, Layer: -1, Name: "input", Point: "input", Values: 1, Signal: 4},
			{Epoch: 1, Layer: 0, Name: "dense 5", Point: "forward.weight", Signal: 900, Noise: 1},
			{Epoch: 2, Layer: 0, Name: "dense 5", Point: "forward.weight", Signal: 100, Noise: 9},
			{Epoch: 2, Layer: 0, Name: "dense 5", Point: "update.master", Signal: 1000, Noise: 1},
		},
		Sums: []results.SumFinding{{Layer: 0, Cross: 1, Squares: 2}, {Layer: 0, Cross: 2, Squares: 2}},
		Updates: []results.UpdateFinding{
			{Layer: 0, Param: "weight", Cross: 1, Squares: 4, Excess: -3, Intended: 4},
			{Layer: 0, Param: "bias", Cross: 1, Squares: 4, Excess: -1, Intended: 4},
		},
		Gradients: []results.GradientFinding{{Step: 50, Cosine: math.NaN()}, {Step: 50, Cosine: 0.875}, {Step: 100, Cosine: 0.9375}},
	}
	var b strings.Builder
	showFindings(&b, f)
	got := strings.Join(strings.Fields(b.String()), " ")
	for _, want := range []string{
		"input, loss exact input - - - -",
		"1 dense 5 20.0 dB forward.weight 0.7500 0.2500 -0.5000 0.8750",
	} {
		if !strings.Contains(got, want) {
			t.Errorf("no %q in\n%s", want, b.String())
		}
	}
	b.Reset()
	showFindings(&b, nil)
	showFindings(&b, &results.Findings{})
	if b.Len() > 0 {
		t.Errorf("nothing was found, yet it says %q", b.String())
	}
}
