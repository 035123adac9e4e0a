package kernel

import (
	"math"
	"sync"

	"ulpine/quant/random"
)

// Rounder rounds slices element by element to one grid. It owns scratch memory and
// serves one goroutine at a time.
//
// Its methods work by blocks and stop before a block that they cannot round: one
// with a number that is not finite or beyond the grid (Round, Scale, Add), or below
// 2^-126 (stochastic rounding of binary32 numbers), or whose product or sum binary64
// does not hold. They return the number of elements that are done and how many of
// these became zero without having been it.
type Rounder struct {
	single Constants // of binary32 lanes; first, see plan
	double Constants // of binary64 lanes
	odd    Constants // bounds of products and sums rounded to odd
	sum    Sum
	fits32 bool // binary32 lanes serve
	same32 bool // the grid holds every binary32 number
	loops  loops

	words [RoundBlock + 4*wholeLanes*2]uint32
	x, y  [RoundBlock]float64
	keep  [RoundBlock]float32
	tally [2]uint64
}

// RoundBlock is the number of elements that a Rounder takes at a time.
const RoundBlock = 512

// NewRounder returns a rounder of the set in use, nil where there is none: the kind
// must be NearestSum or StochasticSum with 1 to 32 random bits.
func NewRounder(s Sum) *Rounder { return NewRounderWith(Sets[0], s) }

// NewRounderWith is NewRounder with a given set.
func NewRounderWith(set *Set, s Sum) *Rounder {
	g := s.Grid
	spare := double.fraction - g.Fraction
	if g.Fraction < 1 || g.Fraction > 23 || g.quantum() < -149 || g.top() > 127 || g.MinExponent > g.top() {
		return nil
	}
	r := &Rounder{sum: s, loops: set.loops, single: single.masks(), double: double.masks(), odd: double.masks()}
	r.odd.Limit, r.odd.SumLeast = double.bits(0x1p1000), double.bits(0x1p-900)
	r.double.nearest(double, g, 0)
	r.double.Limit = double.bits(g.Max)
	r.fits32 = g.Fraction <= 21
	r.same32 = g.Fraction == 23 && g.MinExponent <= -126 && g.Max >= math.MaxFloat32
	if r.fits32 {
		r.single.nearest(single, g, 0)
		// The constant 1.5 2^s e of the last binades overflows.
		r.single.Limit = single.bits(min(g.Max, math.Ldexp(1, min(127, 127-(single.fraction-g.Fraction)))))
	}
	switch s.Kind {
	case NearestSum:
		return r
	case StochasticSum:
		// A result rounded to odd needs a bit below the last that decides.
		if s.Bits < 1 || s.Bits > 32 || s.Bits+2 > spare {
			return nil
		}
		r.stochastic(spare)
		return r
	}
	return nil
}

// stochastic sets the constants of random bits.
func (r *Rounder) stochastic(spare int) {
	s := r.sum
	mask := uint32(math.MaxUint32) << (32 - s.Bits)
	c := &r.double
	c.Keep = bits64(^uint64(0) << spare)
	c.RandomMask = bits64(uint64(mask))
	c.PreShift, c.RandomShift = bits64(32), bits64(uint64(64-spare))
	c.RandomHalf = bits64(0)
	if s.Centred {
		c.RandomHalf = bits64(1 << (spare - s.Bits - 1))
	}
	c = &r.single
	c.RandomMask, c.RandomHalf = bits32(mask), bits32(0)
	if s.Centred {
		r.fits32 = r.fits32 && s.Bits < 32
		c.RandomHalf = bits32(1 << (31 - min(s.Bits, 31)))
	}
	c.Limit = single.bits(s.Grid.Max)
	c.Fraction, c.Implicit = bits32(fractionMask32), bits32(1<<23)
	c.BaseShift = bits32(uint32(single.fraction - s.Grid.Fraction))
	c.Quantum = single.power(1, -s.Grid.Fraction)
}

// draw returns the words of elements first, first+1, ...; false where their counters
// pass 2^32 blocks on the way.
func (r *Rounder) draw(d random.Draws, first uint64, n int) ([]uint32, bool) {
	if r.sum.Kind != StochasticSum {
		return nil, true
	}
	skip, q := int(first%4), first/4
	blocks := (skip + n + 3) / 4
	if q>>32 != (q+uint64(blocks)+wholeLanes)>>32 {
		return nil, false
	}
	r.loops.streamWords(r.words[:], d, q, blocks)
	return r.words[skip:][:n], true
}

