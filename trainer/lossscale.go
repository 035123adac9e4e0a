package trainer

import (
	"fmt"
	"math"
)

// Defaults of dynamic loss scaling: the start keeps binary16's largest finite
// value away, the rest is common practice.
const (
	defaultScale      = 1 << 15
	defaultRaiseAfter = 1000
	defaultRaiseBy    = 2
	defaultCutBy      = 0.5
)

// skipsToDiverge is the number of skipped steps in a row at which a run is given up.
const skipsToDiverge = 10

// resolved fills in the defaults and takes every number to binary32.
func (l LossScale) resolved() LossScale {
	if l.Kind == NoScale {
		return LossScale{Kind: NoScale, Value: 1}
	}
	orElse := func(x, fallback float64) float64 {
		if x == 0 {
			return fallback
		}
		return single(x)
	}
	l.Value = orElse(l.Value, defaultScale)
	l.RaiseBy, l.CutBy = orElse(l.RaiseBy, defaultRaiseBy), orElse(l.CutBy, defaultCutBy)
	if l.RaiseAfter == 0 {
		l.RaiseAfter = defaultRaiseAfter
	}
	return l
}

// check refuses scales that would make no step or lose the gradient's sign.
func (l LossScale) check() error {
	r := l.resolved()
	if l.Kind > DynamicScale {
		return fmt.Errorf("unknown kind of loss scale %d", l.Kind)
	}
	if !(r.Value > 0) || math.IsInf(r.Value, 0) {
		return fmt.Errorf("loss scale of %g; it must be positive and finite in binary32", l.Value)
	}
	if r.Kind != DynamicScale {
		return nil
	}
	switch {
	case r.RaiseAfter < 1:
		return fmt.Errorf("loss scale is raised after %d clean steps; it takes at least 1", l.RaiseAfter)
	case !(r.RaiseBy >= 1) || math.IsInf(r.RaiseBy, 0):
		return fmt.Errorf("loss scale is raised by a factor of %g; it must be finite and at least 1", l.RaiseBy)
	case !(r.CutBy > 0 && r.CutBy < 1):
		return fmt.Errorf("loss scale is cut by a factor of %g; it must lie between 0 and 1", l.CutBy)
	}
	return nil
}

// scaler carries the loss scale S through a training.
type scaler struct {
	set     LossScale
	s       float64
	clean   int // clean steps since S last moved
	row     int // skipped steps in a row
	skipped uint64
}

func newScaler(l LossScale) *scaler {
	set := l.resolved()
	return &scaler{set: set, s: set.Value}
}

// taken records a step that was taken. S stays within binary32's finite numbers.
func (c *scaler) taken() {
	c.row = 0
	if c.set.Kind != DynamicScale {
		return
	}
	if c.clean++; c.clean < c.set.RaiseAfter {
		return
	}
	c.clean = 0
	if raised := single(float64(c.s * c.set.RaiseBy)); !math.IsInf(raised, 0) {
		c.s = raised
	}
}

// skip records a step that was not taken and cuts S, which stays positive.
func (c *scaler) skip() {
	c.row++
	c.skipped++
	c.clean = 0
	if cut := single(float64(c.s * c.set.CutBy)); cut > 0 {
		c.s = cut
	}
}
