package experiments

import (
	"testing"
	"time"
)

// clock is a clock set by hand.
type clock struct{ now time.Time }

func (c *clock) sleep(d time.Duration) { c.now = c.now.Add(d) }

func TestEstimate(t *testing.T) {
	c := &clock{time.Unix(0, 0)}
	e := newEstimator(2)
	e.now = func() time.Time { return c.now }
	fast, slow := &group{macs: 1000}, &group{macs: 1000}
	for range 4 {
		e.plan(fast)
		e.plan(slow)
	}
	e.stored(fast) // one was stored before: 3 fast, 4 slow to go
	if o := e.overall(); o.Remaining >= 0 || o.Done != 1 || o.Total != 8 {
		t.Errorf("nothing measured yet: %+v", o)
	}
	if o := e.overall(); o.String() != "1 of 8 runs" {
		t.Errorf("%s", o)
	}
	e.start(0, &unit{group: fast})
	e.start(1, &unit{group: slow})
	c.sleep(time.Second)
	e.step(0, 50, 100) // 500 a second: 2 s a run
	e.step(1, 10, 100) // 100 a second: 10 s a run
	// under way 1 s and 9 s, waiting 2 fast (4 s) and 3 slow (30 s), two workers
	if o := e.overall(); o.Remaining != 22*time.Second {
		t.Errorf("remaining %v, want 22 s", o.Remaining)
	}
	c.sleep(time.Second)
	e.step(0, 100, 100)
	e.end(0)
	e.done++
	e.step(1, 20, 100)
	if o := e.overall(); o.Remaining != 21*time.Second || o.String() != "2 of 8 runs, about 20 s left" {
		t.Errorf("%v, %v", o.Remaining, o)
	}
	// nothing waits any more: the longest run decides, not its share
	e.waiting = nil
	if o := e.overall(); o.Remaining != 8*time.Second {
		t.Errorf("remaining %v, want 8 s", o.Remaining)
	}
}

// TestEstimateOfUnknownArms: an arm that was not seen yet has the common speed.
func TestEstimateOfUnknownArms(t *testing.T) {
	c := &clock{time.Unix(0, 0)}
	e := newEstimator(1)
	e.now = func() time.Time { return c.now }
	seen, unseen := &group{macs: 400}, &group{macs: 800}
	e.plan(seen)
	e.plan(unseen)
	e.start(0, &unit{group: seen})
	c.sleep(2 * time.Second)
	e.step(0, 2, 2)
	e.end(0)
	if o := e.overall(); o.Remaining != 4*time.Second {
		t.Errorf("remaining %v, want 4 s", o.Remaining)
	}
}

func TestAbout(t *testing.T) {
	for d, want := range map[time.Duration]string{
		0: "about 1 s", time.Second: "about 1 s", 7 * time.Second: "about 7 s", 21 * time.Second: "about 20 s",
		23 * time.Second: "about 25 s", 88 * time.Second: "about 90 s", 100 * time.Second: "about 2 min",
		40 * time.Minute: "about 40 min", 3 * time.Hour: "about 3 h",
	} {
		if got := About(d); got != want {
			t.Errorf("%v: %s, want %s", d, got, want)
		}
	}
}

// TestEstimateOfDivergedRuns: an arm that stopped after next to nothing does not
// make the rest look endless.
func TestEstimateOfDivergedRuns(t *testing.T) {
	c := &clock{time.Unix(0, 0)}
	e := newEstimator(1)
	e.now = func() time.Time { return c.now }
	sound, wild := &group{macs: 1000}, &group{macs: 1000}
	for range 3 {
		e.plan(sound)
		e.plan(wild)
	}
	e.start(0, &unit{group: sound})
	c.sleep(10 * time.Second)
	e.step(0, 100, 100)
	e.end(0)
	e.start(0, &unit{group: wild})
	c.sleep(time.Second)
	e.step(0, 1, 100) // 10 a second, were it to count
	e.end(0)
	if o := e.overall(); o.Remaining < 40*time.Second || o.Remaining > 50*time.Second {
		t.Errorf("remaining %v, want 4 runs of 11 s at most", o.Remaining)
	}
}

// Nothing is left after the last run, whatever the estimate still holds.
func TestNothingLeftAtTheEnd(t *testing.T) {
	for want, o := range map[string]Overall{
		"56 of 56 runs":                 {56, 56, 0},
		"55 of 56 runs, about 1 s left": {55, 56, 0},
		"0 of 56 runs":                  {0, 56, -1},
	} {
		if got := o.String(); got != want {
			t.Errorf("got %q, want %q", got, want)
		}
	}
}
