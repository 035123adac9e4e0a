package experiments

import (
	"fmt"
	"testing"
)

// TestGridInStudy: a report can tell which arms make a grid, and where they stand.
func TestGridInStudy(t *testing.T) {
	p := tinyPlan(t, "[[grid]]\ntitle = \"weights\"\nname = \"{f} {r}\"\naxis.f = [\"E4M4\", \"E5M3\"]\naxis.r = [\"up\", \"down\"]\nforward.weight = { format = \"{f}\", rounding = \"{r}\" }\n")
	arms := describe(newLayout(p)).Arms
	for i, want := range []string{" []", " []", " []", " []", "weights [{f E4M4} {r up}]", "weights [{f E4M4} {r down}]", "weights [{f E5M3} {r up}]", "weights [{f E5M3} {r down}]"} {
		if got := fmt.Sprint(arms[i].Grid, " ", arms[i].Axes); got != want {
			t.Errorf("arm %s: %s, want %s", arms[i].Slug, got, want)
		}
	}
}
