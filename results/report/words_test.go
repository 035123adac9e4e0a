package report

import (
	"strings"
	"testing"

	"ulpine/results"
)

// TestUnits: a metric is printed by what it is, not by the words in its name. A
// count of epochs to an accuracy is no share, and one epoch is no 100 per cent.
func TestUnits(t *testing.T) {
	for _, c := range []struct {
		name               string
		margin             float64
		unit, diff, scored string
	}{
		{"test accuracy", 0.005, " pp", "+1.00", "93.40 %"},
		{"test loss", 0.05, " nats", "+0.010", "0.934"},
		{"epochs to test accuracy 0.9", 1, " epochs", "+0.01", "0.934"},
		{"no such accuracy", 1, "", "+0.01", "0.934"},
	} {
		w := newScoreWords(c.name, c.margin)
		if w.unit() != c.unit || w.diff(0.01) != c.diff || w.value(0.934) != c.scored {
			t.Errorf("%s: unit %q, difference %s, value %s", c.name, w.unit(), w.diff(0.01), w.value(0.934))
		}
	}
	v := &view{Study: &results.Study{Metric: "epochs to test accuracy 0.9", Margin: 2}, words: newScoreWords("epochs to test accuracy 0.9", 2)}
	if got := v.marginWords(); !strings.Contains(got, "take at most 2") || !strings.Contains(got, " epochs more than the baseline") {
		t.Error(got)
	}
}

// TestNoiseOfNoWidth: differences that are all 0 are a measurement.
func TestNoiseOfNoWidth(t *testing.T) {
	v := &view{Study: &results.Study{NoiseFrom: "two replicates in binary64"}, words: newScoreWords("test accuracy", 0.01)}
	if got := v.noiseWords(); got != "every difference is exactly 0; two replicates in binary64" {
		t.Error(got)
	}
	v.NoiseFrom = ""
	if got := v.noiseWords(); !strings.Contains(got, "not measured") {
		t.Error(got)
	}
	v.NoiseFrom, v.NoiseHigh = "x", 0.01
	if got := v.noiseWords(); !strings.HasPrefix(got, "[0.00, +1.00] pp") {
		t.Error(got)
	}
}
