package experiments

import (
	"context"
	"errors"
	"strings"
	"testing"

	"ulpine/experiments/plan"
	"ulpine/results"
)

// sequential is the tiny plan with looks; its loss differs by little in every pair.
func sequential(t *testing.T, replicates string, changes ...string) *plan.Plan {
	return tinyPlan(t, "", append(changes, "count = 3", replicates, `metric = "test accuracy"`, `metric = "test loss"`,
		"[[arm]]\nname = \"fp32 again\"\neverything = \"fp32\"\n", "")...)
}

const looking = "up_to = 8\nlook_every = 4"

// TestStopsEarly: a plan that is decided at its first look stops there, with the
// same bits as a plan of that many replicates, for any number of workers; run
// again it does nothing.
func TestStopsEarly(t *testing.T) {
	fixed, err := Run(context.Background(), sequential(t, "count = 4"), openStore(t), Options{Workers: 2})
	if err != nil {
		t.Fatal(err)
	}
	p := sequential(t, looking)
	for _, workers := range []int{1, 3} {
		s := openStore(t)
		l := &log{}
		got, err := Run(context.Background(), p, s, Options{Workers: workers, Progress: l})
		if err != nil || got.Done != 12 || got.Runs != 12 || got.StoreDigest != fixed.StoreDigest {
			t.Errorf("%d workers: %+v, %v; fixed %s", workers, got, err, fixed.StoreDigest)
		}
		if notes := strings.Join(l.notes, "\n"); !strings.Contains(notes, "stopped after 4 of at most 8 replicates: every comparison is decided") {
			t.Errorf("notes %q", notes)
		}
		if again, err := Run(context.Background(), p, s, Options{Workers: workers}); err != nil || again.Done != 0 || again.Before != 12 {
			t.Errorf("again: %+v, %v", again, err)
		}
		study, err := Study(p, s)
		if err != nil {
			t.Fatal(err)
		}
		c := study.Comparisons[0]
		if c.Verdict.Kind != results.Within || c.N != 4 || !strings.Contains(strings.Join(c.Warnings, "\n"), "look 1 of 2: looked at after 4 of at most 8 pairs") {
			t.Errorf("%+v, %q", c.Verdict, c.Warnings)
		}
		if !strings.Contains(study.Looks, "stopped at look 1 of 2, after 4 pairs") || !strings.Contains(study.Looks, "not widened") {
			t.Errorf("looks %q", study.Looks)
		}
	}
}

// stopper is a progress that stops a plan as soon as so many runs have started.
type stopper struct {
	silent
	started, at int
	stop        func()
}

func (s *stopper) Started(Place) {
	if s.started++; s.started == s.at {
		s.stop()
	}
}

// TestStoppedAtLook: a plan that is stopped while it looks is not taken for one
// that has come to its end.
func TestStoppedAtLook(t *testing.T) {
	ctx, cancel := context.WithCancel(context.Background())
	defer cancel()
	p := sequential(t, looking, "margin = 0.2", "margin = 1e-9")
	l := &log{}
	l.on = func(Finish) {
		if len(l.finished) == 12 { // the last one before the look
			cancel()
		}
	}
	got, err := Run(ctx, p, openStore(t), Options{Workers: 2, Progress: l})
	if !errors.Is(err, ErrStopped) || got.Done != 12 {
		t.Errorf("%+v, %v", got, err)
	}
}

// TestGoesOnLooking: what the first look leaves open is run to the end, with the
// bits of a plan without looks, also when it is stopped on the way.
func TestGoesOnLooking(t *testing.T) {
	open := []string{"margin = 0.2", "margin = 1e-9", "margin = 0.1", "margin = 1e-9"}
	fixed, err := Run(context.Background(), sequential(t, "count = 8", open...), openStore(t), Options{Workers: 2})
	if err != nil {
		t.Fatal(err)
	}
	p := sequential(t, looking, open...)
	s := openStore(t)
	ctx, cancel := context.WithCancel(context.Background())
	first, err := Run(ctx, p, s, Options{Workers: 2, Progress: &stopper{at: 15, stop: cancel}}) // behind the first look
	cancel()
	if !errors.Is(err, ErrStopped) || first.Done < 12 || first.BrokenOff == 0 {
		t.Fatalf("%+v, %v", first, err)
	}
	got, err := Run(context.Background(), p, s, Options{Workers: 2})
	if err != nil || got.Before+got.Done != 24 || got.Runs != 24 || got.StoreDigest != fixed.StoreDigest {
		t.Errorf("%+v, %v; fixed %s", got, err, fixed.StoreDigest)
	}
	study, err := Study(p, s)
	if err != nil || !strings.Contains(study.Looks, "went to the last of 2 looks, after 8 pairs") {
		t.Errorf("looks %q, %v", study.Looks, err)
	}
}

// TestLooksAreClaimed: changing the looks after the first run shows.
func TestLooksAreClaimed(t *testing.T) {
	s := openStore(t)
	if _, err := Run(context.Background(), sequential(t, looking), s, Options{}); err != nil {
		t.Fatal(err)
	}
	for text, want := range map[string]string{
		"up_to = 8\nlook_every = 2": "look interval was 4 replicates, is 2 replicates",
		"count = 8":                 "look interval was 4 replicates, is none",
	} {
		study, err := Study(sequential(t, text), s)
		if err != nil || study.MarginChanged != want {
			t.Errorf("%s: changed %q, %v", text, study.MarginChanged, err)
		}
	}
}

// TestTwinDoesNotHoldUpLooks: an arm with the baseline's arithmetic is decided at the
// first look, so it does not keep a plan going whose other arms are decided.
func TestTwinDoesNotHoldUpLooks(t *testing.T) {
	p := tinyPlan(t, "", "count = 3", looking, `metric = "test accuracy"`, `metric = "test loss"`)
	s := openStore(t)
	got, err := Run(context.Background(), p, s, Options{})
	if err != nil || got.Runs != 12 {
		t.Fatalf("%+v, %v", got, err)
	}
	study, err := Study(p, s)
	if err != nil {
		t.Fatal(err)
	}
	twin := study.Comparisons[2]
	if !twin.Same || twin.Verdict.Kind != results.Within || study.Comparisons[0].Same {
		t.Errorf("%+v", twin)
	}
	if !strings.Contains(study.Answer, "(4 pairs each, look 1 of 2)") || strings.Contains(study.Answer, "stored") {
		t.Errorf("answer %q", study.Answer)
	}
}
