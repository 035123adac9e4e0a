package results

import (
	"math"
	"testing"
)

func accuracies(xs ...float64) *Run {
	r := &Run{}
	for _, x := range xs {
		r.Epochs = append(r.Epochs, Epoch{TestMetric: x, TestLoss: 1 - x})
	}
	return r
}

func TestEpochsToTarget(t *testing.T) {
	nan := math.NaN()
	gone := accuracies(0.5, 0.6)
	gone.Diverged = "loss is NaN"
	late := accuracies(0.5, 0.9, nan)
	late.Diverged = "loss is NaN"
	for _, c := range []struct {
		name   string
		run    *Run
		want   float64
		missed bool
	}{
		{"at once", accuracies(0.95, 0.2), 1, false},
		{"exactly", accuracies(0.5, 0.89, 0.9), 3, false},
		{"lost again", accuracies(0.5, 0.91, 0.3), 2, false},
		{"never", accuracies(0.5, 0.6, 0.7), 4, true},
		{"diverged before", gone, nan, false},
		{"diverged after", late, 2, false},
		{"evaluated at the end only", accuracies(nan, nan, 0.95), nan, false},
		{"not trained", accuracies(), nan, false},
	} {
		for _, name := range []string{"epochs to test accuracy 0.9", "epochs to test loss 0.1"} {
			m, found := FindMetric(name)
			if !found || m.Name != name || m.Data != "test" || m.Higher || m.Share || m.Unit != "epoch" {
				t.Fatalf("%s: %+v, %v", name, m, found)
			}
			if name == "epochs to test loss 0.1" {
				m.Target = 1 - 0.9 // as the losses above are rounded
			}
			if got := m.Final(c.run); got != c.want && !(got != got && c.want != c.want) || m.Missed(c.run) != c.missed {
				t.Errorf("%s, %s: %v, missed %v", name, c.name, got, m.Missed(c.run))
			}
		}
	}
	m, _ := FindMetric("epochs to test accuracy 0.9")
	if m.Gain(3, 5) != 2 {
		t.Error("fewer epochs are no gain")
	}
	if plain, _ := FindMetric("test accuracy"); plain.Missed(accuracies(0.1)) {
		t.Error("a metric without a target was missed")
	}
}

func TestNoTarget(t *testing.T) {
	for _, name := range []string{
		"epochs to test accuracy", "epochs to 0.9", "epochs to test accuracy 1.5", "epochs to test accuracy 0",
		"epochs to test accuracy -1", "epochs to test accuracy NaN", "epochs to test loss Inf", "epochs to speed 3",
		"epochs to epochs to test accuracy 0.9 3", "epochs to ", "epochs",
	} {
		if m, found := FindMetric(name); found {
			t.Errorf("%q was taken for %+v", name, m)
		}
	}
}
