package kernel

import "math"

// The portable kernels. Each is a loop over the columns of one row for one term;
// sweep runs it over the terms and rows of a tile. They use the sequences of the
// assembly, operation by operation, with explicit conversions so that no compiler
// fuses what is written apart.

// term is one row of one term: s[j] = mode(s[j], a, b[j], word, words[j]).
type term[L lanes] func(c *numbers[L], s, b []L, words []uint32, a L, word uint32)

// numbers are the constants as scalars.
type numbers[L lanes] struct {
	least, grow, rescale, quantum L
	sumLeast, sumGrow, sumSplit   L
	keep, randomMask, randomHalf  uint64
	randomShift                   uint8
	preShift, baseShift, whole    uint8
	sum, term                     carrying // binary64 lanes
	sums32, terms32               caring   // careful modes
	odd                           bool     // their sums are rounded to odd

	sums      [maxRows * maxWidth]L
	noWords   [maxWidth]uint32
	termWords []uint32 // of the term, where products are rounded stochastically
	termWord  uint32
}

// carrying is a stochastic rounding of binary64 numbers: where the random bits go,
// the half of centred thresholds, the bits kept, the least binade, and the magnitudes
// watched.
type carrying struct {
	mask, half, keep uint64
	shift            uint8
	least, limit     float64
	greatest         [maxWidth]float64
}

// maxWidth and maxRows bound a tile of any set.
const (
	maxWidth = 32
	maxRows  = 8
)

// PortableWidth and PortableNarrow are the panels of the portable set.
const (
	portableWidth  = 24
	portableNarrow = 8
	portableRows   = 4
)

// Portable is the set of kernels in Go.
var Portable = &Set{
	Name:    "portable",
	unfused: true,
	single: family[float32]{width: portableWidth, narrow: portableNarrow, tiles: portableTiles(map[mode]quad[float32]{
		baseline: quadBaseline[float32], rounded: quadRounded,
	}, []term[float32]{
		baseline: termBaseline[float32], fmaChain: termFmaChain, tree8: nil, rounded: termRounded, both: termBoth,
		bothScaled: termBothScaled, bothCare: termBothCare, through: termThrough, throughFree: termThroughFree,
		productThrough: termProductThrough, odd: termOdd, oddRounded: termOddRounded, stochastic: termStochastic,
		stochasticFused: termStochasticFused, stochasticCare: termStochasticCare,
		stochasticProductCare: termStochasticProductCare,
		stochasticTruncated:   termStochasticTruncated,
		carefulFused:          termCarefulFused, carefulProduct: termCarefulProduct, carefulRounded: termCarefulRounded,
	})},
	double: family[float64]{width: portableWidth, narrow: portableNarrow, tiles: portableTiles(map[mode]quad[float64]{
		baseline64: quadBaseline[float64],
	}, []term[float64]{
		baseline64: termBaseline[float64], fmaChain64: termFmaChain64, fused: termFused, fusedFree: termFusedFree,
		stochasticWide: termStochasticWide, stochasticProduct: termStochasticProduct, stochasticBoth: termStochasticBoth,
	})},
}

func portableTiles[L lanes](quads map[mode]quad[L], terms []term[L]) [][2][]shape[L] {
	tiles := make([][2][]shape[L], len(terms))
	for m, f := range terms {
		four := quads[mode(m)]
		run := func(t *Tile[L]) { sweep(t, f, four) }
		if f == nil { // the one mode that is no loop over terms
			run = sweepTree[L]
		}
		shapes := []shape[L]{{portableRows, run}, {2, run}}
		tiles[m] = [2][]shape[L]{shapes, shapes}
	}
	return tiles
}

