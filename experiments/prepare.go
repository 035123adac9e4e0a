package experiments

import (
	"context"
	"fmt"
	"time"

	"ulpine/datasets"
	"ulpine/experiments/plan"
	"ulpine/results"
	"ulpine/results/store"
)

// prepare fixes the claim and finds out which replicates have runs to be done.
// Keys need the hash of the data. Data that is the same for every replicate is
// loaded here; of data drawn for each, the store has noted the hash if any run
// on it was ever stored, and else the replicate has everything still to do.
func (x *runner) prepare(ctx context.Context) error {
	if err := x.loadShared(ctx); err != nil {
		return err
	}
	hashes, err := x.knownData()
	if err != nil {
		return err
	}
	var planned []store.Planned
	var all []results.Hash
	for i, seed := range x.seeds() {
		r := &replicate{number: i + 1, seed: seed}
		x.later = append(x.later, r)
		main, pre := x.requests(seed)
		if hashes[main].IsZero() || x.pre != nil && hashes[pre].IsZero() {
			continue
		}
		r.keys, r.keysKnown = x.keysOf(seed, hashes[main], hashes[pre]), true
		planned = append(planned, x.planned(seed, r.keys)...)
		all = append(all, r.keys.all()...)
	}
	if err := x.fix(planned, hashes); err != nil {
		return err
	}
	x.known, err = x.store.Lookup(all)
	return err
}

// ask asks for replicates up to a number and returns those with runs to be done.
func (x *runner) ask(upTo int) (queue []*replicate) {
	n := upTo - len(x.replicas)
	next := x.later[:n]
	x.replicas, x.later = append(x.replicas, next...), x.later[n:]
	x.summary.Runs = 0
	for _, r := range x.replicas {
		x.summary.Runs += x.asked(r.seed)
	}
	before := x.summary.Before
	for _, r := range next {
		if x.asked(r.seed) == 0 {
			continue
		}
		x.expect(r.seed)
		if r.keysKnown {
			x.findWork(r, x.known)
		}
		if !r.keysKnown || r.left > 0 {
			queue = append(queue, r)
		}
	}
	if n := x.summary.Before; n > before {
		x.tracker.note("%d of %d runs are stored already", n, x.summary.Runs)
	}
	return queue
}

// loadShared loads the data that all replicates share.
func (x *runner) loadShared(ctx context.Context) (err error) {
	tasks := []*plan.Task{&x.Task}
	if x.pre != nil {
		tasks = append(tasks, &x.Pretrain.Task)
	}
	for i, t := range tasks {
		if err := ctx.Err(); err != nil {
			return &stopError{"stopped before the first run", err}
		}
		if t.PerReplicate {
			continue
		}
		if x.shared[i], err = load(t, x.Replicates.FirstSeed); err != nil {
			return err
		}
	}
	return nil
}

// knownData are the hashes of the data behind each request, as far as they are
// known without drawing any.
func (x *runner) knownData() (map[results.Hash]results.Hash, error) {
	var requests []results.Hash
	for _, seed := range x.seeds() {
		main, pre := x.requests(seed)
		requests = append(requests, main, pre)
	}
	hashes, err := x.store.Data(requests)
	if err != nil {
		return nil, err
	}
	main, pre := x.requests(x.Replicates.FirstSeed)
	for i, request := range []results.Hash{main, pre} {
		if x.shared[i] != nil {
			hashes[request] = x.shared[i].Hash // what a file holds now
		}
	}
	return hashes, nil
}

// expect adds the runs of a replicate to the estimate.
func (x *runner) expect(seed uint64) {
	x.tracker.do(func() {
		for i := range x.groups {
			if x.wants(&x.groups[i], seed) {
				x.estimate.plan(&x.groups[i])
			}
		}
		if x.pre != nil && x.wants(x.pre, seed) {
			x.estimate.plan(x.pre)
		}
	})
}

// fix fixes the claim and the names that are known so far.
func (x *runner) fix(planned []store.Planned, data map[results.Hash]results.Hash) error {
	title := x.Title
	if title == "" {
		title = x.File
	}
	fixed, err := x.store.Fix(store.Study{ID: x.study, Title: title, PlanFile: x.File}, x.claim, planned)
	if err != nil {
		return err
	}
	x.summary.Claim = fixed
	if d := fixed.Claim.Differences(x.claim); d != "" {
		x.tracker.note("the claim is no longer the one fixed on %s (%s); the report will say so", fixed.Fixed.Local().Format(time.DateTime), d)
	}
	shared := map[results.Hash]results.Hash{}
	main, pre := x.requests(x.Replicates.FirstSeed)
	for i, request := range []results.Hash{main, pre} {
		if x.shared[i] != nil {
			shared[request] = data[request]
		}
	}
	return x.store.AddRuns(x.study, nil, shared)
}

// findWork makes units of those runs of a replicate that are not stored. Its
// keys are known; known says what the store has of them.
func (x *runner) findWork(r *replicate, known map[results.Hash]store.Entry) {
	add := func(g *group, key results.Hash) *unit {
		if !x.wants(g, r.seed) {
			return nil
		}
		if known[key].State == results.Stored {
			x.tracker.do(func() { x.estimate.stored(g) })
			x.books.Lock()
			x.summary.Before++
			x.books.Unlock()
			return nil
		}
		r.left++
		return &unit{replicate: r, group: g, key: key}
	}
	if x.pre != nil {
		r.pre = add(x.pre, r.keys.pre)
	}
	for i := range x.groups {
		if u := add(&x.groups[i], r.keys.groups[i]); u != nil {
			r.arms = append(r.arms, u)
		}
	}
}

// load loads the data of a task. A panic of a reader is an error too.
func load(t *plan.Task, seed uint64) (d *datasets.Data, err error) {
	defer func() {
		if cause := recover(); cause != nil {
			err = fmt.Errorf("load %s: %s", t.Data, panicText(cause))
		}
	}()
	d, err = t.Source.Load(seed)
	if err != nil {
		return nil, fmt.Errorf("load %s: %w", t.Data, err)
	}
	return d, nil
}
