package kernel

import (
	"math"

	"ulpine/quant/random"
)

// loops are the functions of a set over slices. Their assembly takes lengths that
// are multiples of wholeLanes, not zero; the functions here take any.
type loops struct {
	measure    func(x []float32, e *[48]uint32)
	widen      func(dst []float64, src []float32)
	interleave func(dst, first, second []float32, factor float32)
	transpose  func(dst, src []float32, dstRow, srcRow, blocks int)
	addNative  func(total, chunk []float32)

	copyColumns   func(dst, data []float32, rows []int32, width int)
	gatherColumns func(dst, data []float32, rows, columns []int32, width int)

	addNearest func(total, chunk []float32, c *Constants)
	addOdd     func(total, chunk []float32, c *Constants)
	philox     func(t *philoxArgs)
	fetch      func(x []float32)

	// See slices.go.
	philoxStream      func(t *philoxArgs)
	roundNearest32    func(dst, src []float32, c *Constants, t *[2]uint64)
	roundStochastic32 func(dst, src []float32, words []uint32, c *Constants, t *[2]uint64)
	roundNearest64    func(dst []float32, src []float64, c *Constants, t *[2]uint64)
	roundStochastic64 func(dst []float32, src []float64, words []uint32, c *Constants, t *[2]uint64)
	scale64           func(y []float64, alpha float64, c *Constants, t *[2]uint64)
	add64             func(x, b []float64, factor float64, c *Constants, t *[2]uint64)

	// Scratch of a multiplier's copy.
	extents [48]uint32
	arg     philoxArgs
	block   []uint32
}

// wholeLanes is a whole number of registers of every set.
const wholeLanes = 16

// philoxArgs asks for random words: Dst[k*Width + j] = word k%4 of the block whose
// counter is (Lane + j, Step, Site, Phase | (First + k/4)<<8), for k below 4*Blocks
// and j below Width. Words beyond the last, up to philoxSlack, may be overwritten.
// The assembly reads fields by their offsets.
type philoxArgs struct {
	Dst        []uint32
	Blocks     int
	Width      int
	Lane       uint64
	First      uint64
	Step       uint64
	Site       uint64
	Phase      uint64
	Key0, Key1 uint64
}

const philoxSlack = 16

// extentOf returns the extent of all of x.
func (l *loops) extentOf(x []float32) extent {
	e := noExtent
	whole := len(x) &^ (wholeLanes - 1)
	if l.measure == nil || whole == 0 {
		whole = 0
	} else {
		v := &l.extents
		l.measure(x[:whole], v)
		for i := range 16 {
			e.merge(extent{v[i], v[16+i], v[32+i]})
		}
	}
	for _, v := range x[whole:] {
		e.add(math.Float32bits(v))
	}
	return e
}

// widened converts binary32 numbers to binary64.
func (l *loops) widened(dst []float64, src []float32) {
	whole := len(src) &^ (wholeLanes - 1)
	if l.widen == nil || whole == 0 {
		whole = 0
	} else {
		l.widen(dst, src[:whole])
	}
	dst = dst[whole:len(src)]
	for i, v := range src[whole:] {
		dst[i] = float64(v)
	}
}

// interleaved is dst[2k] = first[k] factor, dst[2k+1] = second[k] factor.
func (l *loops) interleaved(dst, first, second []float32, factor float32) {
	whole := len(first) &^ (wholeLanes - 1)
	if l.interleave == nil || whole == 0 {
		whole = 0
	} else {
		l.interleave(dst, first[:whole], second[:whole], factor)
	}
	dst, first, second = dst[2*whole:2*len(first)], first[whole:], second[whole:len(first)]
	for k, v := range first {
		dst[2*k], dst[2*k+1] = v*factor, second[k]*factor
	}
}

// added is total = binary32(total + chunk).
func (l *loops) added(total, chunk []float32, _ *Constants) {
	whole := len(total) &^ (wholeLanes - 1)
	if l.addNative == nil || whole == 0 {
		whole = 0
	} else {
		l.addNative(total[:whole], chunk[:whole])
	}
	total, chunk = total[whole:], chunk[whole:len(total)]
	for i, v := range chunk {
		total[i] += v
	}
}

