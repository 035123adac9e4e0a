package compare

import (
	"math"
	"strings"
	"testing"

	"ulpine/results"
)

// counted are runs of two classes, 100 test examples each, with these numbers
// of examples found; the accuracy follows from them.
func counted(arm string, found ...[2]uint64) []results.Run {
	all := runs(arm, make([]float64, len(found))...)
	for i, f := range found {
		all[i].Classes, all[i].Confusion = 2, []uint64{f[0], 100 - f[0], 100 - f[1], f[1]}
		all[i].Epochs[1].TestMetric = float64(f[0]+f[1]) / 200
	}
	return all
}

func TestClassDifferences(t *testing.T) {
	base := counted("baseline", [2]uint64{90, 80}, [2]uint64{91, 82}, [2]uint64{90, 81}, [2]uint64{92, 80})
	arm := counted("a", [2]uint64{96, 74}, [2]uint64{98, 76}, [2]uint64{95, 75}, [2]uint64{98, 72})
	q := question("a", 0.02)
	q.Classes = []string{"sound"}
	c := one(Pair(q, arm, base))
	if c.Verdict.Kind != results.Within || len(c.Classes) != 2 {
		t.Fatalf("%+v", c)
	}
	up, down := c.Classes[0], c.Classes[1]
	// by hand: gains 6, 7, 5, 6 and losses 6, 6, 6, 8 of 100
	near(t, "gain", up.Mean, 0.06, 1e-12)
	near(t, "loss", down.Mean, -0.065, 1e-12)
	near(t, "worst", down.Worst, -0.08, 1e-12)
	half := 3.182446 * 0.01 / 2 // t(0.975, 3) SD / sqrt 4, SD = 1 of 100
	near(t, "low", down.Low, -0.065-half, 1e-7)
	near(t, "high", down.High, -0.065+half, 1e-7)
	near(t, "Holm", down.Holm, 2*down.P, 1e-15)
	if up.Name != "sound" || down.Name != "" || down.Replicate != 103 || up.N != 4 || up.Holm < 0.99 {
		t.Errorf("%+v", c.Classes)
	}
	all := strings.Join(c.Warnings, "\n")
	want := "within the margin on the whole, but class 1 is found less often: recall differs by −6.50 percentage points (95 % interval −8.09 to −4.91, 4 pairs)"
	if !strings.Contains(all, want) || strings.Contains(all, "class sound") {
		t.Errorf("warnings %q", all)
	}
}

func TestClassesNotCounted(t *testing.T) {
	base := counted("baseline", [2]uint64{90, 80}, [2]uint64{91, 82})
	arm := counted("a", [2]uint64{90, 80}, [2]uint64{91, 82})
	arm[0].Confusion = arm[0].Confusion[:3]          // damaged
	arm[1].Confusion, arm[1].Classes = []uint64{}, 0 // diverged before it was evaluated
	if c := Pair(question("a", 0.01), arm, base); len(c.Classes) != 2 && len(c.Classes) != 0 || len(c.Classes) == 2 && c.Classes[0].N != 0 {
		t.Errorf("%+v", c.Classes)
	}
	if c := Pair(question("a", 0.01), runs("a", 1, 1), runs("baseline", 1, 1)); len(c.Classes) != 0 {
		t.Errorf("%+v", c.Classes)
	}
	arm = counted("a", [2]uint64{90, 80}, [2]uint64{91, 82})
	for _, r := range [][]results.Run{arm, base} { // no example of class 1 in one replicate
		r[0].Confusion = []uint64{90, 10, 0, 0}
	}
	c := Pair(question("a", 0.01), arm, base)
	if d := c.Classes[1]; d.N != 1 || d.Mean != 0 || !math.IsNaN(d.Low) || d.Replicate != 101 || d.Holm != 1 {
		t.Errorf("%+v", d)
	}
}
