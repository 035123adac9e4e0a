package trainer

import (
	"testing"

	"ulpine/quant/elementary/nofusion"
)

// TestNoFusion reads the sources that do arithmetic of their own, outside quant.
func TestNoFusion(t *testing.T) {
	faults, products, err := nofusion.Check("adam.go", "alarm.go", "crossentropy.go", "diverge.go", "dropout.go", "exact.go", "leakyrelu.go", "lossscale.go", "mover.go", "twin.go", "param.go", "quotient.go", "run.go", "squared.go", "schedule.go", "sgd.go", "smooth.go", "spec.go")
	if err != nil {
		t.Fatal(err)
	}
	for _, f := range faults {
		t.Error(f)
	}
	if products < 5 {
		t.Errorf("only %d products seen: the test is blind", products)
	}
}
