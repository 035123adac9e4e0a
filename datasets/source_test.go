package datasets

import (
	"testing"

	"ulpine/quant/elementary/nofusion"
)

// TestNoFusion reads the sources that compute values.
func TestNoFusion(t *testing.T) {
	faults, products, err := nofusion.Check("pump.go", "pumpsignal.go", "scale.go", "data.go", "invented.go", "regression.go", "teacher.go", "energy.go")
	if err != nil {
		t.Fatal(err)
	}
	for _, f := range faults {
		t.Error(f)
	}
	if products < 20 {
		t.Errorf("only %d products seen: the test is blind", products)
	}
}
