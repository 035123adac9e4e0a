package experiments

import (
	"context"
	"errors"
	"fmt"
	"path/filepath"
	"runtime"
	"strings"
	"time"

	"ulpine/datasets"
	"ulpine/experiments/plan"
	"ulpine/results"
	"ulpine/trainer"
)

// worker does one task after another.
func (x *runner) worker(ctx context.Context, number int) {
	for {
		t, more := x.schedule.next()
		switch {
		case !more:
			return
		case t.load != nil:
			if err := x.open(t.load); err != nil {
				x.stop(err)
				return
			}
			x.schedule.opened(t.load)
		default:
			x.do(ctx, number, t.unit)
			x.schedule.finished(t.unit)
		}
	}
}

// open loads what the runs of a replicate share.
func (x *runner) open(r *replicate) (err error) {
	main, pre := x.requests(r.seed)
	noted, err := x.store.Data([]results.Hash{main, pre})
	if err != nil {
		return err
	}
	if r.data = x.shared[0]; r.data == nil {
		if r.data, err = load(&x.Task, r.seed); err != nil {
			return err
		}
	}
	if err := agree(r, noted[main], r.data, x.shared[0] != nil); err != nil {
		return err
	}
	preHash := noted[pre]
	if x.pre != nil && (r.pre != nil || !r.keysKnown) {
		if r.preData = x.shared[1]; r.preData == nil {
			if r.preData, err = load(&x.Pretrain.Task, r.seed); err != nil {
				return err
			}
		}
		if err := agree(r, preHash, r.preData, x.shared[1] != nil); err != nil {
			return err
		}
		preHash = r.preData.Hash
	}
	if !r.keysKnown {
		if err := x.name(r, preHash); err != nil {
			return err
		}
	}
	if x.pre != nil && r.pre == nil && r.left > 0 {
		r.preData = nil
		return x.fetchStart(r)
	}
	return nil
}

// agree compares data drawn for a replicate with what the store noted of the
// same request: a difference would mix runs on different data under one name.
func agree(r *replicate, noted results.Hash, d *datasets.Data, shared bool) error {
	if now := results.Hash(d.Hash); !shared && !noted.IsZero() && noted != now {
		return fmt.Errorf("replicate %d: the same request for data came to %s once and to %s now; raise the arithmetic version if the generator changed, else test the machine",
			r.seed, noted.Short(), now.Short())
	}
	return nil
}

// name computes the keys of a replicate from its data, tells them to the store,
// and finds its work.
func (x *runner) name(r *replicate, preHash results.Hash) error {
	main, pre := x.requests(r.seed)
	data := map[results.Hash]results.Hash{main: r.data.Hash}
	if x.pre != nil {
		data[pre] = preHash
	}
	r.keys = x.keysOf(r.seed, r.data.Hash, preHash)
	if err := x.store.AddRuns(x.study, x.planned(r.seed, r.keys), data); err != nil {
		return err
	}
	known, err := x.store.Lookup(r.keys.all())
	if err != nil {
		return err
	}
	x.findWork(r, known)
	return nil
}

// fetchStart takes the weights of a pretraining from the store.
func (x *runner) fetchStart(r *replicate) error {
	pretraining, err := x.store.Get(r.keys.pre)
	if err != nil {
		return err
	}
	r.start, r.broken = startOf(pretraining)
	return nil
}

// startOf are the weights that arms start from, or why there are none.
func startOf(pretraining *results.Run) (start []trainer.Param, broken string) {
	switch {
	case pretraining.State != results.Stored:
		return nil, fmt.Sprintf("%s failed: %s", pretraining.Name(), pretraining.Cause)
	case pretraining.Diverged != "":
		return nil, fmt.Sprintf("%s diverged: %s", pretraining.Name(), pretraining.Diverged)
	}
	return params(pretraining.Final), ""
}

// do does one run and hands it to the store.
func (x *runner) do(ctx context.Context, number int, u *unit) {
	place := x.place(number, u)
	if !x.begin(u, place) {
		return
	}
	began := time.Now()
	x.tracker.started(place, u)
	r := &results.Run{
		Arm: place.Arm, Replicate: place.Replicate, Key: u.key, State: results.Stored,
		CodeVersion: x.options.CodeVersion, Host: x.options.Host, Started: began.UTC(),
	}
	job, err := x.job(u, r)
	if err == nil {
		var o trainer.Outcome
		o, err = x.safeTrain(ctx, job, &watcher{t: x.tracker, place: place, last: began})
		record(r, &o, x.Predictions == plan.KeptPredictions && u.group != x.pre)
	}
	r.Wall = time.Since(began)
	x.tracker.ended(number)
	if err != nil && ctx.Err() != nil {
		return // still in flight: it will be marked as broken off
	}
	if err != nil {
		r.State, r.Cause = results.Failed, err.Error()
	}
	if u.group == x.pre {
		start, broken := startOf(r)
		x.schedule.startArms(u.replicate, start, broken)
	}
	x.put(r, place)
}

