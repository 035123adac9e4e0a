package elementary

import (
	"testing"

	"ulpine/quant/elementary/nofusion"
)

// TestNoFusion reads the package's own sources.
func TestNoFusion(t *testing.T) {
	faults, products, err := nofusion.Check("erf.go", "exp.go", "log.go", "reduce.go", "sigmoid.go", "tanh.go", "trig.go")
	if err != nil {
		t.Fatal(err)
	}
	for _, f := range faults {
		t.Error(f)
	}
	if products < 50 {
		t.Errorf("only %d products seen: the test is blind", products)
	}
}
