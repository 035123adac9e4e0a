package experiments

import (
	"context"
	"testing"

	"ulpine/experiments/plan"
	"ulpine/results"
)

// TestDiagnosticsChangeNothing: a plan that is looked at and one that is not
// have the same keys and the same bits, but only the one has findings.
func TestDiagnosticsChangeNothing(t *testing.T) {
	digests, diagnoses := [2]results.Hash{}, [2][]results.Diagnosis{}
	for i, word := range []string{"sampled", "none"} {
		p := tinyPlan(t, "", "epochs = 2", "epochs = 40\ndiagnostics = \""+word+"\"", "count = 3", "count = 2")
		if none := p.Diagnostics == (plan.Diagnostics{}); none != (word == "none") {
			t.Fatalf("diagnostics %q, not %q", p.Diagnostics, word)
		}
		s := openStore(t)
		sum, err := Run(context.Background(), p, s, Options{})
		if err != nil {
			t.Fatal(err)
		}
		study, err := Study(p, s)
		if err != nil {
			t.Fatal(err)
		}
		digests[i], diagnoses[i] = sum.StoreDigest, study.Diagnoses
		for _, r := range study.Runs {
			whole, err := s.Get(r.Key)
			if err != nil {
				t.Fatal(err)
			}
			if found := whole.Findings != nil; found != (word == "sampled") {
				t.Errorf("%s, %s: findings %v", word, r.Name(), found)
			}
		}
	}
	if digests[0] != digests[1] {
		t.Errorf("store digest %v looked at, %v not", digests[0], digests[1])
	}
	checkDiagnoses(t, diagnoses[0])
	if len(diagnoses[1]) > 0 {
		t.Errorf("%d diagnoses of runs that were not looked at", len(diagnoses[1]))
	}
}

// checkDiagnoses expects one of every arm of the tiny plan, with every value in
// its place.
func checkDiagnoses(t *testing.T, all []results.Diagnosis) {
	t.Helper()
	if len(all) != 4 { // the baseline and three arms
		t.Fatalf("%d diagnoses", len(all))
	}
	for _, d := range all {
		if d.Replicate != 100 || len(d.Histograms) == 0 || len(d.Epochs) == 0 {
			t.Errorf("%s/%d: %d histograms, %d counts", d.Arm, d.Replicate, len(d.Histograms), len(d.Epochs))
		}
		for _, h := range d.Histograms {
			n := h.Zeros
			for _, c := range h.Counts {
				n += c
			}
			if n == 0 || h.NotFinite > 0 || h.Name == "" {
				t.Errorf("%s: histogram %+v", d.Arm, h)
			}
		}
		if e := d.Epochs[0]; e.Epoch != 1 || e.Values == 0 { // no epoch goes unseen
			t.Errorf("%s: %+v", d.Arm, e)
		}
	}
}