// place says where a unit is.
func (x *runner) place(number int, u *unit) Place {
	p := Place{
		Worker: number, Arm: x.slug(u.group), Name: x.label(u.group), Arms: len(x.all),
		Replicate: u.replicate.seed, ReplicateNumber: u.replicate.number, Replicates: x.Replicates.Count,
	}
	if u.group != x.pre {
		p.ArmNumber = u.group.arms[0] + 1
	}
	return p
}

// job is the training that a unit asks for. It errs when the replicate's
// pretraining left nothing to start from.
func (x *runner) job(u *unit, r *results.Run) (trainer.Job, error) {
	data := u.replicate.data
	job := trainer.Job{Network: x.Network, Arm: u.group.arm, Training: u.group.training, Seed: u.replicate.seed, Team: x.team}
	if u.group == x.pre {
		data = u.replicate.preData
	} else {
		if u.replicate.broken != "" {
			return job, errors.New(u.replicate.broken)
		}
		job.Start = u.replicate.start
		if x.Plan.Start != nil {
			job.Start = x.Plan.Start.Params
		}
	}
	job.Diagnostics = trainer.Diagnostics(x.Diagnostics)
	r.Data = data.Hash
	job.Train, job.Validation, job.Test = trainer.Set(data.Train), trainer.Set(data.Validation), trainer.Set(data.Test)
	return job, nil
}

// safeTrain trains; a panic becomes an error.
func (x *runner) safeTrain(ctx context.Context, job trainer.Job, w trainer.Watcher) (o trainer.Outcome, err error) {
	defer func() {
		if cause := recover(); cause != nil {
			o, err = trainer.Outcome{}, errors.New(panicText(cause))
		}
	}()
	return x.train(ctx, job, w)
}

// panicText words a panic with the place where it happened: the first function
// below the runtime's. To be called from the deferred function that recovered.
func panicText(cause any) string {
	pcs := make([]uintptr, 64)
	frames := runtime.CallersFrames(pcs[:runtime.Callers(3, pcs)])
	for {
		f, more := frames.Next()
		if !strings.HasPrefix(f.Function, "runtime.") {
			return fmt.Sprintf("panic: %v (%s:%d)", cause, filepath.Base(f.File), f.Line)
		}
		if !more {
			return fmt.Sprintf("panic: %v", cause)
		}
	}
}

// begin marks a run as in flight; false: it is too late for it.
func (x *runner) begin(u *unit, p Place) bool {
	x.gate.Lock()
	defer x.gate.Unlock()
	if x.left {
		return false
	}
	if err := x.store.Begin(p.Arm, p.Replicate, u.key); err != nil {
		x.stop(err)
		return false
	}
	x.flying[u.key] = p
	return true
}

// put hands a finished run to the store's writer, which tells when it is on disk.
func (x *runner) put(r *results.Run, place Place) {
	x.gate.Lock()
	defer x.gate.Unlock()
	if x.left {
		return
	}
	delete(x.flying, r.Key)
	finish := Finish{Place: place, State: r.State, Cause: r.Cause, Diverged: r.Diverged, Wall: r.Wall}
	metric, _ := results.FindMetric(x.Claim.Metric)
	finish.Metric = metric.Final(r)
	x.pending.Add(1)
	err := x.store.PutLater(r, func(err error) {
		defer x.pending.Done()
		x.onDisk(finish, err)
	})
	if err != nil {
		x.pending.Done()
		x.stop(err)
	}
}

// onDisk books a run that the store has, or stops everything if it could not be
// stored.
func (x *runner) onDisk(f Finish, err error) {
	if err != nil {
		x.stop(err)
		return
	}
	x.books.Lock()
	if f.State == results.Failed {
		x.summary.Failed++
		x.failures = append(x.failures, results.RunName(f.Arm, f.Replicate)+": "+f.Cause)
	} else {
		x.summary.Done++
	}
	x.books.Unlock()
	x.tracker.finished(f, f.State == results.Stored)
}
