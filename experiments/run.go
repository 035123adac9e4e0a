package experiments

import (
	"context"
	"errors"
	"fmt"
	"os"
	"runtime"
	"sync"
	"time"

	"ulpine/datasets"
	"ulpine/experiments/plan"
	"ulpine/results"
	"ulpine/results/store"
	"ulpine/trainer"
)

// Errors that callers tell apart with errors.Is.
var (
	// ErrBaseline: the baseline or a pretraining diverged, so the plan cannot be
	// answered. All its runs are stored.
	ErrBaseline = errors.New("the plan has no answer")
	// ErrRunsFailed: some runs failed. The others are stored.
	ErrRunsFailed = errors.New("runs failed")
	// ErrOnly: Options.Only names something that is no run of the plan. Nothing was done.
	ErrOnly = errors.New("no such run")
	// ErrStopped: the context was cancelled before all runs were done. The error
	// wraps the context's too.
	ErrStopped = errors.New("stopped")
)

// stopError is an ErrStopped that also is the context's error without saying
// "context canceled".
type stopError struct {
	text string
	err  error
}

func (e *stopError) Error() string   { return e.text }
func (e *stopError) Unwrap() []error { return []error{ErrStopped, e.err} }

// Options say how a plan is run. The zero value runs it on all cores and tells
// nobody.
type Options struct {
	Workers     int      // runs at a time; those without one help the others; 0: GOMAXPROCS
	Progress    Progress // may be nil
	CodeVersion string   // noted with each run; empty: what the build says
	Host        string   // noted with each run; empty: the machine's name
	// Only names the runs to be done, arm/replicate; empty: all. A plan with looks then
	// has none, and one with a tuning still needs its trials.
	Only []string
}

// Summary is what a call of Run came to. Runs that arms share count once.
type Summary struct {
	Runs        int // that the plan asks for; with looks, up to the one it came to
	Before      int // stored before
	Done        int // stored by this call
	Failed      int // by this call
	BrokenOff   int
	Wall        time.Duration
	StoreDigest results.Hash // of the whole store
	Claim       results.FixedClaim
}

// grace is how long a cancelled Run waits for its workers before it leaves them
// behind. A trainer stops within a step, but a step or an evaluation may be long.
const grace = 700 * time.Millisecond

// runner is one call of Run.
type runner struct {
	*layout
	store   *store.Store
	options Options
	train   func(context.Context, trainer.Job, trainer.Watcher) (trainer.Outcome, error)

	schedule *schedule
	tracker  *tracker
	estimate *estimator
	cancel   context.CancelFunc
	team     *trainer.Team     // workers without a run help those that have one
	shared   [2]*datasets.Data // of task and pretraining, where all replicates have the same
	replicas []*replicate      // those asked for so far
	later    []*replicate      // behind the next look
	known    map[results.Hash]store.Entry
	decided  bool // a look needs nothing of the later ones

	// gate is held while something is handed to the store's writer, which may
	// have to wait for room; the writer itself must never need it.
	gate    sync.Mutex
	left    bool // workers were left behind: nothing more is stored
	flying  map[results.Hash]Place
	pending sync.WaitGroup // runs handed to the store's writer

	books    sync.Mutex // guards what follows; never held while waiting
	summary  Summary
	failures []string
	fatal    error // the first one
}

// Run does every run of a plan that is not stored yet and stores it, on as many
// workers as the options say; the bits of the results do not depend on them. It
// fixes the plan's claim in the store before the first run. A plan with a tuning has
// its runs done first; then every arm is given its values.
//
// A cancelled context ends it within a second with ErrStopped;
// runs in flight are marked as broken off. Runs that fail are stored as such and
// give ErrRunsFailed, a diverged baseline gives ErrBaseline, both after
// everything else is stored. Other errors (data that cannot be loaded, a store
// that cannot be written) stop the plan at once.
func Run(ctx context.Context, p *plan.Plan, s *store.Store, o Options) (Summary, error) {
	if p.Tuning != nil {
		return runTuned(ctx, p, s, o)
	}
	return newRunner(newLayout(p), s, o).run(ctx)
}

func newRunner(l *layout, s *store.Store, o Options) *runner {
	x := &runner{layout: l, store: s, options: o, train: trainer.Run, flying: map[results.Hash]Place{}}
	for _, seed := range l.seeds() {
		x.summary.Runs += x.asked(seed)
	}
	if x.options.Workers <= 0 {
		x.options.Workers = runtime.GOMAXPROCS(0)
	}
	x.team = trainer.NewTeam(x.options.Workers)
	if x.options.Host == "" {
		x.options.Host, _ = os.Hostname() // for print only
	}
	if x.options.CodeVersion == "" {
		x.options.CodeVersion = CodeVersion()
	}
	x.estimate = newEstimator(x.options.Workers)
	x.tracker = newTracker(o.Progress, x.estimate)
	return x
}

