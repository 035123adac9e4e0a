package experiments

import (
	"context"
	"errors"
	"fmt"
	"path/filepath"
	"strings"
	"sync"
	"testing"
	"time"

	"go.uber.org/goleak"

	"ulpine/results"
	"ulpine/results/store"
	"ulpine/trainer"
)

// TestSameBitsForAnyWorkers runs a real plan, with and without pretraining, on
// one, two and seven workers, from fresh stores and in two goes.
func TestSameBitsForAnyWorkers(t *testing.T) {
	for _, extra := range []string{"", pretraining} {
		p := tinyPlan(t, extra)
		var want results.Hash
		for _, workers := range []int{1, 2, 7} {
			s := openStore(t)
			got, err := Run(context.Background(), p, s, Options{Workers: workers})
			if err != nil {
				t.Fatal(err)
			}
			runs := 3 * 3 // "fp32 again" shares the baseline's runs
			if extra != "" {
				runs += 3
			}
			if got.Runs != runs || got.Done != runs || got.Before != 0 || got.Failed != 0 || got.BrokenOff != 0 {
				t.Errorf("%d workers: %+v", workers, got)
			}
			if workers == 1 {
				want = got.StoreDigest
			}
			if got.StoreDigest != want || want.IsZero() {
				t.Errorf("%d workers: store digest %s, one worker has %s", workers, got.StoreDigest, want)
			}
			again, err := Run(context.Background(), p, s, Options{Workers: workers})
			if err != nil || again.Done != 0 || again.Before != runs || again.StoreDigest != want {
				t.Errorf("run again: %+v, %v", again, err)
			}
		}
	}
}

// TestResume stops a plan after a few runs, closes the store, and goes on: only
// what is missing is run, and the digest is that of an undisturbed run.
func TestResume(t *testing.T) {
	p := tinyPlan(t, pretraining)
	whole := openStore(t)
	want, err := Run(context.Background(), p, whole, Options{Workers: 2})
	if err != nil {
		t.Fatal(err)
	}
	for stopAfter := 1; stopAfter <= 11; stopAfter += 2 {
		path := filepath.Join(t.TempDir(), store.DefaultPath)
		s := openStoreAt(t, path)
		ctx, cancel := context.WithCancel(context.Background())
		finished := 0
		l := &log{on: func(f Finish) {
			if finished++; finished == stopAfter {
				cancel()
			}
		}}
		first, err := Run(ctx, p, s, Options{Workers: 2, Progress: l})
		cancel()
		if first.Done < stopAfter || first.Done < first.Runs && !errors.Is(err, context.Canceled) {
			t.Fatalf("stopped after %d: %+v, %v", stopAfter, first, err)
		}
		s.Close()
		s = openStoreAt(t, path)
		second, err := Run(context.Background(), p, s, Options{Workers: 2})
		if err != nil || second.Before != first.Done || second.Before+second.Done != second.Runs {
			t.Errorf("went on after %d: %+v, %v", stopAfter, second, err)
		}
		if second.StoreDigest != want.StoreDigest {
			t.Errorf("stopped after %d: store digest %s, undisturbed %s", stopAfter, second.StoreDigest, want.StoreDigest)
		}
		for name, state := range states(t, s) {
			if state != results.Stored {
				t.Errorf("%s is %s", name, state)
			}
		}
	}
}

// TestCancel: a cancelled plan ends within a second, stores what was finished,
// and marks what was in flight; nothing is left running.
func TestCancel(t *testing.T) {
	p, _ := fakePlan(t, 4, false)
	s := openStore(t)
	ctx, cancel := context.WithCancel(context.Background())
	var cancelled time.Time
	started := 0
	l := &log{}
	train := func(ctx context.Context, job trainer.Job, w trainer.Watcher) (trainer.Outcome, error) {
		l.mu.Lock()
		started++
		quick, last := started < 4, started == 5
		l.mu.Unlock()
		if quick {
			return fakeTrain(ctx, job, w)
		}
		if last {
			cancelled = time.Now()
			cancel()
		}
		<-ctx.Done() // a long run, which heeds its context
		return trainer.Outcome{}, ctx.Err()
	}
	got, err := fake(ctx, p, s, Options{Workers: 2, Progress: l}, train)
	if took := time.Since(cancelled); took > time.Second {
		t.Errorf("ended %v after it was cancelled", took)
	}
	if !errors.Is(err, context.Canceled) || !errors.Is(err, ErrStopped) || !strings.Contains(err.Error(), "3 of 12 runs stored, 2 broken off; run the plan again") {
		t.Errorf("error %v", err)
	}
	if got.Done != 3 || got.BrokenOff != 2 {
		t.Errorf("%+v", got)
	}
	list, err := s.List(store.Filter{})
	if err != nil {
		t.Fatal(err)
	}
	count, seen := map[results.State]int{}, map[results.Hash]bool{}
	for _, e := range list { // baseline and "fp32 again" are one run
		if !seen[e.Key] {
			seen[e.Key] = true
			count[e.State]++
		}
	}
	if count[results.BrokenOff] != 2 || count[results.Stored] != 3 || len(seen) != 5 {
		t.Errorf("states %v", count)
	}
	told := 0
	for _, f := range l.finished {
		if f.State == results.BrokenOff {
			told++
		}
	}
	if told != 2 {
		t.Errorf("%d broken off in the progress", told)
	}
	s.Close()
	goleak.VerifyNone(t)
}