// Round is dst[i] = R(src[i]), element i being number first+i of the stream. dst may
// be src.
func (r *Rounder) Round(dst, src []float32, d random.Draws, first uint64) (done, lost int) {
	if r.same32 {
		return r.copyFinite(dst, src), 0
	}
	if !r.fits32 {
		return r.through64(dst, len(src), d, first, func(at, n int) bool {
			r.loops.widened(r.x[:n], src[at:][:n])
			return true
		})
	}
	same := len(src) > 0 && len(dst) > 0 && &dst[0] == &src[0]
	for at := 0; at < len(src); at += RoundBlock {
		from := src[at:min(at+RoundBlock, len(src))]
		to := dst[at:][:len(from)]
		if r.sum.Kind == StochasticSum {
			r.loops.fetched(from)
			r.loops.fetched(to)
		}
		words, ok := r.draw(d, first+uint64(at), len(from))
		if !ok {
			return at, lost
		}
		if same {
			copy(r.keep[:], from)
		}
		r.tally = [2]uint64{}
		if words == nil {
			r.loops.nearest32(to, from, &r.single, &r.tally)
		} else {
			r.loops.stochastic32(to, from, words, &r.single, &r.tally)
		}
		if r.tally[1] != 0 {
			if same {
				copy(to, r.keep[:])
			}
			return at, lost
		}
		lost += int(r.tally[0])
	}
	return len(src), lost
}

// copyFinite is Round to a grid that holds the numbers already.
func (r *Rounder) copyFinite(dst, src []float32) (done int) {
	for at := 0; at < len(src); at += RoundBlock {
		from := src[at:min(at+RoundBlock, len(src))]
		if r.loops.extentOf(from).greatest >= exponentMask32 {
			return at
		}
		copy(dst[at:], from)
	}
	return len(src)
}

// RoundWide is Round for binary64 numbers.
func (r *Rounder) RoundWide(dst []float32, src []float64, d random.Draws, first uint64) (done, lost int) {
	return r.through64(dst, len(src), d, first, func(at, n int) bool {
		copy(r.x[:n], src[at:])
		return true
	})
}

// Scale is dst[i] = R(alpha src[i]), the product exact. dst may be src.
func Scale[S lanes](r *Rounder, dst []float32, alpha float64, src []S, d random.Draws, first uint64) (done, lost int) {
	return r.through64(dst, len(src), d, first, func(at, n int) bool {
		fillWide(&r.loops, r.x[:n], src[at:][:n])
		r.tally = [2]uint64{}
		r.loops.scaled64(r.x[:n], alpha, &r.odd, &r.tally)
		return r.tally[1] == 0 && alpha != 0
	})
}

// Add is dst[i] = R(a[i] + factor b[i]), factor 1 or -1, the sum exact. dst may be a
// or b.
func Add[A, B lanes](r *Rounder, dst []float32, a []A, factor float64, b []B, d random.Draws, first uint64) (done, lost int) {
	return r.through64(dst, len(a), d, first, func(at, n int) bool {
		fillWide(&r.loops, r.x[:n], a[at:][:n])
		fillWide(&r.loops, r.y[:n], b[at:][:n])
		r.tally = [2]uint64{}
		r.loops.added64(r.x[:n], r.y[:n], factor, &r.double, &r.tally)
		return r.tally[1] == 0
	})
}

// fillWide writes src to x.
func fillWide[S lanes](l *loops, x []float64, src []S) {
	switch s := any(src).(type) {
	case []float32:
		l.widened(x, s)
	case []float64:
		copy(x, s)
	}
}

// through64 rounds what fill writes to r.x, block by block.
func (r *Rounder) through64(dst []float32, length int, d random.Draws, first uint64, fill func(at, n int) bool) (done, lost int) {
	for at := 0; at < length; at += RoundBlock {
		n := min(RoundBlock, length-at)
		words, ok := r.draw(d, first+uint64(at), n)
		if !ok || !fill(at, n) {
			return at, lost
		}
		r.tally = [2]uint64{}
		if words == nil {
			r.loops.nearest64(r.keep[:n], r.x[:n], &r.double, &r.tally)
		} else {
			r.loops.stochastic64(r.keep[:n], r.x[:n], words, &r.double, &r.tally)
		}
		if r.tally[1] != 0 {
			return at, lost
		}
		lost += int(r.tally[0])
		copy(dst[at:], r.keep[:n])
	}
	return length, lost
}

// pool keeps rounders between uses: points are values, and slices are rounded often.
var pool = struct {
	sync.Mutex
	free map[Sum][]*Rounder
}{free: map[Sum][]*Rounder{}}

// Borrow returns a rounder of the set in use, nil where there is none; Return takes it
// back.
func Borrow(s Sum) *Rounder {
	pool.Lock()
	list, known := pool.free[s]
	if n := len(list); n > 0 {
		r := list[n-1]
		pool.free[s] = list[:n-1]
		pool.Unlock()
		return r
	}
	pool.Unlock()
	if known && list == nil {
		return nil
	}
	r := NewRounder(s)
	if r == nil {
		pool.Lock()
		pool.free[s] = nil
		pool.Unlock()
	}
	return r
}

// Return takes back a borrowed rounder.
func Return(r *Rounder) {
	pool.Lock()
	pool.free[r.sum] = append(pool.free[r.sum], r)
	pool.Unlock()
}
