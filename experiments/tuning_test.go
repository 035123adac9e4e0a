package experiments

import (
	"context"
	"errors"
	"math"
	"slices"
	"strings"
	"testing"

	"ulpine/results"
	"ulpine/results/store"
)

// tuningTable lets every arm of the tiny plan try four pairs of values, one of which
// none can train with.
const tuningTable = `
[tuning]
learning_rate = [0.01, 0.1, 1e30]
loss_scale = ["none", { kind = "fixed", value = 64 }]
replicates = 2
`

// TestTuning: every arm tries the same values on seeds of their own, is given the
// best of them, and the reported replicates are those of a plan that spells them out;
// for any number of workers, and after a stop.
func TestTuning(t *testing.T) {
	p := tinyPlan(t, tuningTable)
	s := openStore(t)
	l := &log{}
	summary, err := Run(context.Background(), p, s, Options{Workers: 2, Progress: l})
	if err != nil {
		t.Fatal(err)
	}
	// fp32 again shares the baseline's runs: 3 arms x 6 trials x 2 and 3 x 3
	if summary.Runs != 45 || summary.Done+summary.Before != 45 {
		t.Errorf("%+v", summary)
	}
	if notes := strings.Join(l.notes, "\n"); !strings.Contains(notes, "tuning: 36 runs choose") || !strings.Contains(notes, "tuned: learning rate ") {
		t.Errorf("notes %q", notes)
	}
	study, err := Study(p, s)
	if err != nil {
		t.Fatal(err)
	}
	u := study.Tuning
	if u == nil || !u.Done || u.Runs != 36 || u.Stored != 36 || u.FirstSeed != 100_100 || len(u.Arms) != 4 || u.Metric != "validation accuracy" {
		t.Fatalf("%+v", u)
	}
	for _, a := range u.Arms {
		checkChoice(t, a)
	}
	if !strings.Contains(study.Answer, "was given the learning rate and loss scale of the best of the same 6 trials, by validation accuracy on 2 replicates") {
		t.Errorf("answer %q", study.Answer)
	}
	if study.Claim.Tuning == "" || len(study.Runs) != 12 {
		t.Errorf("claim %+v, %d runs", study.Claim, len(study.Runs))
	}
	sameAsSpelt(t, u, study)
	if again, err := Run(context.Background(), p, s, Options{}); err != nil || again.Done != 0 || again.Before != 45 || again.StoreDigest != summary.StoreDigest {
		t.Errorf("again: %+v, %v", again, err)
	}
	stopped := openStore(t)
	for at := 5; ; at += 20 {
		ctx, cancel := context.WithCancel(context.Background())
		_, err := Run(ctx, p, stopped, Options{Workers: 1, Progress: &stopper{at: at, stop: cancel}})
		cancel()
		if err == nil {
			break
		}
		if !errors.Is(err, ErrStopped) || at > 100 {
			t.Fatal(err)
		}
		part, err := Study(p, stopped)
		if err != nil || part.Tuning == nil || !part.Tuning.Done && (len(part.Runs) > 0 || !strings.Contains(part.Answer, "of 36 runs of the tuning are stored")) {
			t.Fatalf("%v, %+v, %q", err, part.Tuning, part.Answer)
		}
	}
	if digest, err := stopped.Digest(); err != nil || digest != summary.StoreDigest {
		t.Errorf("stopped and gone on: %s, %v; at once %s", digest, err, summary.StoreDigest)
	}
}

// checkChoice finds an arm's best trial once more, by another way.
func checkChoice(t *testing.T, a results.TunedArm) {
	t.Helper()
	if len(a.Trials) != 6 || a.Chosen < 0 || a.Chosen > 3 || a.Trials[a.Chosen].Diverged > 0 {
		t.Fatalf("%+v", a)
	}
	for i, trial := range a.Trials {
		if trial.N != 2 || (i >= 4) != (trial.Diverged == 2) || i < 4 && math.IsNaN(trial.Mean) {
			t.Errorf("%s, trial %d: %+v", a.Arm, i, trial)
		}
		if chosen := a.Trials[a.Chosen].Mean; trial.Mean > chosen || i < a.Chosen && trial.Mean == chosen {
			t.Errorf("%s: trial %d has %v, the chosen one, %d, %v", a.Arm, i, trial.Mean, a.Chosen, chosen)
		}
	}
	if a.Edge != (a.Chosen < 2) {
		t.Errorf("%s: trial %d, edge %v", a.Arm, a.Chosen, a.Edge)
	}
}

