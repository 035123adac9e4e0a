package main

import (
	"github.com/mmcloughlin/avo/operand"
	"github.com/mmcloughlin/avo/reg"
)

// The operation sequences of one term, s the spare bits of a lane below the last
// place of the format: 23-m in binary32 lanes, 52-m in binary64 lanes. x and sum
// are registers that change in place.

// multiply: p = A[k, r] B[k, columns].
func (g *tile) multiply(p reg.Register, r, v int) chain {
	return chain{func() { g.mul(p, g.left[r], g.factor(v)) }}
}

// fuse: sum += A[k, r] B[k, columns], one rounding to the lane.
func (g *tile) fuse(r, v int) chain {
	return chain{func() { g.fma(g.sums[r][v], g.left[r], g.factor(v)) }}
}

// fuseTruncated: the same, rounded toward zero. AVX2 kernels run with the
// rounding mode set, AVX-512 instructions carry their own.
func (g *tile) fuseTruncated(r, v int) chain {
	if !g.zmm {
		return g.fuse(r, v)
	}
	return chain{func() {
		g.pick(g.VFMADD231PS_RZ_SAE, g.VFMADD231PD_RZ_SAE)(g.right[v], g.left[r], g.sums[r][v])
	}}
}

// plus: sum += p.
func (g *tile) plus(sum, p reg.Register) chain { return chain{func() { g.add(sum, sum, p) }} }

// plusRescaled: sum += p Rescale, for a product whose scale is not the sum's.
func (g *tile) plusRescaled(sum, p reg.Register) chain {
	return chain{func() { g.fma(sum, p, g.constant("Rescale")) }}
}

// nearest rounds x to nearest-even with the quantum of its own binade, or of the
// binade Least where x is below it (subnormals): with e = max(2^floor(log2 |x|),
// Least), x + 1.5 2^s e lies in a binade whose last place is the quantum, and
// 1.5 2^s e is an even multiple of it, so the addition rounds as the format does.
func (g *tile) nearest(x reg.Register, least, grow string) chain {
	e := g.reg()
	return chain{
		func() { g.and(e, x, g.constant("ExponentMask")) },
		func() { g.max(e, e, g.constant(least)) },
		func() { g.fma(x, e, g.constant(grow)) },
		func() { g.fnma(x, e, g.constant(grow)) },
	}
}

// split rounds x to nearest-even where it is a multiple of the least subnormal
// already: c = x (2^s + 1); x = c - (c - x). (T. J. Dekker: A floating-point
// technique for extending the available precision, 1971, there for halving a
// significand. That it is nearest-even with ties, m <= 10, is tested for every
// significand. A form with two fused operations fails just below powers of two.)
func (g *tile) split(x reg.Register) chain {
	c := g.reg()
	return chain{
		func() { g.mul(c, x, g.constant("SumSplit")) },
		func() { g.sub(x, c, x) },
		func() { g.sub(x, c, x) },
	}
}

// plusOdd: sum += p rounded to odd: where the sum is inexact, the neighbour with
// the odd last bit. A second rounding to at least two bits fewer then equals the
// rounding of the exact sum (S. Boldo, G. Melquiond: Emulation of FMA and
// correctly rounded sums, IEEE Trans. Computers 57(4), 2008).
func (g *tile) plusOdd(sum, p reg.Register) chain {
	if g.zmm {
		return g.plusOddDirected(sum, p)
	}
	x, w, e, odd := g.reg(), g.reg(), g.reg(), g.reg()
	const notEqual = 12
	return chain{
		func() { g.add(x, sum, p) },
		func() { g.sub(w, x, sum) }, // the part of p that arrived
		func() { g.sub(e, x, w) },
		func() { g.sub(e, sum, e) },
		func() { g.sub(w, p, w) },
		func() { g.add(e, e, w) }, // what the addition lost (Knuth's two-sum)
		func() { g.zero(odd) },
		func() { g.VCMPPS(operand.Imm(notEqual), odd, e, odd) },
		func() { g.xorInt(e, e, x) },
		func() { g.VPSRAD(operand.Imm(31), e, e) },
		func() { g.andInt(e, e, odd) }, // -1 where the magnitude was rounded up
		func() { g.addInt(x, x, e) },
		func() { g.VPSRLD(operand.Imm(31), odd, odd) },
		func() { g.orInt(sum, x, odd) },
	}
}

