package compare

import (
	"math"

	"gonum.org/v1/gonum/integrate/quad"
)

// exactLooks is up to how many pairs the levels of looks are those of the t
// statistic itself; beyond, the looks that spend anything have so many pairs that
// the normal law gives the same.
const exactLooks = 200

// tLevels are the levels of looks for the t statistic of normal differences. Its
// values at different looks hang together less than sums of normal values do,
// because every look has its own standard deviation: at the levels of the normal
// law, eight looks at 5 to 40 pairs would err in 2.7 % instead of 2.5 %.
//
// With the true mean on the margin, let x be the distances from it and
// c(n) = (x1 + ... + xn) / sqrt(n (x1^2 + ... + xn^2)), the cosine of the angle
// between x and equal values; t = c sqrt(n-1) / sqrt(1 - c^2) rises with c. The
// direction of x is uniform on the sphere, so the next value adds an angle theta
// with density proportional to cos(theta)^(n-1), independent of all before:
//
//	c(n+1) = (sqrt(n) c(n) cos(theta) + sin(theta)) / sqrt(n+1)
//
// So c is a Markov chain, and the chance that it lies above any bound at n+1 is
// one integral over theta of that chance at n.
func (l Looks) tLevels(alpha float64) []float64 {
	at := l.At()
	levels := make([]float64, len(at))
	used, k := 0.0, 0
	alive := firstTail(at[0])
	for n := at[0]; ; n++ {
		if n > at[0] {
			alive = alive.next()
		}
		if n != at[k] {
			continue
		}
		spend := spent(alpha, float64(n)/float64(l.UpTo))
		bound := alive.bound(spend - used)
		if levels[k] = tSurvival(bound, n); k == 0 || spend-used < finest {
			// nothing was stopped before, or too little for the tables to tell from
			// nothing: then this is exact, or a trifle too strict
			levels[k] = spend - used
			bound = tBound(levels[k], n)
		}
		if k++; k == len(at) {
			return levels
		}
		alive.cut(bound)
		used = spend
	}
}

// tSurvival is the chance that c(n) lies above c.
func tSurvival(c float64, n int) float64 {
	switch {
	case c >= 1:
		return 0
	case c <= -1:
		return 1
	}
	return student(n).CDF(-c * math.Sqrt(float64(n-1)) / math.Sqrt(1-c*c))
}

// tBound is where tSurvival is p.
func tBound(p float64, n int) float64 {
	if !(p > 0) {
		return 1
	}
	t := -student(n).Quantile(p)
	return t / math.Sqrt(float64(n-1)+t*t)
}

// tailTable is the chance that c(n) lies above a bound and no look has stopped before,
// as a function of psi = asin(bound), in which it is smooth: values on a grid of
// equal steps over plus or minus reach. A look stops what lies above top; there the
// function is lowered by over, and zero above.
type tailTable struct {
	n         int
	reach     float64
	values    []float64
	top, over float64
}

// tableSize and angles are grid points and nodes; three times as many of both move
// no level of a last look by more than a part in 10^3, and most by less than one in
// 10^4. What a look spends below finest is lost in their errors.
const (
	tableSize = 240
	angles    = 64
	finest    = 1e-5
)

func newTail(n int) tailTable {
	return tailTable{n: n, reach: min(math.Pi/2, 9/math.Sqrt(float64(n))), values: make([]float64, tableSize), top: 1}
}

// bounds is the bound that belongs to a grid point.
func (t *tailTable) bounds(i int) float64 {
	return math.Sin(t.reach * (2*float64(i)/(tableSize-1) - 1))
}

// firstTail is the table at the first look.
func firstTail(n int) tailTable {
	t := newTail(n)
	for i := range t.values {
		t.values[i] = tSurvival(t.bounds(i), n)
	}
	return t
}

// above is the chance that c lies above a bound, among the paths that go on.
func (t *tailTable) above(bound float64) float64 {
	if bound >= t.top {
		return 0
	}
	return max(0, t.smooth(bound)-t.over)
}

// smooth reads the table between grid points, by the cubic through four of them.
func (t *tailTable) smooth(bound float64) float64 {
	at := (math.Asin(max(-1, min(1, bound)))/t.reach + 1) / 2 * (tableSize - 1)
	if at <= 0 {
		return t.values[0]
	}
	if at >= tableSize-1 {
		return t.values[tableSize-1]
	}
	i := min(max(int(at)-1, 0), tableSize-4)
	x, v := at-float64(i), t.values[i:i+4]
	return -v[0]*(x-1)*(x-2)*(x-3)/6 + v[1]*x*(x-2)*(x-3)/2 - v[2]*x*(x-1)*(x-3)/2 + v[3]*x*(x-1)*(x-2)/6
}

// cut stops the paths above a bound.
func (t *tailTable) cut(bound float64) { t.top, t.over = bound, t.smooth(bound) }

// bound is where above is p.
func (t *tailTable) bound(p float64) float64 {
	low, high := -1.0, 1.0
	for range 60 {
		if middle := (low + high) / 2; t.above(middle) > p {
			low = middle
		} else {
			high = middle
		}
	}
	return high
}

// next is the table one value later.
func (t *tailTable) next() tailTable {
	theta, weight := t.angles()
	next := newTail(t.n + 1)
	n := float64(t.n)
	sin, cos := make([]float64, angles), make([]float64, angles)
	for j, a := range theta {
		sin[j], cos[j] = math.Sincos(a)
		cos[j] *= math.Sqrt(n)
	}
	for i := range next.values {
		bound := next.bounds(i) * math.Sqrt(n+1)
		for j, w := range weight {
			next.values[i] += w * t.above((bound-sin[j])/cos[j])
		}
	}
	return next
}

// angles are nodes of theta with weights that add up to one.
func (t *tailTable) angles() (theta, weight []float64) {
	theta, weight = make([]float64, angles), make([]float64, angles)
	reach := min(math.Pi/2, 9/math.Sqrt(float64(t.n)))
	quad.Legendre{}.FixedLocations(theta, weight, -reach, reach)
	var sum float64
	for j := range weight {
		weight[j] *= math.Pow(math.Cos(theta[j]), float64(t.n-1))
		sum += weight[j]
	}
	for j := range weight {
		weight[j] /= sum
	}
	return theta, weight
}
