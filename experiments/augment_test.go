package experiments

import (
	"context"
	"strings"
	"testing"

	"ulpine/experiments/plan"
	"ulpine/results"
)

// TestAugmentedRuns: the same bits for any number of workers, and an arm that
// computes what the baseline does has its bits, as only paired examples can give.
func TestAugmentedRuns(t *testing.T) {
	p := tinyPlan(t, "", "batch = 16", "batch = 16\naugment = { shift = 3, noise = 0.1 }")
	if got := p.Training.Augment; got.Shift != 3 || got.Noise != 0.1 {
		t.Fatalf("%+v", got)
	}
	var want results.Hash
	for _, workers := range []int{1, 3} {
		s := openStore(t)
		got, err := Run(context.Background(), p, s, Options{Workers: workers})
		if err != nil {
			t.Fatal(err)
		}
		if want.IsZero() {
			want = got.StoreDigest
		}
		if got.StoreDigest != want {
			t.Errorf("%d workers: store digest %s, want %s", workers, got.StoreDigest, want)
		}
		if study, err := Study(p, s); err != nil || !strings.Contains(study.Training, "examples augmented by shifts of up to 3 and noise of 0.1") {
			t.Errorf("training is told as %q, %v", study.Training, err)
		}
	}
}

func TestAugmentPlanErrors(t *testing.T) {
	for _, c := range []struct{ augment, want string }{
		{"augment = 3", "augment: wrong type"},
		{"augment = { shfit = 3 }", `did you mean "shift"?`},
		{"augment = { shift = -1 }", "-1 is out of range"},
		{"augment = { shift = 128 }", "a shift of 128 places would leave nothing of an example of shape 1x128; use less than 128"},
		{"augment = { noise = -0.5 }", "a noise of -0.5 is out of range"},
		{"augment = { noise = 1e-50 }", "a noise of 1e-50 is out of range"},
		{"augment = { noise = \"much\" }", "want a number"},
	} {
		text := strings.Replace(strings.Replace(tiny, "%s", "", 1), "batch = 16", "batch = 16\n"+c.augment, 1)
		_, err := plan.LoadFrom(texts{"tiny.toml": text}, "tiny.toml")
		if err == nil || !strings.Contains(err.Error(), c.want) || strings.Contains(err.Error(), "\n") || !strings.Contains(err.Error(), "tiny.toml:") {
			t.Errorf("%s: %v, want %s", c.augment, err, c.want)
		}
	}
	// An arm may not be augmented otherwise than the rest: that would unpair it.
	text := strings.Replace(tiny, "%s", "", 1)
	text = strings.Replace(text, `storage = "bf16"`, "storage = \"bf16\"\ntraining.augment = { shift = 1 }", 1)
	if _, err := plan.LoadFrom(texts{"tiny.toml": text}, "tiny.toml"); err == nil || !strings.Contains(err.Error(), "training.augment") {
		t.Errorf("an arm's own augmentation: %v", err)
	}
}