// TestCancelStubborn: a trainer that does not heed its context is left behind,
// and what it comes to later is not stored.
func TestCancelStubborn(t *testing.T) {
	p, _ := fakePlan(t, 2, false)
	s := openStore(t)
	ctx, cancel := context.WithCancel(context.Background())
	release := make(chan struct{})
	var cancelled time.Time
	var once sync.Once
	var left sync.WaitGroup
	left.Add(2)
	var ready sync.WaitGroup
	ready.Add(2)
	train := func(_ context.Context, job trainer.Job, w trainer.Watcher) (trainer.Outcome, error) {
		defer left.Done()
		ready.Done()
		ready.Wait()
		once.Do(func() {
			cancelled = time.Now()
			cancel()
		})
		<-release
		return outcome(job), nil
	}
	got, err := fake(ctx, p, s, Options{Workers: 2}, train)
	if took := time.Since(cancelled); took > time.Second {
		t.Errorf("ended %v after it was cancelled", took)
	}
	if !errors.Is(err, context.Canceled) || got.BrokenOff != 2 {
		t.Errorf("%+v, %v", got, err)
	}
	close(release)
	left.Wait()
	time.Sleep(50 * time.Millisecond) // let the workers try to store
	for name, state := range states(t, s) {
		if state != results.BrokenOff {
			t.Errorf("%s is %s", name, state)
		}
	}
	s.Close()
	goleak.VerifyNone(t)
}

func TestCancelledBeforeTheFirstRun(t *testing.T) {
	p := tinyPlan(t, "")
	s := openStore(t)
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	got, err := Run(ctx, p, s, Options{Workers: 2})
	if !errors.Is(err, context.Canceled) || !errors.Is(err, ErrStopped) || got.Done != 0 || len(states(t, s)) != 0 {
		t.Errorf("%+v, %v", got, err)
	}
}

// TestFailedRun: a panic and an error fail their runs alone; the next call
// repeats only those.
func TestFailedRun(t *testing.T) {
	p, _ := fakePlan(t, 3, false)
	s := openStore(t)
	broken := true
	train := func(ctx context.Context, job trainer.Job, w trainer.Watcher) (trainer.Outcome, error) {
		stochastic := job.Arm.Layers[0].Master.Rounding.Mode != 0
		switch {
		case broken && stochastic && job.Seed == 101:
			var none []int
			_ = none[job.Seed]
		case broken && stochastic && job.Seed == 102:
			return trainer.Outcome{}, errors.New("no room")
		}
		return fakeTrain(ctx, job, w)
	}
	got, err := fake(context.Background(), p, s, Options{Workers: 2}, train)
	if !errors.Is(err, ErrRunsFailed) || !strings.Contains(err.Error(), "2 of 9") || got.Failed != 2 || got.Done != 7 {
		t.Errorf("%+v, %v", got, err)
	}
	list, _ := s.List(store.Filter{State: results.Failed})
	if len(list) != 2 || list[0].Name() != "bf16-stochastic/101" ||
		!strings.Contains(list[0].Cause, "panic: runtime error: index out of range") || !strings.Contains(list[0].Cause, "run_test.go:") ||
		list[1].Cause != "no room" {
		t.Errorf("failed: %+v", list)
	}
	study, err := Study(p, s)
	if err != nil || len(study.Warnings) < 2 || !strings.Contains(strings.Join(study.Warnings, "\n"), "bf16-stochastic/102 failed: no room") {
		t.Errorf("warnings %q, %v", study.Warnings, err)
	}
	broken = false
	again, err := fake(context.Background(), p, s, Options{Workers: 2}, train)
	if err != nil || again.Done != 2 || again.Before != 7 {
		t.Errorf("again: %+v, %v", again, err)
	}
	if list, _ = s.List(store.Filter{State: results.Failed}); len(list) != 0 {
		t.Errorf("still failed: %+v", list)
	}
}

