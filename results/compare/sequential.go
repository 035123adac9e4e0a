package compare

import (
	"math"

	"gonum.org/v1/gonum/integrate/quad"
	"gonum.org/v1/gonum/stat/distuv"
)

// Looks is a schedule of looks at pairs that come in: after Every pairs, after
// twice as many, and so on, the last one at UpTo. Looking often and stopping at
// the first good look would find "within" sooner or later; here the error rate is
// shared out among the looks, so that all of them together keep to it.
type Looks struct{ UpTo, Every int }

// At are the numbers of pairs at which to look, ascending, the last one UpTo.
func (l Looks) At() (at []int) {
	if l.Every > 0 {
		for n := l.Every; n < l.UpTo; n += l.Every {
			if n >= 2 { // one pair has no interval
				at = append(at, n)
			}
		}
	}
	return append(at, l.UpTo)
}

// Next is the number of pairs at the first look after n pairs, UpTo at most.
func (l Looks) Next(n int) int {
	for _, at := range l.At() {
		if at > n {
			return at
		}
	}
	return l.UpTo
}

// spent is the part of alpha that is spent by the time that a share t of all
// pairs is there: the O'Brien-Fleming type of Lan and DeMets (Biometrika 70, 1983,
// 659-663), 2 - 2 Phi(z(1-alpha/2) / sqrt t). Early looks spend next to nothing,
// so that the last one is hardly stricter than a single one would be.
func spent(alpha, t float64) float64 {
	z := -distuv.UnitNormal.Quantile(alpha / 2)
	return math.Erfc(z / math.Sqrt(2*t))
}

// nodes is the number of Gauss-Legendre nodes of the densities below; twice as
// many move no level by more than a few parts in 10^5.
const nodes = 160

// Levels are the one-sided p-values below which each look rejects, such that all
// looks together do so by chance with probability alpha. Levels rise with alpha
// at every look, so a schedule can be combined with Holm's method.
func (l Looks) Levels(alpha float64) []float64 {
	if l.UpTo <= exactLooks {
		return l.tLevels(alpha)
	}
	return l.normalLevels(alpha)
}

// normalLevels are the levels for sums of normal differences with a known standard
// deviation, by the recursion of Armitage, McPherson and Rowe (J. R. Statist. Soc.
// A 132, 1969, 235-244).
func (l Looks) normalLevels(alpha float64) []float64 {
	at := l.At()
	levels := make([]float64, len(at))
	var walk density
	before, used := 0.0, 0.0
	for k, n := range at {
		t := float64(n) / float64(l.UpTo)
		spend := spent(alpha, t)
		bound := walk.bound(t-before, spend-used)
		levels[k] = distuv.UnitNormal.Survival(bound / math.Sqrt(t))
		walk = walk.step(t, t-before, bound)
		before, used = t, spend
	}
	return levels
}

// density is that of a Brownian motion at some time, on the paths that no look
// has stopped: values and weights at nodes. The zero value is the start, at zero.
type density struct{ at, mass []float64 }

// beyond is the probability that the motion, a time dt later, lies above bound.
func (d *density) beyond(dt, bound float64) (p float64) {
	if d.at == nil {
		return distuv.UnitNormal.Survival(bound / math.Sqrt(dt))
	}
	for i, u := range d.at {
		p += d.mass[i] * math.Erfc((bound-u)/math.Sqrt(2*dt)) / 2
	}
	return p
}

// bound is where beyond is p; +Inf if p is nothing that numbers can hold.
func (d *density) bound(dt, p float64) float64 {
	low, high := -10.0, 40.0 // in standard deviations of the whole
	if !(p > 0) || d.beyond(dt, high) > p {
		return math.Inf(1)
	}
	for range 60 {
		if middle := (low + high) / 2; d.beyond(dt, middle) > p {
			low = middle
		} else {
			high = middle
		}
	}
	return high
}

// step is the density at time t, a time dt later, below bound.
func (d *density) step(t, dt, bound float64) density {
	top := min(bound, 8*math.Sqrt(t)) // beyond eight standard deviations lies nothing
	next := density{make([]float64, nodes), make([]float64, nodes)}
	quad.Legendre{}.FixedLocations(next.at, next.mass, -8*math.Sqrt(t), top)
	scale := 1 / math.Sqrt(2*math.Pi*dt)
	for i, s := range next.at {
		var p float64
		if d.at == nil {
			p = math.Exp(-s * s / (2 * dt))
		}
		for j, u := range d.at {
			p += d.mass[j] * math.Exp(-(s-u)*(s-u)/(2*dt))
		}
		next.mass[i] *= scale * p
	}
	return next
}