// addedNearest is total = R(binary32(total + chunk)), R nearest-even to the grid of
// c's sums.
func (l *loops) addedNearest(total, chunk []float32, c *Constants) {
	whole := len(total) &^ (wholeLanes - 1)
	if l.addNearest == nil || whole == 0 {
		whole = 0
	} else {
		l.addNearest(total[:whole], chunk[:whole], c)
	}
	least, grow, scale, unscale := c.SumLeast.single(), c.SumGrow.single(), c.Scale.single(), c.Unscale.single()
	total, chunk = total[whole:], chunk[whole:len(total)]
	for i, v := range chunk {
		x := float32(total[i]*scale) + float32(v*scale)
		total[i] = float32(near32(x, least, grow) * unscale)
	}
}

// addedOdd is total = R(total + chunk), R of the exact sum, else as addedNearest.
func (l *loops) addedOdd(total, chunk []float32, c *Constants) {
	whole := len(total) &^ (wholeLanes - 1)
	if l.addOdd == nil || whole == 0 {
		whole = 0
	} else {
		l.addOdd(total[:whole], chunk[:whole], c)
	}
	least, grow, scale, unscale := c.SumLeast.single(), c.SumGrow.single(), c.Scale.single(), c.Unscale.single()
	total, chunk = total[whole:], chunk[whole:len(total)]
	for i, v := range chunk {
		x := plusOdd32(float32(total[i]*scale), float32(v*scale))
		total[i] = float32(near32(x, least, grow) * unscale)
	}
}

// fetched asks for cache lines that are used soon: drawing random words takes as long as
// memory does.
func (l *loops) fetched(x []float32) {
	if whole := len(x) &^ (wholeLanes - 1); l.fetch != nil && whole > 0 {
		l.fetch(x[:whole])
	}
}

// args addresses the words of d from block first on.
func args(d random.Draws, lane uint32, first int) philoxArgs {
	return philoxArgs{
		Lane: uint64(lane), First: uint64(first), Step: uint64(d.Step), Site: uint64(d.Site),
		Phase: uint64(d.Phase), Key0: d.Seed & (1<<32 - 1), Key1: d.Seed >> 32,
	}
}

// columnWords writes the words of additions k0 <= k < k0+terms of lanes lane,
// lane+1, ..., k0 a multiple of four: dst[(k-k0)*width + j]. dst has room for whole
// blocks of four terms and philoxSlack.
func (l *loops) columnWords(dst []uint32, d random.Draws, width, k0, terms int, lane uint32) {
	if l.philox == nil {
		fillColumns(dst, d, width, k0, terms, lane)
		return
	}
	l.arg = args(d, lane, k0/4)
	l.arg.Dst, l.arg.Width, l.arg.Blocks = dst, width, (terms+3)/4
	l.philox(&l.arg)
	l.arg.Dst = nil
}

// rowWords writes the words of additions 0 <= k < terms of lanes lane, lane+1, ... by
// pairs of rows, or-ed with odd: dst[(i/2*terms + k)*2 + i%2].
func (l *loops) rowWords(dst []uint32, d random.Draws, lane uint32, rows, terms int, odd uint32) {
	if l.philox == nil {
		fillRows(dst, d, lane, rows, 0, terms, odd)
		return
	}
	const lanes = 16
	for i0 := 0; i0 < rows; i0 += lanes {
		width := min(lanes, 2*pairsOf(rows-i0))
		for k := 0; k < terms; k += rowBlock {
			n := min(rowBlock, terms-k)
			l.block = grown(l.block, (n+3)/4*4*lanes+philoxSlack)
			l.columnWords(l.block, d, lanes, k, n, lane+uint32(i0))
			for i := 0; i < width; i += 2 {
				to := dst[((i0+i)*terms + 2*k):][:2*n]
				for t := range n {
					to[2*t], to[2*t+1] = l.block[t*lanes+i]|odd, l.block[t*lanes+i+1]|odd
				}
			}
		}
	}
}

// rowBlock is the terms of rows that are drawn at a time.
const rowBlock = 64