func (x *runner) run(ctx context.Context) (Summary, error) {
	began := time.Now()
	ctx, x.cancel = context.WithCancel(ctx)
	defer x.cancel()
	if err := x.checkOnly(); err != nil {
		return x.summary, err
	}
	if err := x.prepare(ctx); err != nil {
		return x.summary, err
	}
	x.lookByLook(ctx)
	broken := x.breakOff()
	x.pending.Wait()
	x.tracker.mute()
	return x.settle(ctx, broken, time.Since(began))
}

// work lets the workers run until all is done or, a grace after ctx is
// cancelled, leaves them behind.
func (x *runner) work(ctx context.Context) {
	var workers sync.WaitGroup
	for w := range x.options.Workers {
		workers.Go(func() { x.worker(ctx, w) })
	}
	done := make(chan struct{})
	go func() {
		workers.Wait()
		close(done)
	}()
	select {
	case <-done:
		return
	case <-ctx.Done():
	}
	select {
	case <-done:
	case <-time.After(grace):
	}
}

// breakOff closes the store to workers that were left behind and lists the runs
// that were in flight.
func (x *runner) breakOff() (broken []results.Hash) {
	x.gate.Lock()
	defer x.gate.Unlock()
	x.left = true
	for key, place := range x.flying {
		broken = append(broken, key)
		x.tracker.finished(Finish{Place: place, State: results.BrokenOff}, false)
	}
	return broken
}

// settle marks what was broken off and says how it ended.
func (x *runner) settle(ctx context.Context, broken []results.Hash, wall time.Duration) (Summary, error) {
	x.books.Lock()
	defer x.books.Unlock()
	s := &x.summary
	s.BrokenOff, s.Wall = len(broken), wall
	err := x.store.BreakOff(broken...)
	if err == nil {
		s.StoreDigest, err = x.store.Digest()
	}
	switch stopped := ctx.Err() != nil && (s.Before+s.Done+s.Failed < s.Runs || len(x.later) > 0 && !x.decided); {
	case x.fatal != nil:
		return *s, errors.Join(x.fatal, err)
	case err != nil:
		return *s, err
	case stopped:
		return *s, &stopError{fmt.Sprintf("stopped with %d of %d runs stored, %d broken off; run the plan again to go on",
			s.Before+s.Done, s.Runs, s.BrokenOff), ctx.Err()}
	}
	return *s, errors.Join(x.failed(), x.baseline())
}

// stop ends everything because of an error that is not one run's own.
func (x *runner) stop(err error) {
	x.books.Lock()
	defer x.books.Unlock()
	if x.fatal == nil {
		x.fatal = err
	}
	x.cancel()
}

// failed is an error about the runs that failed, or nil.
func (x *runner) failed() error {
	n := len(x.failures)
	if n == 0 {
		return nil
	}
	more := ""
	if n > 1 {
		more = fmt.Sprintf(" (and %d more)", n-1)
	}
	return fmt.Errorf("%w: %d of %d: %s%s; correct the cause and run the plan again, which repeats only them",
		ErrRunsFailed, n, x.summary.Runs, x.failures[0], more)
}

// baseline is an error about a baseline or pretraining that diverged, or nil.
func (x *runner) baseline() error {
	if x.tuning {
		return nil // a value that the baseline diverges with is not chosen
	}
	var runs []results.Run
	var keys []results.Hash
	for _, r := range x.replicas {
		if x.asked(r.seed) == 0 {
			continue
		}
		runs = append(runs, results.Run{Arm: x.Baseline().Slug, Replicate: r.seed})
		keys = append(keys, r.keys.groups[0])
		if x.pre != nil {
			runs = append(runs, results.Run{Arm: plan.PretrainSlug, Replicate: r.seed})
			keys = append(keys, r.keys.pre)
		}
	}
	known, err := x.store.Lookup(keys)
	if err != nil {
		return err
	}
	for i, key := range keys {
		runs[i].Diverged = known[key].Diverged
	}
	if problem := baselineProblem(x.Plan, runs); problem != "" {
		return fmt.Errorf("%w: %s, and no arm can be compared with that; lower the learning rate or change the task", ErrBaseline, problem)
	}
	return nil
}
