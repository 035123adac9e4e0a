package kernel

import "math"

// plan is one way to form a block of terms: a mode and its numbers.
type plan struct {
	c      Constants // first: what Go allocates is then aligned to its vectors
	double bool
	mode   mode
	scale  int // A is multiplied by 2^scale when it is packed
}

// plans are the ways that the rounding of sums and products of one arithmetic
// leaves open, nil where one is not needed or not possible.
type plans struct {
	arithmetic *Arithmetic
	sum        Sum
	native     *plan
	rounded    *plan
	free, care *plan // fused in binary32 and rounded, without and with subnormals
	product    *plan // the same, the product rounded to binary32
	odd        *plan
	fused      *plan
	fusedFree  *plan
	random     *plan // stochastic modes: fused and free of subnormals
	randomCare *plan
	wide       *plan
	truncated  *plan
	unfused    bool  // where products are exact, a multiply-add is better left apart
	apart      *plan // the native plan in that case
}

// block is what is known of a block of terms before it is formed.
type block struct {
	a, b  Span
	grain int  // all earlier terms are multiples of 2^grain
	wide  bool // binary64 lanes are wanted at the end
}

// bits is the significant bits of a product.
func (b *block) bits() int { return b.a.Bits + b.b.Bits }

// low: every product is a multiple of 2^low.
func (b *block) low() int { return b.a.Low + b.b.Low }

// top: every product is below 2^(top+1).
func (b *block) top() int { return b.a.Top + b.b.Top + 1 }

// sumLow: every exact sum is a multiple of 2^sumLow, before and after rounding to a
// grid. Rounding keeps that: where the quantum is finer than 2^sumLow the sum has
// few enough bits to stay as it is, and a coarser quantum is a multiple.
func (b *block) sumLow() int { return min(b.low(), b.grain) }

// exact tells whether binary32 holds every product, barring overflow, which is
// found by its infinity.
func (b *block) exact() bool { return b.bits() <= 24 && b.low() >= -149 }

// roundsOnce tells whether a product rounded to binary32 and then to the grid is
// the product rounded to the grid. It is where the first rounding is exact. Where
// the product has 24 bits but reaches below 2^-149, an inexact one is at most
// 2^(bits-150); if that is no more than half the grid's least value, both roundings
// give zero.
func (b *block) roundsOnce(g Grid) bool {
	return b.bits() <= 24 && (b.low() >= -149 || b.bits()-150 <= g.quantum()-1)
}

// subnormalFree tells whether no sum below the least normal value of the grid is
// inexact.
func (b *block) subnormalFree(g Grid) bool { return b.sumLow() >= g.quantum() }

// fuses tells whether the binary64 rounding x of s + a b, rounded to nearest-even
// to the grid, is the rounding of the exact sum.
//
// It is where x is exact: sums whose tile is not handed back lie below 2^(top+1) of
// the grid, and are multiples of 2^sumLow. Otherwise let a b have at most 24 bits.
// If |s| <= |a b|, x lies below 2^(top+2), top the smaller of the products' and the
// grid's; its last place is then no coarser than that of s, by the condition, nor
// than that of a b, so x is exact. If |s| > |a b| and x is inexact, a b lies below
// 2^-28 |x|: x and the exact sum are so close to s, which is of the grid, that no
// midpoint of at most 21 bits lies between or on them.
func (b *block) fuses(g Grid) bool {
	if g.top()+1-b.sumLow() <= 53 {
		return true
	}
	top := min(b.top(), g.top())
	return b.bits() <= 24 && top-51 <= max(b.sumLow(), g.quantum())
}

// choose returns the fastest plan whose conditions hold, nil where there is none.
func (p *plans) choose(b *block) *plan {
	switch p.sum.Kind {
	case NativeSum:
		return p.chooseNative(b)
	case NearestSum:
		return p.chooseNearest(b)
	default:
		return p.chooseStochastic(b)
	}
}

func (p *plans) chooseNative(b *block) *plan {
	if p.arithmetic.Product == RoundedProduct && !b.roundsOnce(p.arithmetic.Grid) {
		return nil
	}
	if p.apart != nil && b.exact() {
		return p.apart
	}
	return p.native
}

// fixes tells whether sums rounded as fixed-point numbers are normal in binary32 (or
// zero), or far below the grid's least binade, where only their smallness matters.
func (b *block) fixes(g Grid) bool {
	scale := single.carryScale(g)
	return b.sumLow()+scale >= -126 || g.MinExponent+scale > -126+32
}

// chooseNearest: after a rounded product of no more bits than the sum, the binary32
// sum of two values of at most 11 bits, rounded again to at most 11, is their exact
// sum rounded (24 >= 2 x 11 + 2: S. A. Figueroa, When is double rounding innocuous?,
// 1995). Through binary32, the two roundings are asked for.
func (p *plans) chooseNearest(b *block) *plan {
	a, g := p.arithmetic, p.sum.Grid
	switch {
	case a.Product == RoundedProduct:
		if !b.roundsOnce(a.Grid) {
			return nil
		}
		return p.rounded
	case p.sum.Through && a.Product == NativeProduct && !b.exact(), p.sum.Through && p.unfused && b.exact():
		return p.product
	case p.sum.Through && b.subnormalFree(g):
		return p.free
	case p.sum.Through:
		return p.care
	case a.Product == NativeProduct && !b.exact():
		return p.odd
	case !b.fuses(g):
		if b.exact() {
			return p.odd
		}
		return nil
	case b.subnormalFree(g):
		return p.fusedFree
	}
	return p.fused
}

// chooseStochastic: truncation toward zero keeps the bits that decide, floor(f 2^r),
// whatever the operands; so does truncation to binary32 where these bits, and that of
// the half, are among the spare ones, and no sum below the least normal value has any
// below the least place. The sum after a rounded product is formed to nearest, and
// so must be exact: it is below the limit that is watched, a multiple of 2^grain.
func (p *plans) chooseStochastic(b *block) *plan {
	a, g := p.arithmetic, p.sum.Grid
	switch {
	case a.Product == NativeProduct && !b.exact():
		return nil
	case p.sum.Through && a.Product == RoundedProduct:
		if !b.roundsOnce(a.Grid) || p.rounded.mode == stochasticProductCare && !b.fixes(g) {
			return nil
		}
		return p.rounded
	case p.sum.Through && p.random != nil && b.subnormalFree(g):
		return p.random
	case p.sum.Through && !b.fixes(g):
		return nil
	case p.sum.Through:
		return p.randomCare
	case a.Product == RoundedProduct:
		return p.watched(b)
	}
	if p.truncated != nil && !b.wide && b.subnormalFree(g) {
		return p.truncated
	}
	return p.wide // random products too: they are exact in binary64 before rounding
}

// watched sets the limit of exact sums after rounded products.
func (p *plans) watched(b *block) *plan {
	if p.wide == nil {
		return nil
	}
	grain := max(p.arithmetic.Grid.quantum(), b.sumLow())
	p.wide.c.Limit = double.bits(min(p.sum.Grid.Max, math.Ldexp(1, min(grain+53, 1023))))
	return p.wide
}