func TestDivergedBaseline(t *testing.T) {
	p, _ := fakePlan(t, 3, false)
	s := openStore(t)
	train := func(ctx context.Context, job trainer.Job, w trainer.Watcher) (trainer.Outcome, error) {
		o := outcome(job)
		if job.Seed == 101 && job.Arm.Layers[0].Master.Format.String() == "binary32" {
			o.Diverged, o.DivergedStep = "loss is NaN", 2
		}
		return o, nil
	}
	for range 2 { // told again when all is stored already
		got, err := fake(context.Background(), p, s, Options{Workers: 2}, train)
		if !errors.Is(err, ErrBaseline) || !strings.Contains(err.Error(), "the baseline diverged in 1 of 3 replicates (101)") {
			t.Errorf("error %v", err)
		}
		if got.Before+got.Done != 9 {
			t.Errorf("not everything is stored: %+v", got)
		}
	}
	study, err := Study(p, s)
	if err != nil || study.Answer != "No verdict can be given: the baseline diverged in 1 of 3 replicates (101)." {
		t.Errorf("answer %q, %v", study.Answer, err)
	}
	for _, c := range study.Comparisons {
		if c.Arm == "fp32-again" { // it shares the baseline's runs, so it diverged too
			continue
		}
		if c.Verdict.Kind != results.Undecided || c.Verdict.Pairs != 0 {
			t.Errorf("%s: verdict %+v", c.Arm, c.Verdict)
		}
	}
}

// TestPretraining: every arm starts from the weights of its replicate's
// pretraining, also when those come from the store.
func TestPretraining(t *testing.T) {
	p, _ := fakePlan(t, 2, true)
	p.Pretrain.Task.Source = &fakeSource{mark: 1}
	s := openStore(t)
	calls, fromWeights := 0, 0
	var mu sync.Mutex
	stop := true
	ctx, cancel := context.WithCancel(context.Background())
	train := func(_ context.Context, job trainer.Job, w trainer.Watcher) (trainer.Outcome, error) {
		mu.Lock()
		defer mu.Unlock()
		calls++
		if isPretraining(job) {
			if job.Start != nil {
				t.Error("the pretraining has a start")
			}
			return outcome(job), nil
		}
		pre := job
		pre.Start = nil
		pre.Arm = p.Pretrain.Arithmetic
		if want := outcome(pre).Final[0].Values[0]; len(job.Start) != 1 || job.Start[0].Values[0] != want {
			t.Errorf("seed %d starts from %+v, want %v", job.Seed, job.Start, want)
		}
		fromWeights++
		if stop && fromWeights == 2 {
			cancel()
			return trainer.Outcome{}, context.Canceled
		}
		return outcome(job), nil
	}
	if _, err := fake(ctx, p, s, Options{Workers: 1}, train); !errors.Is(err, context.Canceled) {
		t.Fatal(err)
	}
	stop, calls, fromWeights = false, 0, 0
	got, err := fake(context.Background(), p, s, Options{Workers: 2}, train)
	if err != nil || got.Before != 2 || got.Runs != 8 {
		t.Errorf("%+v, %v", got, err)
	}
	// replicate 100 has two runs left, replicate 101 its pretraining and three
	if calls != 6 || fromWeights != 5 {
		t.Errorf("%d trainings, %d from weights", calls, fromWeights)
	}
	if all := states(t, s); all["pretrain/100"] != results.Stored || all["pretrain/101"] != results.Stored || len(all) != 10 {
		t.Errorf("states %v", all)
	}
}

