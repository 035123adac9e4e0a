package results

import (
	"math"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"
	"pgregory.net/rapid"
)

func TestRunName(t *testing.T) {
	arm, replicate, err := ParseRunName(RunName("bf16-nearest", 103))
	if arm != "bf16-nearest" || replicate != 103 || err != nil {
		t.Errorf("read back as %q, %d, %v", arm, replicate, err)
	}
	for _, bad := range []string{"", "bf16-nearest", "/103", "bf16/", "bf16/x", "bf16/-1", "bf16/1/2", "bf16/18446744073709551616"} {
		if _, _, err := ParseRunName(bad); err == nil {
			t.Errorf("%q passed as a run's name", bad)
		}
	}
}

func TestTensorBytes(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		in := Tensor{Name: "w", Wide: rapid.Bool().Draw(t, "wide")}
		for range rapid.IntRange(0, 20).Draw(t, "n") {
			x := math.Float64frombits(rapid.Uint64().Draw(t, "bits"))
			if !in.Wide {
				x = float64(math.Float32frombits(rapid.Uint32().Draw(t, "bits32")))
			}
			in.Values = append(in.Values, x)
		}
		in.Shape = []int{len(in.Values)}
		if err := in.Check(); err != nil {
			t.Fatal(err)
		}
		out := Tensor{Name: "w", Shape: in.Shape, Wide: in.Wide}
		if err := out.SetBytes(in.Bytes()); err != nil {
			t.Fatal(err)
		}
		if d := cmp.Diff(in, out, cmpopts.EquateNaNs(), cmpopts.EquateEmpty()); d != "" {
			t.Fatal(d)
		}
		if err := out.SetBytes(append(in.Bytes(), 0)); err == nil {
			t.Fatal("a byte too many was accepted")
		}
	})
}

func TestTensorCheck(t *testing.T) {
	narrow := Tensor{Name: "w", Shape: []int{2}, Values: []float64{1, 0.1}}
	if err := narrow.Check(); err == nil || !strings.Contains(err.Error(), "value 1, 0.1") {
		t.Errorf("0.1 passed as a binary32 number: %v", err)
	}
	short := Tensor{Name: "w", Shape: []int{3}, Wide: true, Values: []float64{1, 0.1}}
	if short.Check() == nil {
		t.Error("two values passed for a shape of three")
	}
}

func TestMetrics(t *testing.T) {
	r := Run{Epochs: []Epoch{{TestMetric: 0.99, TestLoss: 0.1}, {
		TrainLoss: 1, TrainMetric: 2, ValidationLoss: 3, ValidationMetric: 4, TestLoss: 5, TestMetric: 6,
	}}}
	want := map[string]float64{
		"training loss": 1, "training accuracy": 2, "validation loss": 3,
		"validation accuracy": 4, "test loss": 5, "test accuracy": 6, "test RMSE": 7,
		"training RMSE": 8, "validation RMSE": 9,
	}
	if len(want) != len(MetricNames()) {
		t.Errorf("%d metrics, this test knows %d", len(MetricNames()), len(want))
	}
	for _, name := range MetricNames() {
		m, found := FindMetric(name)
		of := &r
		if nan := math.NaN(); strings.HasSuffix(name, "RMSE") {
			of = &Run{Epochs: []Epoch{{
				TestLoss: 49, TestMetric: nan, TestRMSE: 7, TrainLoss: 64, TrainMetric: nan, TrainRMSE: 8,
				ValidationLoss: 81, ValidationMetric: nan, ValidationRMSE: 9,
			}}}
		}
		if got := m.Final(of); !found || got != want[name] {
			t.Errorf("%s after the last epoch: %v, want %v", name, got, want[name])
		}
		gain := m.Gain(3, 1) // of two accuracies 3 is better, of two losses 1
		if (gain == 2) != strings.Contains(name, "accuracy") || math.Abs(gain) != 2 {
			t.Errorf("%s: gain of 3 over 1 is %v", name, gain)
		}
		if !math.IsNaN(m.Final(&Run{})) {
			t.Errorf("%s of a run without epochs is a number", name)
		}
	}
	if m, _ := FindMetric("test RMSE"); !math.IsNaN(m.Final(&r)) {
		t.Error("a classification has an RMSE")
	}
	if _, found := FindMetric("accuracy of the best epoch"); found {
		t.Error("an unknown metric was found")
	}
}

func TestClaimDifferences(t *testing.T) {
	before := Claim{
		Metric: "test accuracy", Margin: 0.01, Confidence: 0.95, Count: 10, FirstSeed: 100,
		Contrasts: []ContrastClaim{{"a", "b", 0.005}},
	}
	if d := before.Differences(before); d != "" {
		t.Errorf("a claim differs from itself: %s", d)
	}
	now := before
	now.Margin, now.Count, now.Contrasts = 0.02, 20, nil
	want := "margin was 0.01, is 0.02; replicate count was 10, is 20; list of contrasts was a against b within 0.005, is none"
	if d := before.Differences(now); d != want {
		t.Errorf("got  %s\nwant %s", d, want)
	}
	now = before
	now.Metric, now.Confidence, now.FirstSeed = "test loss", 0.9, 200
	if d := before.Differences(now); strings.Count(d, " was ") != 3 {
		t.Errorf("three changes read %q", d)
	}
}
