package compare

import (
	"math"

	"ulpine/results"
)

// looks is the schedule of a comparison; false: it has one look, at the end.
func looks(c *results.Comparison) (Looks, bool) {
	return Looks{UpTo: c.Planned, Every: c.LookEvery}, c.LookEvery > 0 && c.LookEvery < c.Planned
}

// lookedAt is the number of pairs at the latest look; 0: there was none yet.
func lookedAt(c *results.Comparison) int {
	l, several := looks(c)
	if !several || c.Same {
		return c.N
	}
	latest := 0
	for _, at := range l.At() {
		if at <= c.N {
			latest = at
		}
	}
	return latest
}

// Settled reports whether every comparison of a family that Decide has judged has
// a verdict that further pairs would not be asked for: a runner that looks while
// pairs come in stops when the families of arms and of contrasts are all settled,
// or at the last look.
func Settled(decided []results.Comparison) bool {
	for i := range decided {
		if decided[i].Verdict.Kind == results.Undecided {
			return false
		}
	}
	return true
}

// shares keeps the levels of schedules, which take long to compute.
type shares map[share][]float64

type share struct {
	Looks
	alpha float64
}

func (s shares) levels(l Looks, alpha float64) []float64 {
	key := share{l, alpha}
	if s[key] == nil {
		s[key] = l.Levels(alpha)
	}
	return s[key]
}

// overLooks are the p-values of a comparison over all its looks so far, in place of
// those of its last one: the least alpha at which one of the looks would have
// rejected (Liu and Anderson, J. Amer. Statist. Assoc. 103, 2008, 1621-1630). By
// its making it stays below alpha with probability alpha at most, so it is a
// p-value that Holm's method may adjust. Looks go by the order of the
// replicates, whatever the order in which their runs came in.
func (s shares) overLooks(c *results.Comparison) (p, worse float64) {
	l, several := looks(c)
	if !several || c.Same {
		return c.P, c.PWorse
	}
	var ps, worses []float64
	for _, n := range l.At() {
		if n > c.N {
			break
		}
		xs := c.Differences[:n]
		pn, wn := pValues(mean(xs), deviation(xs), n, c.Margin)
		if deviation(xs) == 0 && n < l.UpTo {
			pn, wn = 1, 1 // no spread yet: too early to tell
		}
		ps, worses = append(ps, pn), append(worses, wn)
	}
	return s.least(l, ps), s.least(l, worses)
}

// unlikely is beyond what any plan asks for: p-values above it need no digits.
const unlikely = 0.3

// least is the smallest alpha, to a part in 10^3 (in 20 above unlikely), at which some
// look rejects; 1 if none does at one half.
func (s shares) least(l Looks, ps []float64) float64 {
	rejects := func(alpha float64) bool {
		levels := s.levels(l, alpha)
		for k, p := range ps {
			if p <= levels[k] {
				return true
			}
		}
		return false
	}
	low, high := math.Log(1e-9), math.Log(0.5)
	if !rejects(math.Exp(high)) {
		return 1
	}
	for high-low > 1e-3 && (high-low > 0.05 || low < math.Log(unlikely)) {
		if middle := (low + high) / 2; rejects(math.Exp(middle)) {
			high = middle
		} else {
			low = middle
		}
	}
	return math.Exp(high)
}
