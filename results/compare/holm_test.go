package compare

import (
	"math"
	"slices"
	"testing"

	"pgregory.net/rapid"
)

// TestHolm: four p-values of the worked example in the English Wikipedia,
// "Holm-Bonferroni method" (from memory): at 0.05, 0.005 and 0.01 are rejected
// (thresholds 0.0125, 0.0167), 0.03 is not (0.025), and so 0.04 is not.
func TestHolm(t *testing.T) {
	p := []float64{0.01, 0.04, 0.03, 0.005}
	got := Holm(p)
	for i, want := range []float64{0.03, 0.06, 0.06, 0.02} {
		near(t, "adjusted p", got[i], want, 1e-12)
	}
	if !slices.Equal(p, []float64{0.01, 0.04, 0.03, 0.005}) {
		t.Error("the argument was altered")
	}
	if got := Holm(nil); len(got) != 0 {
		t.Errorf("no p-values gave %v", got)
	}
	got = Holm([]float64{math.NaN(), 0.02})
	if got[0] != 1 || got[1] != 0.04 {
		t.Errorf("NaN counts as a 1 in the family: %v", got)
	}
}

// TestHolmIsTheStepDownTest compares adjusted p-values with the procedure as
// Holm describes it: go up the ordered p-values while p(i) < a/(m-i+1).
func TestHolmIsTheStepDownTest(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		p := rapid.SliceOfN(rapid.Float64Range(0, 0.2), 1, 8).Draw(t, "p")
		a := rapid.Float64Range(0.001, 0.2).Draw(t, "a")
		sorted := slices.Sorted(slices.Values(p))
		rejected := 0
		for i, x := range sorted {
			if !(float64(len(p)-i)*x < a) {
				break
			}
			rejected++
		}
		got := 0
		for _, x := range Holm(p) {
			if x < a {
				got++
			}
		}
		if got != rejected {
			t.Fatalf("%d rejected, step-down rejects %d", got, rejected)
		}
	})
}
