package experiments

import "time"

// least is how long an arm must have been measured before its own speed counts, and
// leastPart how much of a run: arms that diverge at once spend most of their time on
// getting ready, and would make the rest look endless.
const (
	least     = 200 * time.Millisecond
	leastPart = 0.05
)

// estimator tells how long the rest of a plan will take. Work is counted in
// multiply-adds; arms differ in how fast they emulate one, so each has a speed of
// its own as soon as it was seen running, and the common one until then. Its
// methods are called under the tracker's lock.
type estimator struct {
	now     func() time.Time
	done    int // runs
	total   int
	waiting map[*group]uint64 // multiply-adds of runs not started
	running []running         // one a worker
	spent   map[*group]spent  // by finished runs
}

// running is what one worker is at.
type running struct {
	group *group // nil: nothing
	since time.Time
	part  float64 // of its steps, done
}

// spent is work done and the time it took.
type spent struct {
	macs float64
	time time.Duration
}

func newEstimator(workers int) *estimator {
	return &estimator{
		now: time.Now, waiting: map[*group]uint64{},
		running: make([]running, workers), spent: map[*group]spent{},
	}
}

// plan adds a run that is still to be done.
func (e *estimator) plan(g *group) {
	e.total++
	e.waiting[g] += g.macs
}

// stored takes a planned run off that turned out to be stored already.
func (e *estimator) stored(g *group) {
	e.done++
	e.waiting[g] -= g.macs
}

func (e *estimator) start(worker int, u *unit) {
	e.waiting[u.group] -= u.group.macs
	e.running[worker] = running{group: u.group, since: e.now()}
}

func (e *estimator) step(worker, done, total int) {
	e.running[worker].part = float64(done) / float64(max(total, 1))
}

// end books what a worker's run took. A run that diverged did only a part of its
// work.
func (e *estimator) end(worker int) {
	r := &e.running[worker]
	if r.group != nil {
		e.spent[r.group] = e.measured(r.group, r)
	}
	*r = running{}
}

// measured is what is known of a group's speed, one run under way included.
func (e *estimator) measured(g *group, r *running) spent {
	s := e.spent[g]
	s.macs += r.part * float64(g.macs)
	s.time += e.now().Sub(r.since)
	return s
}

// overall is how far the plan is and how long the rest takes: the work left,
// each arm at its speed, shared by all workers, but no less than the longest run
// under way.
func (e *estimator) overall() Overall {
	speeds, common := e.speeds()
	if common == 0 {
		return Overall{e.done, e.total, -1}
	}
	seconds := func(g *group, macs float64) float64 {
		if speed := speeds[g]; speed > 0 {
			return macs / speed
		}
		return macs / common
	}
	var sum, longest float64
	for g, macs := range e.waiting {
		sum += seconds(g, float64(macs))
	}
	for i := range e.running {
		if r := &e.running[i]; r.group != nil {
			rest := seconds(r.group, (1-r.part)*float64(r.group.macs))
			sum += rest
			longest = max(longest, rest)
		}
	}
	left := max(sum/float64(len(e.running)), longest)
	return Overall{e.done, e.total, time.Duration(left * float64(time.Second))}
}

// speeds are multiply-adds a second of one worker: of each arm that was measured
// for long enough, and of all work together; 0: nothing was measured yet.
func (e *estimator) speeds() (each map[*group]float64, common float64) {
	known := map[*group]spent{}
	for g, s := range e.spent {
		known[g] = s
	}
	for i := range e.running {
		if r := &e.running[i]; r.group != nil && r.part > 0 {
			s := known[r.group]
			s.macs += r.part * float64(r.group.macs)
			s.time += e.now().Sub(r.since)
			known[r.group] = s
		}
	}
	each = map[*group]float64{}
	var all spent
	for g, s := range known {
		all.macs, all.time = all.macs+s.macs, all.time+s.time
		if s.time >= least && s.macs >= leastPart*float64(g.macs) {
			each[g] = s.macs / s.time.Seconds()
		}
	}
	if all.time < least/2 || all.macs == 0 {
		return each, 0
	}
	return each, all.macs / all.time.Seconds()
}