// sweep is the loop that every kernel stands for, see Tile. four is f for four terms,
// or nil.
func sweep[L lanes](t *Tile[L], f term[L], four quad[L]) {
	c := t.numbers
	c.read(t.C)
	scale, unscale := laneValue[L](&t.C.Scale), laneValue[L](&t.C.Unscale)
	w := t.Width
	sums := c.sums[:t.Rows*w]
	for g := range t.Groups {
		clear(c.sum.greatest[:])
		clear(c.term.greatest[:])
		for r := range t.Rows {
			in := t.In[(g*t.Rows+r)*t.InRow:][:w]
			for j, v := range in {
				sums[r*w+j] = L(v * scale)
			}
		}
		first := 0
		if four != nil {
			first = t.K &^ 3
			quads(t, c, sums, g, first, four)
		}
		for k := first; k < t.K; k++ {
			b, words := t.B[k*w:][:w], c.noWords[:w]
			if t.V != nil {
				words = t.V[k*w:][:w]
			}
			if t.TermV != nil {
				c.termWords = t.TermV[k*w:][:w]
			}
			for r := range t.Rows {
				at := (g*t.Rows+r)/2*t.AStride + 2*k + r%2
				var word uint32
				if t.R != nil {
					word = t.R[at]
				}
				if t.TermR != nil {
					c.termWord = t.TermR[at]
				}
				f(c, sums[r*w:][:w], b, words, t.A[at], word)
			}
		}
		t.Flags[g] = storeGroup(t, c, sums, g, unscale)
	}
	for n, e := range []Events{c.terms32.events, c.sums32.events} {
		if to := t.Events; to != nil {
			to[3*n] += e.Beyond
			to[3*n+1] += e.Infinite
			to[3*n+2] += e.NaN
		}
	}
}

// quads adds the terms up to terms of a group.
func quads[L lanes](t *Tile[L], c *numbers[L], sums []L, g, terms int, four quad[L]) {
	w := t.Width
	for k := 0; k < terms; k += 4 {
		b := t.B[k*w:][:4*w]
		for r := range t.Rows {
			a := t.A[(g*t.Rows+r)/2*t.AStride+2*k+r%2:]
			four(c, sums[r*w:][:w], b, [4]L{a[0], a[2], a[4], a[6]})
		}
	}
}

// storeGroup writes a group's sums and reports whether one of them is not finite or
// stood in a column whose greatest magnitude reached the limit.
func storeGroup[L lanes](t *Tile[L], c *numbers[L], sums []L, g int, unscale L) uint8 {
	flag, w := uint8(0), t.Width
	for i, s := range sums {
		r, j := g*t.Rows+i/w, i%w
		if c.sum.greatest[j] >= c.sum.limit || c.term.greatest[j] >= c.term.limit {
			s = L(math.NaN())
		}
		if s-s != 0 {
			flag = 1
		}
		s = L(s*unscale) + 0
		if t.Final != nil {
			t.Final[r*t.FinalRow+j] = float32(s)
		} else {
			t.Out[r*t.OutRow+j] = s
		}
	}
	return flag
}

// laneValue is a constant as a number of the lane.
func laneValue[L lanes](v *vector) L {
	var l L
	if _, ok := any(l).(float32); ok {
		return L(v.single())
	}
	return L(v.double())
}

// laneBits is a constant as an integer of the lane's width.
func laneBits[L lanes](v *vector) uint64 {
	var l L
	if _, ok := any(l).(float32); ok {
		return uint64(v[0])
	}
	return v.bits64()
}

// read takes the values of the constants.
func (n *numbers[L]) read(c *Constants) {
	*n = numbers[L]{
		least: laneValue[L](&c.Least), grow: laneValue[L](&c.Grow), rescale: laneValue[L](&c.Rescale),
		sumLeast: laneValue[L](&c.SumLeast), sumGrow: laneValue[L](&c.SumGrow), sumSplit: laneValue[L](&c.SumSplit),
		keep: laneBits[L](&c.Keep), randomMask: laneBits[L](&c.RandomMask), randomHalf: laneBits[L](&c.RandomHalf),
		randomShift: uint8(c.RandomShift[0]), preShift: uint8(c.PreShift[0]), baseShift: uint8(c.BaseShift[0]),
		whole: uint8(c.WholeShift[0]), quantum: laneValue[L](&c.Quantum),
		sum: carrying{
			mask: c.RandomMask.bits64(), half: c.RandomHalf.bits64(), keep: c.Keep.bits64(),
			shift: uint8(c.RandomShift[0]), least: c.SumLeast.double(), limit: c.Limit.double(),
		},
		terms32: caring{max: c.Max.single(), over: c.Over.single(), infinite: c.Infinite.single()},
		sums32:  caring{max: c.SumMax.single(), over: c.SumOver.single(), infinite: c.SumInfinite.single()},
		odd:     c.OddMask[0] != 0,
		term: carrying{
			mask: c.TermMask.bits64(), half: c.TermHalf.bits64(), keep: c.TermKeep.bits64(),
			shift: uint8(c.TermShift[0]), least: c.Least.double(), limit: c.TermLimit.double(),
		},
	}
	if _, ok := any(n.grow).(float32); ok {
		n.sum.limit = float64(c.Limit.single())
	}
}