// plusOddDirected is plusOdd by two directed roundings: they are neighbours, so
// one of them is odd, or both are the exact sum.
func (g *tile) plusOddDirected(sum, p reg.Register) chain {
	down, isOdd := g.reg(), g.K()
	return chain{
		func() { g.VADDPS_RD_SAE(p, sum, down) },
		func() { g.VADDPS_RU_SAE(p, sum, sum) },
		func() { g.VPTESTMD(g.vec("Ones"), down, isOdd) },
		func() { g.VMOVAPS(down, isOdd, sum) },
	}
}

// plusTruncated: sum += p, rounded toward zero, see fuseTruncated.
func (g *tile) plusTruncated(sum, p reg.Register) chain {
	if !g.zmm {
		return g.plus(sum, p)
	}
	return chain{func() { g.VADDPD_RZ_SAE(p, sum, sum) }}
}

// mix: u = s16(lo R) s16(lo V) + s16(hi R) s16(hi V), the low half of R odd.
func (g *tile) mix(u reg.Register, r, v int) chain {
	if !g.double {
		return chain{func() { g.VPMADDWD(operand.Mem{Base: g.v, Disp: v * g.bytes()}, g.leftWord[r], u) }}
	}
	return chain{
		func() { g.VPMOVZXDQ(operand.Mem{Base: g.v, Disp: v * g.bytes() / 2}, u) },
		func() { g.VPMADDWD(u, g.leftWord[r], u) },
	}
}

// mixTerm is mix of the products' tables.
func (g *tile) mixTerm(u reg.Register, r, v int) chain {
	return chain{
		func() { g.VPMOVZXDQ(operand.Mem{Base: g.termV, Disp: v * g.bytes() / 2}, u) },
		func() { g.VPMADDWD(u, g.leftTerm[r], u) },
	}
}

// stochastic rounds x, at least 16-bit aligned spare bits (m >= 7) and free of
// subnormals: the top bits of u mod 2^16, moved below the last place, are added
// to the bits of x, and the spare bits cleared. The carry is T + U >= 2^r.
func (g *tile) stochastic(x, u reg.Register) chain {
	return chain{
		func() { g.andInt(u, u, g.constant("RandomMask")) },
		func() { g.shiftRight(u, u, g.constant("RandomShift")) },
		func() { g.addInt(x, x, u) },
		func() { g.andInt(x, x, g.constant("Keep")) },
	}
}

// stochasticCare rounds x with subnormals, any m and any r, through integers:
// |x| / quantum as a fixed-point number of r fraction bits (r + 1 where the
// threshold is centred, the last for the half), plus U, floor, times the quantum.
func (g *tile) stochasticCare(x, u reg.Register) chain {
	e, shift, w, top := g.reg(), g.reg(), g.reg(), g.reg()
	return chain{
		func() { g.and(e, x, g.constant("ExponentMask")) },
		func() { g.VPMINUD(g.constant("Implicit"), e, top) }, // no bit for zero
		func() { g.max(shift, e, g.constant("SumLeast")) },
		func() { g.subInt(e, shift, e) }, // distance below the least binade
		func() { g.VPSRLD(operand.Imm(23), e, e) },
		func() { g.addInt(e, e, g.constant("BaseShift")) },
		func() { g.andInt(w, x, g.constant("Fraction")) },
		func() { g.orInt(w, w, top) },
		func() { g.shiftLeft(w, w, g.constant("PreShift")) },
		func() { g.shiftRight(w, w, e) },
		func() { g.VPSLLD(operand.Imm(16), u, u) },
		func() { g.shiftRight(u, u, g.constant("RandomShift")) },
		func() { g.orInt(u, u, g.constant("RandomHalf")) },
		func() { g.addInt(w, w, u) },
		func() { g.shiftRight(w, w, g.constant("WholeShift")) },
		func() { g.VCVTDQ2PS(w, w) },
		func() { g.mul(w, w, g.constant("Quantum")) },
		func() { g.mul(w, w, shift) },
		func() { g.and(x, x, g.constant("SignMask")) },
		func() { g.or(x, x, w) },
	}
}

