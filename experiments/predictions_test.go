package experiments

import (
	"context"
	"math"
	"slices"
	"testing"

	"ulpine/results"
	"ulpine/results/store"
)

// TestPredictionsAreKept: what a run says of every test example agrees with its
// counts and scores, keeping it changes no bit, and a plan can leave it out.
func TestPredictionsAreKept(t *testing.T) {
	kept, bare := openStore(t), openStore(t)
	with, err := Run(context.Background(), tinyPlan(t, ""), kept, Options{})
	if err != nil {
		t.Fatal(err)
	}
	without, err := Run(context.Background(), tinyPlan(t, "", "epochs = 2", "epochs = 2\npredictions = \"none\""), bare, Options{})
	if err != nil || with.StoreDigest != without.StoreDigest {
		t.Errorf("store digest %s with predictions, %s without, %v", with.StoreDigest, without.StoreDigest, err)
	}
	for name, s := range map[string]*store.Store{"kept": kept, "left out": bare} {
		list, err := s.List(store.Filter{})
		if err != nil || len(list) == 0 {
			t.Fatalf("%d runs, %v", len(list), err)
		}
		for _, e := range list {
			r, err := s.Curve(e.Key)
			if err != nil {
				t.Fatal(err)
			}
			if name == "left out" {
				if r.Predictions != nil {
					t.Errorf("%s has predictions", e.Name())
				}
				continue
			}
			agrees(t, r)
		}
	}
	study, err := Study(tinyPlan(t, ""), kept)
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range slices.Concat(study.Comparisons, study.Contrasts) {
		i := c.Items
		if i == nil || i.Crossed || i.Items != 32 || i.Replicates != 3 || math.IsNaN(i.Low) {
			t.Fatalf("%s: %+v", c.Arm, i)
		}
		if net := float64(i.Gained-i.Lost) / 32 / 3; math.Abs(net-c.Mean) > 1e-12 {
			t.Errorf("%s: gained less lost is %v, the mean difference %v", c.Arm, net, c.Mean)
		}
	}
}

// agrees holds predictions to a run's confusion counts and accuracy.
func agrees(t *testing.T, r *results.Run) {
	t.Helper()
	p := r.Predictions
	if p == nil || p.Examples() != 32 || !p.Sound() {
		t.Fatalf("%s: %+v", r.Name(), p)
	}
	right := 0
	counts := make([]uint64, len(r.Confusion))
	for i := range p.Called {
		if p.Right(i) {
			right++
		}
		if p.Called[i] >= 0 {
			counts[int(p.Truth[i])*r.Classes+int(p.Called[i])]++
		}
	}
	if last := r.Epochs[len(r.Epochs)-1]; !slices.Equal(counts, r.Confusion) || float64(right)/32 != last.TestMetric {
		t.Errorf("%s: counted %v, %d right; the run has %v, %v", r.Name(), counts, right, r.Confusion, last.TestMetric)
	}
}

// TestRegressionPredictions: outputs and targets give the run's RMSE.
func TestRegressionPredictions(t *testing.T) {
	p := tinyPlan(t, "", `data = "pump-vibration"`, `data = "teacher"`, "validation = 16", "features = 3\nwidth = 2\noutputs = 2",
		`["conv1d out=2 width=9 stride=8", "relu", "dense 5"]`, `["dense 4", "relu", "dense 2"]`,
		"learning_rate = 0.05", "learning_rate = 0.05\nloss = \"mean-squared-error\"", `"test accuracy"`, `"test RMSE"`)
	s := openStore(t)
	if _, err := Run(context.Background(), p, s, Options{}); err != nil {
		t.Fatal(err)
	}
	study, err := Study(p, s)
	if err != nil {
		t.Fatal(err)
	}
	if i := study.Comparisons[0].Items; i == nil || i.Items != 32 || math.IsNaN(i.Low) || len(i.Flips) != 0 {
		t.Errorf("%+v", i)
	}
	list, err := s.List(store.Filter{})
	if err != nil {
		t.Fatal(err)
	}
	for _, e := range list {
		r, err := s.Curve(e.Key)
		if err != nil {
			t.Fatal(err)
		}
		var sum float64
		for i := range r.Predictions.Examples() {
			sum += r.Predictions.SquaredError(i)
		}
		if got, want := math.Sqrt(sum/32), r.Epochs[len(r.Epochs)-1].TestRMSE; math.Abs(got-want) > 1e-12 {
			t.Errorf("%s: RMSE %v of predictions, %v of the run", r.Name(), got, want)
		}
	}
}
