package cost

// tile is a product of an i x k operand and a k x j operand that runs in blocks
// through a cache, and the flows whose sweeps the blocks decide.
type tile struct {
	i, j, k     uint64
	cache       uint64 // bits; 0: each tensor moves once
	left, right *flow
	partial     *flow // unfinished sums on their way out and in again
}

// sweeps says how often a loop reads its left and right operand, and how often
// unfinished sums leave the cache and return.
type sweeps struct{ left, right, spills uint64 }

// sweep sets the flows to the cheapest of the three loops.
func (t tile) sweep() {
	if t.cache == 0 {
		return
	}
	best := t.holdResult()
	for _, s := range []sweeps{t.holdLeft(), t.holdRight()} {
		if t.bits(s) < t.bits(best) {
			best = s
		}
	}
	t.left.sweeps, t.right.sweeps, t.partial.sweeps = best.left, best.right, 2*best.spills
}

// bits is what the sweeps of a loop move; the finished result is the same for
// all and left out.
func (t tile) bits(s sweeps) uint64 {
	return s.left*t.left.size() +
		s.right*t.right.size() +
		2*s.spills*t.partial.size()
}

// holdResult keeps a block of rows x columns sums; a column of the left and a
// row of the right operand pass at a time.
func (t tile) holdResult() sweeps {
	best := sweeps{left: t.j, right: t.i}
	t.blocks(t.i, t.j, t.partial.format, t.left.format, t.right.format, func(down, across uint64) {
		if s := (sweeps{left: across, right: down}); t.bits(s) < t.bits(best) {
			best = s
		}
	})
	return best
}

// holdLeft keeps a block of the left operand, rows x terms; for each column of
// the right operand its terms pass, and the column's sums out and, but for the
// first block, in.
func (t tile) holdLeft() sweeps {
	best := sweeps{left: 1, right: t.i, spills: t.k - 1}
	t.blocks(t.i, t.k, t.left.format, t.partial.format, t.right.format, func(down, along uint64) {
		if s := (sweeps{left: 1, right: down, spills: along - 1}); t.bits(s) < t.bits(best) {
			best = s
		}
	})
	return best
}

// holdRight is holdLeft with the operands' parts exchanged.
func (t tile) holdRight() sweeps {
	best := sweeps{left: t.j, right: 1, spills: t.k - 1}
	t.blocks(t.j, t.k, t.right.format, t.partial.format, t.left.format, func(across, along uint64) {
		if s := (sweeps{left: across, right: 1, spills: along - 1}); t.bits(s) < t.bits(best) {
			best = s
		}
	})
	return best
}

// blocks tries every way to divide m x n values into equal blocks such that a
// block in format held, and beside it a line of its m in format mLine and one of
// its n in nLine, fit the cache; try gets the numbers of blocks along m and n.
// Heights that need the same number of blocks are tried once, the least first.
func (t tile) blocks(m, n uint64, held, mLine, nLine Format, try func(down, across uint64)) {
	h, a, b := held.BitsPerValue(), mLine.BitsPerValue(), nLine.BitsPerValue()
	for rows := uint64(1); rows <= m; {
		room := float64(t.cache) - float64(float64(rows)*a)
		columns := uint64(0)
		if room > 0 {
			columns = uint64(room / (float64(float64(rows)*h) + b))
		}
		if columns == 0 {
			return // taller blocks do not fit either
		}
		down := ceilDiv(m, rows)
		try(down, ceilDiv(n, min(columns, n)))
		if down == 1 {
			return
		}
		// The next height that saves a block.
		rows = ceilDiv(m, down-1)
	}
}