// rounding names the constants of a stochastic rounding in binary64 lanes, and the
// register of the magnitudes it watches.
type rounding struct {
	least, shift, mask, half, keep string
	top                            int
}

var (
	sumRounding  = rounding{"SumLeast", "RandomShift", "RandomMask", "RandomHalf", "Keep", 0}
	termRounding = rounding{"Least", "TermShift", "TermMask", "TermHalf", "TermKeep", 1}
)

// align: u = U moved below the last place of a binary64 lane, and the half of the
// centred threshold below that.
func (g *tile) align(u reg.Register, to rounding) chain {
	return chain{
		func() { g.shiftLeft(u, u, g.constant(to.shift)) },
		func() { g.andInt(u, u, g.constant(to.mask)) },
		func() { g.orInt(u, u, g.constant(to.half)) },
	}
}

// alignDown is align for a binary32 lane, whose upper half of u is of no meaning.
func (g *tile) alignDown(u reg.Register) chain {
	return chain{
		func() { g.VPSLLD(operand.Imm(16), u, u) },
		func() { g.shiftRight(u, u, g.constant("RandomShift")) },
		func() { g.andInt(u, u, g.constant("RandomMask")) },
		func() { g.orInt(u, u, g.constant("RandomHalf")) },
	}
}

// carry: x = x + u with the spare bits cleared.
func (g *tile) carry(x, u reg.Register, to rounding) chain {
	return chain{
		func() { g.addInt(x, x, u) },
		func() { g.andInt(x, x, g.constant(to.keep)) },
	}
}

// watch: top = max(top, |x|).
func (g *tile) watch(x reg.Register) chain {
	size := g.reg()
	return chain{
		func() { g.and(size, x, g.constant("MagnitudeMask")) },
		func() { g.max(g.top[0], g.top[0], size) },
	}
}

// stochasticWide rounds the exact or truncated binary64 x with subnormals: below the
// least binade, x is lifted by that of its sign, which puts its quantum at the last
// place kept. The greatest magnitude is watched, because truncation never yields
// infinity.
func (g *tile) stochasticWide(x, u reg.Register, to rounding) chain {
	if g.zmm {
		return g.stochasticWideMasked(x, u, to)
	}
	size, sign := g.reg(), g.reg()
	const less = 17
	c := chain{
		func() { g.and(size, x, g.constant("MagnitudeMask")) },
		func() { g.max(g.top[to.top], g.top[to.top], size) },
		func() { g.VCMPPD(operand.Imm(less), g.constant(to.least), size, size) },
		func() { g.and(size, size, g.constant(to.least)) },
		func() { g.and(sign, x, g.constant("SignMask")) },
		func() { g.or(size, size, sign) },
		func() { g.add(x, x, size) },
	}
	c = append(c, g.align(u, to)...)
	c = append(c, g.carry(x, u, to)...)
	return append(c, func() { g.sub(x, x, size) })
}

// stochasticWideMasked is stochasticWide with AVX-512's masks and roundings.
func (g *tile) stochasticWideMasked(x, u reg.Register, to rounding) chain {
	lift, below := g.reg(), g.K()
	const less = 17
	const pickSign = 0xEA // (x & SignMask) | least
	c := chain{
		func() { g.and(lift, x, g.constant("MagnitudeMask")) },
		func() { g.max(g.top[to.top], g.top[to.top], lift) },
		func() { g.VCMPPD(operand.Imm(less), g.constant(to.least), lift, below) },
		func() { g.VMOVAPD(x, lift) },
		func() { g.VPTERNLOGQ(operand.Imm(pickSign), g.constant(to.least), g.vec("SignMask"), lift) },
		func() { g.VADDPD_RZ_SAE(lift, x, below, x) },
	}
	c = append(c, g.align(u, to)...)
	c = append(c, g.carry(x, u, to)...)
	return append(c, func() { g.VSUBPD(lift, x, below, x) })
}
