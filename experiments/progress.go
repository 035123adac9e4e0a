package experiments

import (
	"fmt"
	"sync"
	"time"

	"ulpine/results"
)

// Progress is told what is going on. Its methods are called one at a time, from
// several goroutines, and should return quickly: workers wait for them.
type Progress interface {
	// Started: a worker begins a run.
	Started(Place)
	// Step: a run goes on; at most ten times a second for each worker.
	Step(Step)
	// Finished: a run is stored, failed or broken off.
	Finished(Finish)
	// Note: something that a reader of the screen should know, in one line.
	Note(string)
}

// Place says where in the plan a run is.
type Place struct {
	Worker          int    // 0 .. Workers-1, one bar each
	Arm             string // slug; "pretrain"
	Name            string // as the plan calls it; arms that share the run joined by " = "
	ArmNumber       int    // 1 is the baseline; 0: pretraining
	Arms            int
	Replicate       uint64 // seed
	ReplicateNumber int    // 1 is the first
	Replicates      int
}

// String is "arm 3 of 8, replicate 4 of 10".
func (p Place) String() string {
	if p.ArmNumber == 0 {
		return fmt.Sprintf("pretraining, replicate %d of %d", p.ReplicateNumber, p.Replicates)
	}
	return fmt.Sprintf("arm %d of %d, replicate %d of %d", p.ArmNumber, p.Arms, p.ReplicateNumber, p.Replicates)
}

// Step is a run under way.
type Step struct {
	Place
	Done, Total int // training steps
	Overall     Overall
}

// Finish is a run at its end.
type Finish struct {
	Place
	State    results.State
	Cause    string  // why it failed
	Diverged string  // why it diverged; empty: it did not
	Metric   float64 // the claim's, after the last epoch
	Wall     time.Duration
	Overall  Overall
}

// Overall is how far the plan is.
type Overall struct {
	Done, Total int           // runs; what was stored before counts as done
	Remaining   time.Duration // estimated; negative: not known yet
}

// String is "12 of 40 runs, about 20 s left", of the last run "40 of 40 runs".
func (o Overall) String() string {
	done := fmt.Sprintf("%d of %d runs", o.Done, o.Total)
	if o.Remaining < 0 || o.Done >= o.Total {
		return done
	}
	return done + ", " + About(o.Remaining) + " left"
}

// About words a duration roughly: "about 20 s", "about 3 min", "about 2 h".
func About(d time.Duration) string {
	switch s := d.Seconds(); {
	case s < 1.5:
		return "about 1 s"
	case s < 20:
		return fmt.Sprintf("about %.0f s", s)
	case s < 90:
		return fmt.Sprintf("about %d s", int(s+2.5)/5*5)
	case s < 90*60:
		return fmt.Sprintf("about %.0f min", s/60)
	default:
		return fmt.Sprintf("about %.0f h", s/3600)
	}
}

// silent is the progress that tells nobody.
type silent struct{}

func (silent) Started(Place)   {}
func (silent) Step(Step)       {}
func (silent) Finished(Finish) {}
func (silent) Note(string)     {}

// stepInterval is the least time between two reports of one worker's steps.
const stepInterval = 100 * time.Millisecond

// tracker passes events on to a Progress, one at a time, and keeps the estimate.
type tracker struct {
	mu       sync.Mutex
	to       Progress
	estimate *estimator
	muted    bool
}

func newTracker(to Progress, e *estimator) *tracker {
	if to == nil {
		to = silent{}
	}
	return &tracker{to: to, estimate: e}
}

// do calls f unless the tracker was muted.
func (t *tracker) do(f func()) {
	t.mu.Lock()
	defer t.mu.Unlock()
	if !t.muted {
		f()
	}
}

func (t *tracker) note(format string, args ...any) {
	t.do(func() { t.to.Note(fmt.Sprintf(format, args...)) })
}

func (t *tracker) started(p Place, u *unit) {
	t.do(func() {
		t.estimate.start(p.Worker, u)
		t.to.Started(p)
	})
}

// finished tells the end of a run. counted: it needs no second run.
func (t *tracker) finished(f Finish, counted bool) {
	t.do(func() {
		if counted {
			t.estimate.done++
		}
		f.Overall = t.estimate.overall()
		t.to.Finished(f)
	})
}

// ended tells the estimate that a worker has no run any more.
func (t *tracker) ended(worker int) {
	t.do(func() { t.estimate.end(worker) })
}

// mute stops all events, so that a worker left behind speaks no more.
func (t *tracker) mute() {
	t.mu.Lock()
	defer t.mu.Unlock()
	t.muted = true
}

// watcher is the trainer's view of the tracker during one run. It belongs to one
// worker.
type watcher struct {
	t     *tracker
	place Place
	last  time.Time
}

// Progress is called after every training step.
func (w *watcher) Progress(done, total int) {
	now := time.Now()
	if now.Sub(w.last) < stepInterval && done < total {
		return
	}
	w.last = now
	w.t.do(func() {
		w.t.estimate.step(w.place.Worker, done, total)
		w.t.to.Step(Step{w.place, done, total, w.t.estimate.overall()})
	})
}
