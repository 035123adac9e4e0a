package experiments_test

import (
	"context"
	"math"
	"path/filepath"
	"testing"

	"ulpine/experiments"
	"ulpine/experiments/plan"
	"ulpine/results"
	"ulpine/results/store"
)

// studyOf runs a shipped plan into a fresh store.
func studyOf(t *testing.T, file string) *results.Study {
	t.Helper()
	if testing.Short() {
		t.Skip("trains dozens of networks")
	}
	p, err := plan.Load(file)
	if err != nil {
		t.Fatal(err)
	}
	s, err := store.Open(filepath.Join(t.TempDir(), store.DefaultPath), store.Options{})
	if err != nil {
		t.Fatal(err)
	}
	defer s.Close()
	if _, err := experiments.Run(context.Background(), p, s, experiments.Options{}); err != nil {
		t.Fatal(err)
	}
	study, err := experiments.Study(p, s)
	if err != nil {
		t.Fatal(err)
	}
	return study
}

// scores are the final scores of an arm, by replicate.
func scores(t *testing.T, study *results.Study, arm, metric string) map[uint64]float64 {
	t.Helper()
	m, known := results.FindMetric(metric)
	all := map[uint64]float64{}
	for i := range study.Runs {
		if r := &study.Runs[i]; r.Arm == arm {
			all[r.Replicate] = m.Final(r)
			if !known || math.IsNaN(all[r.Replicate]) {
				t.Fatalf("%s has no %s", r.Name(), metric)
			}
		}
	}
	return all
}

// TestDriftAdaptation holds what the shipped plan shows: adapting helps, weights in
// bfloat16 rounded to nearest cannot follow in small steps, and stochastic updates can.
func TestDriftAdaptation(t *testing.T) {
	study := studyOf(t, "plans/drift-adaptation.toml")
	kinds := map[string]results.VerdictKind{}
	for _, c := range study.Comparisons {
		kinds[c.Arm] = c.Verdict.Kind
	}
	if kinds["bf16"] != results.Worse || kinds["bf16-stochastic-update"] != results.Within || kinds["bf16-fp32-master"] != results.Within {
		t.Errorf("verdicts %v", kinds)
	}
	for i := range study.Runs {
		r := &study.Runs[i]
		first, _, _ := r.Epochs[0].RMSE()
		last, validation, _ := r.Epochs[len(r.Epochs)-1].RMSE()
		if r.Arm == "baseline" && !(last < first && validation < first) {
			t.Errorf("%s: training RMSE %v in the first epoch, %v in the last, validation %v", r.Name(), first, last, validation)
		}
	}
	if !study.Regression || len(scores(t, study, "baseline", study.Metric)) != 8 {
		t.Errorf("%+v", study)
	}
}

// TestMissedFaultsPlan: the shipped plan on alarms is answered, and a looser alarm
// misses no more than a stricter one.
func TestMissedFaultsPlan(t *testing.T) {
	study := studyOf(t, "plans/missed-faults.toml")
	for _, arm := range study.Arms {
		strict := scores(t, study, arm.Slug, results.MissedAt("test missed-fault rate", 0))
		fixed := scores(t, study, arm.Slug, study.Metric)
		loose := scores(t, study, arm.Slug, results.MissedAt("test missed-fault rate", results.MostFalseAlarms))
		if len(fixed) != 8 {
			t.Errorf("%s: %d runs", arm.Slug, len(fixed))
		}
		for replicate, x := range fixed {
			if !(strict[replicate] >= x && x >= loose[replicate] && x > 0 && x < 0.5) {
				t.Errorf("%s/%d: missed %v, %v, %v", arm.Slug, replicate, strict[replicate], x, loose[replicate])
			}
		}
	}
	for _, c := range study.Comparisons {
		if c.N != 8 || math.IsNaN(c.Mean) {
			t.Errorf("%+v", c)
		}
	}
}

// TestNoiseFloorPlan: the baseline of the shipped regression comes near the noise of
// 0.1 in its targets, and cannot come below it but by the luck of 1,000 test examples.
func TestNoiseFloorPlan(t *testing.T) {
	study := studyOf(t, "plans/noise-floor.toml")
	for replicate, x := range scores(t, study, "baseline", "test RMSE") {
		// 0.1 times one, less four standard errors 1/sqrt(2 x 1000), to one and a fifth.
		if !(x > 0.091 && x < 0.12) {
			t.Errorf("baseline/%d: RMSE %v", replicate, x)
		}
	}
}

// TestClassRecallPlan: the claimed metric is the recall of one class.
func TestClassRecallPlan(t *testing.T) {
	study := studyOf(t, "plans/class-recall.toml")
	if want := results.RecallOf("test recall", 3, "bearing"); study.Metric != want {
		t.Errorf("metric %q, want %q", study.Metric, want)
	}
	for replicate, x := range scores(t, study, "baseline", study.Metric) {
		if !(x > 0.1 && x <= 1) {
			t.Errorf("baseline/%d: recall %v", replicate, x)
		}
	}
}
