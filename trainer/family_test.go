package trainer

import (
	"testing"

	"ulpine/quant"
)

// TestFamiliesAtStoredPoints: every scalar family can hold activations and masters,
// and what a run ends with are values of the family.
func TestFamiliesAtStoredPoints(t *testing.T) {
	steps, err := quant.NewTable("steps", []float64{-2, -1, -0.5, -0.25, 0, 0.25, 0.5, 1, 2}, quant.FormatDefault)
	if err != nil {
		t.Fatal(err)
	}
	points := []quant.Point{point(t, "posit16"), point(t, "LNS5.6"), point(t, "Q4.12"), {Format: steps, Rounding: quant.Rounding{Mode: quant.Stochastic, Bits: 16}}, cheap(stochastic(t, "Q4.12", 8))}
	for _, p := range points {
		net := network(t, []int{3}, "dense 4", "relu", "dense 3")
		arm := baseline(t, 3)
		for i := range arm.Layers {
			arm.Layers[i].Activation, arm.Layers[i].Master = p, p
		}
		out := mustRun(t, Job{
			Network: net, Arm: arm, Training: sgdTraining(3, 2), Seed: 5,
			Train: dataset(8, net.Input, 3, 1), Test: dataset(4, net.Input, 3, 2),
		})
		moved := false
		for k, q := range out.Final {
			for i, v := range q.Values {
				if r, _ := p.Round(quant.Exactly(v), 0); r != v {
					t.Fatalf("%s: %s[%d] = %x is no value of the format", p, q.Name, i, v)
				}
				moved = moved || v != out.Initial[k].Values[i]
			}
		}
		if !moved {
			t.Errorf("%s: nothing was trained", p)
		}
	}
}
