package experiments

import (
	"context"
	"strings"
	"testing"

	"ulpine/results"
)

// TestControls runs a plan with controls: they are stored as runs, get no verdict,
// and their differences from the baseline are the noise floor.
func TestControls(t *testing.T) {
	p := tinyPlan(t, "[controls]\n", `metric = "test accuracy"`, `metric = "test loss"`)
	s := openStore(t)
	before, err := Study(p, s)
	if err != nil || before.NoiseFrom != "" || before.NoiseLow != 0 || before.NoiseHigh != 0 {
		t.Errorf("before the first run: %q, %v", before.NoiseFrom, err)
	}
	summary, err := Run(context.Background(), p, s, Options{Workers: 2})
	if err != nil || summary.Runs != 3*(3+2) { // "fp32 again" shares the baseline's runs
		t.Fatalf("%+v, %v", summary, err)
	}
	for name, state := range map[string]results.State{"control-fp64/100": results.Stored, "control-pairwise/102": results.Stored} {
		if got := states(t, s)[name]; got != state {
			t.Errorf("%s is %q", name, got)
		}
	}
	study, err := Study(p, s)
	if err != nil {
		t.Fatal(err)
	}
	if len(study.Comparisons) != 3 || len(study.Arms) != 4 {
		t.Errorf("%d comparisons, %d arms", len(study.Comparisons), len(study.Arms))
	}
	// The loss of so small a network moves in its last places, and no further.
	low, high := gains(study)
	if study.NoiseLow != low || study.NoiseHigh != high || low == high || high-low > 1e-3 {
		t.Errorf("noise floor %g to %g, differences of the runs %g to %g", study.NoiseLow, study.NoiseHigh, low, high)
	}
	if study.NoiseFrom != "the baseline again in binary64 and with pairwise sums, 3 replicates" {
		t.Errorf("from %q", study.NoiseFrom)
	}
}

// gains are the extremes of baseline's loss less a control's, and zero.
func gains(study *results.Study) (low, high float64) {
	base := map[uint64]float64{}
	last := func(r *results.Run) float64 { return r.Epochs[len(r.Epochs)-1].TestLoss }
	for i := range study.Runs {
		if r := &study.Runs[i]; r.Arm == "baseline" {
			base[r.Replicate] = last(r)
		}
	}
	for i := range study.Runs {
		if r := &study.Runs[i]; strings.HasPrefix(r.Arm, "control-") {
			d := base[r.Replicate] - last(r)
			low, high = min(low, d), max(high, d)
		}
	}
	return low, high
}

// TestControlsLeaveTheStudy: adding controls changes nobody's mind.
func TestControlsLeaveTheStudy(t *testing.T) {
	if studyID(tinyPlan(t, "")) != studyID(tinyPlan(t, "[controls]\n")) {
		t.Error("a plan with controls is another study")
	}
}
