package experiments

import (
	"context"
	"errors"
	"fmt"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"

	"ulpine/trainer"
)

func TestFailureWarnings(t *testing.T) {
	var eight []failure
	for seed := uint64(100); seed < 108; seed++ {
		for _, arm := range []string{"baseline", "a", "b", "c", "d"} {
			eight = append(eight, failure{arm, seed, fmt.Sprintf("pretrain/%d failed: no room", seed)})
		}
		eight = append(eight, failure{"pretrain", seed, "no room"})
	}
	for _, c := range []struct {
		name     string
		failures []failure
		want     []string
	}{
		{"none", nil, []string{}},
		{"one", []failure{{"a", 102, "no room"}}, []string{"a/102 failed: no room"}},
		{"all that start from pretrainings", eight, []string{"40 runs failed because pretrain/100 to pretrain/107 failed: no room"}},
		{
			"a diverged pretraining",
			[]failure{{"a", 101, "pretrain/101 diverged: loss is NaN"}, {"b", 101, "pretrain/101 diverged: loss is NaN"}},
			[]string{"2 runs failed because pretrain/101 diverged: loss is NaN"},
		},
		{
			"two causes",
			[]failure{{"b", 104, "no room"}, {"a", 102, "no room"}, {"a", 101, "panic: x"}, {"a", 101 + 2, "no room"}},
			[]string{"b/104, a/102 and a/103 failed: no room", "a/101 failed: panic: x"},
		},
		{
			"in rows",
			[]failure{{"a", 7, "x"}, {"a", 3, "x"}, {"a", 4, "x"}, {"a", 5, "x"}, {"a", 8, "x"}},
			[]string{"a/3 to a/5, a/7 and a/8 failed: x"},
		},
		{"another replicate's pretraining is no root", []failure{{"a", 1, "pretrain/2 failed: x"}}, []string{"a/1 failed: pretrain/2 failed: x"}},
	} {
		if d := cmp.Diff(c.want, failureWarnings(c.failures)); d != "" {
			t.Errorf("%s (-want +got):\n%s", c.name, d)
		}
	}
}

// TestFailedPretrainingIsToldOnce: one warning for all that could not start.
func TestFailedPretrainingIsToldOnce(t *testing.T) {
	p, _ := fakePlan(t, 3, true)
	s := openStore(t)
	train := func(ctx context.Context, job trainer.Job, w trainer.Watcher) (trainer.Outcome, error) {
		if isPretraining(job) {
			return trainer.Outcome{}, errors.New("no room")
		}
		return fakeTrain(ctx, job, w)
	}
	if _, err := fake(context.Background(), p, s, Options{Workers: 2}, train); !errors.Is(err, ErrRunsFailed) {
		t.Fatal(err)
	}
	study, err := Study(p, s)
	if err != nil {
		t.Fatal(err)
	}
	var about []string
	for _, w := range study.Warnings {
		if strings.Contains(w, "failed") {
			about = append(about, w)
		}
	}
	want := fmt.Sprintf("%d runs failed because pretrain/100 to pretrain/102 failed: no room", 3*len(p.Arms))
	if len(about) != 1 || about[0] != want {
		t.Errorf("got  %q\nwant %q", about, want)
	}
}
