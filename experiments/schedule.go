package experiments

import (
	"context"
	"slices"
	"sync"

	"ulpine/datasets"
	"ulpine/results"
	"ulpine/trainer"
)

// unit is one run that is to be done.
type unit struct {
	replicate *replicate
	group     *group
	key       results.Hash
}

// replicate is the runs of one replicate that are to be done, and what they
// share. Until it is loaded it belongs to the schedule, then everything but
// waiting and left is only read.
type replicate struct {
	number    int // 1 is the first
	seed      uint64
	keys      keys
	keysKnown bool // before its data was loaded

	pre  *unit   // to be done first, then nil
	arms []*unit // to be done, in order
	left int     // units not finished

	loaded     bool
	pretrained bool // arms may start
	data       *datasets.Data
	preData    *datasets.Data
	start      []trainer.Param // nil without pretraining
	broken     string          // why arms cannot start
}

// task is what a worker does next: load a replicate, or do a run.
type task struct {
	load *replicate
	unit *unit
}

// schedule hands out tasks. It opens no more replicates than there are workers,
// so that no more data than that is in memory, and prefers replicates that are
// open.
type schedule struct {
	mu      sync.Mutex
	changed chan struct{} // closed, and made anew, when something changed
	team    *trainer.Team // whom workers help that have nothing else to do
	queue   []*replicate  // not open yet
	open    []*replicate
	limit   int
	ctx     context.Context // once it is done, no more tasks are handed out
}

func newSchedule(ctx context.Context, queue []*replicate, limit int, team *trainer.Team) *schedule {
	return &schedule{queue: queue, limit: limit, ctx: ctx, team: team, changed: make(chan struct{})}
}

// next waits for a task, and helps with those of other workers meanwhile; false:
// there is none left.
func (s *schedule) next() (task, bool) {
	s.mu.Lock()
	defer s.mu.Unlock()
	for {
		if s.ctx.Err() != nil || len(s.queue) == 0 && len(s.open) == 0 {
			return task{}, false
		}
		for _, r := range s.open {
			if u := r.take(); u != nil {
				return task{unit: u}, true
			}
		}
		if len(s.open) < s.limit && len(s.queue) > 0 {
			r := s.queue[0]
			s.queue = s.queue[1:]
			s.open = append(s.open, r)
			return task{load: r}, true
		}
		changed := s.changed
		s.mu.Unlock()
		s.team.Help(changed)
		s.mu.Lock()
	}
}

// announce wakes the workers that wait. To be called with the lock held.
func (s *schedule) announce() {
	close(s.changed)
	s.changed = make(chan struct{})
}

// take returns the next unit that can start, or nil.
func (r *replicate) take() *unit {
	switch {
	case !r.loaded:
		return nil
	case r.pre != nil:
		u := r.pre
		r.pre = nil
		return u
	case !r.pretrained || len(r.arms) == 0:
		return nil
	}
	u := r.arms[0]
	r.arms = r.arms[1:]
	return u
}

// opened says that a replicate is loaded; its fields are set by then.
func (s *schedule) opened(r *replicate) {
	s.mu.Lock()
	defer s.mu.Unlock()
	r.loaded = true
	r.pretrained = r.pre == nil
	s.closeIfDone(r)
	s.announce()
}

// startArms says what a pretraining came to: weights, or why there are none.
func (s *schedule) startArms(r *replicate, start []trainer.Param, broken string) {
	s.mu.Lock()
	defer s.mu.Unlock()
	r.start, r.broken, r.pretrained, r.preData = start, broken, true, nil
	s.announce()
}

// finished says that a unit is done.
func (s *schedule) finished(u *unit) {
	s.mu.Lock()
	defer s.mu.Unlock()
	u.replicate.left--
	s.closeIfDone(u.replicate)
	s.announce()
}

// closeIfDone lets go of a replicate's data after its last run.
func (s *schedule) closeIfDone(r *replicate) {
	if r.left > 0 {
		return
	}
	r.data, r.preData, r.start = nil, nil, nil
	s.open = slices.DeleteFunc(s.open, func(o *replicate) bool { return o == r })
}

// wake lets waiting workers see that the context is done.
func (s *schedule) wake() {
	s.mu.Lock()
	defer s.mu.Unlock()
	s.announce()
}