func TestPretrainingWithoutWeights(t *testing.T) {
	for _, c := range []struct {
		name string
		end  func() (trainer.Outcome, error)
		want error
		says string
	}{
		{"failed", func() (trainer.Outcome, error) { return trainer.Outcome{}, errors.New("no room") }, ErrRunsFailed, "pretrain/100 failed: no room"},
		{"diverged", func() (trainer.Outcome, error) { return trainer.Outcome{Diverged: "loss is NaN"}, nil }, ErrBaseline, "pretrain/100 diverged: loss is NaN"},
	} {
		p, _ := fakePlan(t, 1, true)
		p.Pretrain.Task.Source = &fakeSource{mark: 1}
		s := openStore(t)
		for range 2 { // with the pretraining at hand, and from the store
			_, err := fake(context.Background(), p, s, Options{Workers: 2}, func(_ context.Context, job trainer.Job, w trainer.Watcher) (trainer.Outcome, error) {
				if !isPretraining(job) {
					t.Errorf("%s: an arm was trained all the same", c.name)
				}
				return c.end()
			})
			if !errors.Is(err, c.want) {
				t.Errorf("%s: %v", c.name, err)
			}
			list, _ := s.List(store.Filter{Arm: "bf16-nearest"})
			if len(list) != 1 || list[0].State != results.Failed || list[0].Cause != c.says {
				t.Errorf("%s: %+v", c.name, list)
			}
		}
	}
}

// TestDataIsSharedAndLetGo: each replicate's data is loaded once, and no more
// replicates are open than there are workers.
func TestDataIsSharedAndLetGo(t *testing.T) {
	const replicates = 12
	for _, workers := range []int{1, 2, 5} {
		p, source := fakePlan(t, replicates, false)
		s := openStore(t)
		x := newRunner(newLayout(p), s, Options{Workers: workers})
		most := 0
		var mu sync.Mutex
		x.train = func(ctx context.Context, job trainer.Job, w trainer.Watcher) (trainer.Outcome, error) {
			x.schedule.mu.Lock()
			open := len(x.schedule.open)
			for _, r := range x.replicas {
				if r.loaded && r.left == 0 && r.data != nil {
					t.Errorf("replicate %d is done, but its data is kept", r.seed)
				}
			}
			x.schedule.mu.Unlock()
			mu.Lock()
			most = max(most, open)
			mu.Unlock()
			time.Sleep(time.Millisecond)
			return fakeTrain(ctx, job, w)
		}
		if _, err := x.run(context.Background()); err != nil {
			t.Fatal(err)
		}
		if most > workers || most == 0 {
			t.Errorf("%d workers: %d replicates open at once", workers, most)
		}
		if len(source.loads) != replicates {
			t.Errorf("%d replicates loaded", len(source.loads))
		}
		for seed, n := range source.loads {
			if n != 1 {
				t.Errorf("replicate %d was loaded %d times", seed, n)
			}
		}
		if _, err := fake(context.Background(), p, s, Options{Workers: workers}, fakeTrain); err != nil {
			t.Fatal(err)
		}
		if len(source.loads) != replicates || source.loads[100] != 1 {
			t.Error("data was drawn although everything is stored")
		}
	}
}

// TestSharedData: data that all replicates have in common is loaded once in all.
func TestSharedData(t *testing.T) {
	p, source := fakePlan(t, 4, false)
	p.Task.PerReplicate = false
	s := openStore(t)
	if _, err := fake(context.Background(), p, s, Options{Workers: 2}, fakeTrain); err != nil {
		t.Fatal(err)
	}
	if len(source.loads) != 1 || source.loads[100] != 1 {
		t.Errorf("loads %v", source.loads)
	}
	source.mark = 9 // the file was changed: other keys, everything is run again
	got, err := fake(context.Background(), p, s, Options{Workers: 2}, fakeTrain)
	if err != nil || got.Done != 12 || got.Before != 0 {
		t.Errorf("%+v, %v", got, err)
	}
}

func TestDataErrors(t *testing.T) {
	p, source := fakePlan(t, 3, false)
	s := openStore(t)
	source.err = errors.New("file is short")
	if _, err := fake(context.Background(), p, s, Options{Workers: 2}, fakeTrain); err == nil || err.Error() != "load pump-vibration: file is short" {
		t.Errorf("%v", err)
	}
	source.err, source.panic = nil, true
	if _, err := fake(context.Background(), p, s, Options{Workers: 2}, fakeTrain); err == nil || !strings.Contains(err.Error(), "panic: the reader is broken (helper_test.go:") {
		t.Errorf("%v", err)
	}
	source.panic = false
	p.Replicates.Count = 1
	if _, err := fake(context.Background(), p, s, Options{Workers: 2}, fakeTrain); err != nil {
		t.Fatal(err)
	}
	source.mark = 5 // the generator changed, the arithmetic version did not
	q, _ := fakePlan(t, 1, false)
	q.Task.Source = source
	q.Arms[1].Canonical += "another arm\n"
	_, err := fake(context.Background(), q, s, Options{Workers: 2}, fakeTrain)
	if err == nil || !strings.Contains(err.Error(), "raise the arithmetic version") {
		t.Errorf("%v", err)
	}
}

