package results

import (
	"math"
	"strings"
	"testing"
)

// byClassRun has three classes: 100 sound examples and two kinds of faults.
func byClassRun() *Run {
	missed := make([]uint64, 21)
	for a := range missed {
		missed[a] = uint64(40 - a)
	}
	scores := &ClassScores{Examples: []uint64{100, 30, 20}, Right: []uint64{90, 15, 20}, Missed: missed}
	half := &ClassScores{Examples: []uint64{0, 30, 0}, Right: []uint64{0, 3, 0}}
	return &Run{Epochs: []Epoch{{Test: half}, {Test: scores, Validation: half}}}
}

// TestQualifiedMetrics: recalls and missed faults of the last epoch, and NaN where
// there is nothing to tell.
func TestQualifiedMetrics(t *testing.T) {
	nan := math.NaN()
	for name, want := range map[string]float64{
		RecallOf("test recall", 1, "bearing"):          0.5,
		RecallOf("test recall", 0, "a name (odd)"):     0.9,
		RecallOf("validation recall", 1, "bearing"):    0.1,
		RecallOf("validation recall", 2, "cavitation"): nan, // none of that class
		RecallOf("test recall", 3, "beyond"):           nan,
		MissedAt("test missed-fault rate", 0):          40.0 / 50,
		MissedAt("test missed-fault rate", 0.01):       39.0 / 50,
		MissedAt("test missed-fault rate", 0.019):      39.0 / 50,
		MissedAt("test missed-fault rate", 0.07):       33.0 / 50, // 0.07 x 100 is above 7 in binary64
		MissedAt("test missed-fault rate", 0.2):        20.0 / 50,
		MissedAt("validation missed-fault rate", 0.01): nan, // no sound examples
	} {
		m, known := FindMetric(name)
		if got := m.Final(byClassRun()); !known || got != want && !(got != got && want != want) {
			t.Errorf("%s: %v, want %v", name, got, want)
		}
		if got := m.Final(&Run{Epochs: []Epoch{{TestMetric: 0.5}}}); !math.IsNaN(got) {
			t.Errorf("%s of a run that did not note it: %v", name, got)
		}
		if !m.Share || m.Units() != "percentage points" || m.Higher != strings.Contains(name, "recall") {
			t.Errorf("%s: %+v", name, m)
		}
	}
	for _, bad := range []string{
		"test recall", "test recall of class", "test recall of class x (y)", "test recall of class -1 (y)", "training recall of class 1 (y)",
		"test missed-fault rate", "test missed-fault rate at false-alarm rate", "test missed-fault rate at false-alarm rate 0.3",
		"test missed-fault rate at false-alarm rate -0.1", "test missed-fault rate at false-alarm rate NaN", "test",
	} {
		if m, known := FindMetric(bad); known {
			t.Errorf("%q was found as %+v", bad, m)
		}
	}
	m, known := FindMetric("epochs to " + RecallOf("test recall", 1, "bearing") + " 0.1")
	if !known || m.Final(byClassRun()) != 1 {
		t.Errorf("epochs to a recall: %v, %v", known, m.Final(byClassRun()))
	}
}

// TestFewSound: a hundred sound examples can tell one in a hundred, no less.
func TestFewSound(t *testing.T) {
	for name, want := range map[string]uint64{
		MissedAt("test missed-fault rate", 0.01):                          0,
		MissedAt("test missed-fault rate", 0.009):                         100,
		MissedAt("test missed-fault rate", 0):                             0,
		"epochs to " + MissedAt("test missed-fault rate", 0.001) + " 0.1": 100,
		"test accuracy": 0,
	} {
		if m, known := FindMetric(name); !known || m.FewSound(byClassRun()) != want {
			t.Errorf("%s: %d of too few sound examples, want %d", name, m.FewSound(byClassRun()), want)
		}
	}
}

// TestAllowedAlarms: shares are decimals.
func TestAllowedAlarms(t *testing.T) {
	for n := uint64(1); n <= 1000; n++ {
		for hundredths := uint64(0); hundredths <= 100; hundredths++ {
			if got, want := AllowedAlarms(float64(hundredths)/100, n), hundredths*n/100; got != want {
				t.Fatalf("%d %% of %d: %d, want %d", hundredths, n, got, want)
			}
		}
	}
}

// TestRMSEColumns: of regressions alone, and not of those that did not note it.
func TestRMSEColumns(t *testing.T) {
	nan := math.NaN()
	e := Epoch{TrainLoss: 2, TrainMetric: nan, TrainRMSE: 3, ValidationLoss: 1, ValidationMetric: nan, TestLoss: 0, TestMetric: nan}
	training, validation, test := e.RMSE()
	if training != 3 || !math.IsNaN(validation) || test != 0 {
		t.Errorf("%v, %v, %v", training, validation, test)
	}
	e.TrainMetric, e.TestLoss = 0.5, nan
	if training, _, test = e.RMSE(); !math.IsNaN(training) || !math.IsNaN(test) {
		t.Errorf("of a classification %v, of nothing %v", training, test)
	}
}

// TestUnits: nats are cross-entropies' alone.
func TestUnits(t *testing.T) {
	loss, _ := FindMetric("test loss")
	rmse, _ := FindMetric("validation RMSE")
	accuracy, _ := FindMetric("test accuracy")
	for _, c := range []struct{ got, want string }{
		{loss.Units(), "nats"},
		{loss.Of(false).Unit, "nat"},
		{loss.Of(true).Unit, "unit of the loss"},
		{loss.Of(true).Units(), "units of the loss"},
		{rmse.Of(true).Units(), "units of the target"},
		{accuracy.Of(true).Units(), "percentage points"},
		{Metric{}.Units(), ""},
	} {
		if c.got != c.want {
			t.Errorf("%q, want %q", c.got, c.want)
		}
	}
}