// sameAsSpelt runs a plan with the chosen values written out: the same keys and bits.
func sameAsSpelt(t *testing.T, u *results.Tuning, study *results.Study) {
	t.Helper()
	words := func(slug string) string {
		i := slices.IndexFunc(u.Arms, func(a results.TunedArm) bool { return a.Arm == slug })
		trial := u.Arms[i].Trials[u.Arms[i].Chosen]
		scale := "loss_scale = \"none\"\n"
		if trial.LossScale != "none" {
			scale = "loss_scale = { kind = \"fixed\", value = 64 }\n"
		}
		return "learning_rate = " + trial.LearningRate + "\n" + scale
	}
	base := words("baseline")
	rate, scale, _ := strings.Cut(base, "\n")
	changes := []string{"learning_rate = 0.05", rate, "[baseline]\n", "[baseline]\n" + scale}
	for name, slug := range map[string]string{"bf16 nearest": "bf16-nearest", "bf16 stochastic": "bf16-stochastic", "fp32 again": "fp32-again"} {
		changes = append(changes, "[[arm]]\nname = \""+name+"\"\n", "[[arm]]\nname = \""+name+"\"\n"+words(slug))
	}
	s := openStore(t)
	p := tinyPlan(t, "", changes...)
	if _, err := Run(context.Background(), p, s, Options{}); err != nil {
		t.Fatal(err)
	}
	spelt, err := Study(p, s)
	if err != nil {
		t.Fatal(err)
	}
	for i, r := range spelt.Runs {
		if o := study.Runs[i]; r.Key != o.Key || r.Digest != o.Digest || r.Arm != o.Arm {
			t.Errorf("%s has key %s and digest %s, tuned %s and %s", r.Name(), r.Key.Short(), r.Digest.Short(), o.Key.Short(), o.Digest.Short())
		}
	}
}

// TestTuningSeesNoTestData: trials never evaluate it.
func TestTuningSeesNoTestData(t *testing.T) {
	p, s := tinyPlan(t, tuningTable), openStore(t)
	if _, err := Run(context.Background(), p, s, Options{}); err != nil {
		t.Fatal(err)
	}
	list, err := s.List(store.Filter{})
	if err != nil {
		t.Fatal(err)
	}
	trials := 0
	for _, e := range list {
		if e.Replicate < 100_100 {
			continue
		}
		trials++
		r, err := s.Curve(e.Key)
		if err != nil {
			t.Fatal(err)
		}
		if last := r.Epochs[len(r.Epochs)-1]; !math.IsNaN(last.TestMetric) || !math.IsNaN(last.TestLoss) || r.Predictions != nil || r.Confusion != nil {
			t.Errorf("%s has seen the test data: %+v", e.Name(), last)
		}
		if !strings.Contains(e.Arm, "-trial-") {
			t.Errorf("%s", e.Name())
		}
	}
	if trials != 48 {
		t.Errorf("%d trials", trials)
	}
}

// TestBestTrial: the fewest diverged come first, then the mean, then the order.
func TestBestTrial(t *testing.T) {
	accuracy, _ := results.FindMetric("validation accuracy")
	loss, _ := results.FindMetric("validation loss")
	trial := func(diverged int, mean float64) results.Trial {
		return results.Trial{N: 3, Diverged: diverged, Mean: mean}
	}
	nan := math.NaN()
	for _, c := range []struct {
		trials   []results.Trial
		up, down int // chosen by accuracy, by loss
	}{
		{[]results.Trial{trial(0, 0.5), trial(0, 0.7), trial(0, 0.7)}, 1, 0},
		{[]results.Trial{trial(1, 0.9), trial(0, 0.2), trial(0, 0.3)}, 2, 1},
		{[]results.Trial{trial(3, nan), trial(3, nan)}, 0, 0},
		{[]results.Trial{trial(3, nan), trial(2, 0.1)}, 1, 1},
	} {
		if up, down := best(c.trials, accuracy), best(c.trials, loss); up != c.up || down != c.down {
			t.Errorf("%+v: %d and %d, want %d and %d", c.trials, up, down, c.up, c.down)
		}
	}
}

// TestTuningIsClaimed: another list after the first run shows as a change.
func TestTuningIsClaimed(t *testing.T) {
	s := openStore(t)
	if _, err := Run(context.Background(), tinyPlan(t, tuningTable), s, Options{}); err != nil {
		t.Fatal(err)
	}
	study, err := Study(tinyPlan(t, tuningTable, "[0.01, 0.1, 1e30]", "[0.01, 0.1]"), s)
	if err != nil || !strings.Contains(study.MarginChanged, "tuning was learning rate of 0.01, 0.1, 1e+30") {
		t.Errorf("%q, %v", study.MarginChanged, err)
	}
	if w := strings.Join(study.Warnings, "\n"); strings.Contains(w, "at the end of the list") {
		t.Errorf("two values have no end: %s", w)
	}
}