// TestStoreGone: a store that cannot be written ends the plan with its error.
func TestStoreGone(t *testing.T) {
	p, _ := fakePlan(t, 3, false)
	s := openStore(t)
	closed := false
	train := func(ctx context.Context, job trainer.Job, w trainer.Watcher) (trainer.Outcome, error) {
		if !closed {
			closed = true
			s.Close()
		}
		return fakeTrain(ctx, job, w)
	}
	if _, err := fake(context.Background(), p, s, Options{Workers: 1}, train); !errors.Is(err, store.ErrClosed) {
		t.Errorf("%v", err)
	}
}

// TestProgress: what a screen is told is enough for its words.
func TestProgress(t *testing.T) {
	p, _ := fakePlan(t, 3, true)
	p.Pretrain.Task.Source = &fakeSource{mark: 1}
	s := openStore(t)
	l := &log{}
	if _, err := fake(context.Background(), p, s, Options{Workers: 2, Progress: l}, fakeTrain); err != nil {
		t.Fatal(err)
	}
	if len(l.started) != 12 || len(l.finished) != 12 || len(l.steps) < 12 {
		t.Errorf("%d started, %d steps, %d finished", len(l.started), len(l.steps), len(l.finished))
	}
	if l.started[0].Arm != "pretrain" || !strings.HasPrefix(l.started[0].String(), "pretraining, replicate ") {
		t.Errorf("first: %v", l.started[0])
	}
	words := map[string]bool{}
	for _, f := range l.finished {
		words[f.Place.String()] = true
		if f.State != results.Stored || f.Worker < 0 || f.Worker > 1 || f.Overall.Total != 12 {
			t.Errorf("%+v", f)
		}
	}
	for arm := 1; arm <= 3; arm++ {
		for r := 1; r <= 3; r++ {
			if w := fmt.Sprintf("arm %d of 4, replicate %d of 3", arm, r); !words[w] {
				t.Errorf("nobody was at %s", w)
			}
		}
	}
	if last := l.finished[11].Overall; last.Done != 12 {
		t.Errorf("at the end %v", last)
	}
	for _, s := range l.started {
		if s.ArmNumber == 1 && s.Name != "baseline = fp32 again" {
			t.Errorf("the shared run is called %q", s.Name)
		}
	}
	l = &log{}
	if _, err := fake(context.Background(), p, s, Options{Workers: 2, Progress: l}, fakeTrain); err != nil {
		t.Fatal(err)
	}
	if len(l.notes) != 1 || l.notes[0] != "12 of 12 runs are stored already" || len(l.started) != 0 {
		t.Errorf("again: %q, %d started", l.notes, len(l.started))
	}
	p.Claim.Margin = 0.3
	l = &log{}
	if _, err := fake(context.Background(), p, s, Options{Workers: 2, Progress: l}, fakeTrain); err != nil {
		t.Fatal(err)
	}
	if !strings.Contains(strings.Join(l.notes, "\n"), "margin was 0.2, is 0.3") {
		t.Errorf("a changed claim is not told: %q", l.notes)
	}
}

// TestIdleWorkersHelp: workers for which there is no run help the one that has one,
// and leave with it.
func TestIdleWorkersHelp(t *testing.T) {
	p, _ := fakePlan(t, 1, true) // its pretraining is one run that all others wait for
	helped := false
	train := func(ctx context.Context, job trainer.Job, w trainer.Watcher) (trainer.Outcome, error) {
		if isPretraining(job) {
			for deadline := time.Now().Add(5 * time.Second); job.Team.Idle() < 6 && time.Now().Before(deadline); {
				time.Sleep(time.Millisecond)
			}
			helped = job.Team.Idle() == 6
		}
		return fakeTrain(ctx, job, w)
	}
	if _, err := fake(context.Background(), p, openStore(t), Options{Workers: 7}, train); err != nil {
		t.Fatal(err)
	}
	if !helped {
		t.Error("six workers had nothing to do and did not help")
	}
}
