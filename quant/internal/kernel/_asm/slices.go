package main

import (
	"github.com/mmcloughlin/avo/operand"
	"github.com/mmcloughlin/avo/reg"
)

// The elementwise roundings: dst[i] = R(src[i]), sign of zero kept, with a tally of
// numbers that became zero, t[0], and a mark of elements that are not finite or
// beyond the grid, t[1]; those results have no meaning. Lengths are multiples of 16.

// sliceLoop is what their loops share.
type sliceLoop struct {
	*loop
	table     reg.Register
	lost, bad reg.VecVirtual // counts in integer lanes; all ones where bad
}

func newSliceLoop(g *loop) *sliceLoop {
	s := &sliceLoop{loop: g, lost: g.reg(), bad: g.reg()}
	s.table = g.Load(g.Param("c"), g.GP64())
	g.zero(s.lost)
	g.zero(s.bad)
	return s
}

// constant loads a constant into a register.
func (s *sliceLoop) constant(name string) reg.VecVirtual {
	r := s.reg()
	s.load(r, s.memory(name))
	return r
}

// memory is a constant as a memory operand.
func (s *sliceLoop) memory(name string) operand.Mem {
	return operand.Mem{Base: s.table, Disp: offset(constantFields, name)}
}

// check marks where size is not at most Limit: beyond it, or not a number.
func (s *sliceLoop) check(size reg.Register) {
	const notLessOrEqual = 6
	s.gather(s.bad, func(m reg.Register) { s.compare(notLessOrEqual, size, s.memory("Limit"), m) })
}

// count adds where the rounded size is zero and the number v was not.
func (s *sliceLoop) count(size, v reg.Register) {
	const equal, notEqual = 0, 4
	zero := s.reg()
	s.zero(zero)
	if s.zmm {
		k := s.K()
		s.pick(s.VCMPPS, s.VCMPPD)(operand.Imm(equal), zero, size, k)
		s.pick(s.VCMPPS, s.VCMPPD)(operand.Imm(notEqual), zero, v, k, k)
		ones := s.reg()
		s.pick(s.VPTERNLOGD, s.VPTERNLOGQ)(operand.Imm(0xff), ones, ones, ones)
		s.pick(s.VPSUBD, s.VPSUBQ)(ones, s.lost, k, s.lost)
		return
	}
	a, b := s.reg(), s.reg()
	s.compare(equal, size, zero, a)
	s.compare(notEqual, v, zero, b)
	s.andInt(a, a, b)
	s.subInt(s.lost, s.lost, a)
}

// compare: m = all ones where x predicate y.
func (s *sliceLoop) compare(predicate uint64, x reg.Register, y operand.Op, m reg.Register) {
	if s.zmm {
		k := s.K()
		s.pick(s.VCMPPS, s.VCMPPD)(operand.Imm(predicate), y, x, k)
		if s.double {
			s.VPMOVM2Q(k, m)
		} else {
			s.VPMOVM2D(k, m)
		}
		return
	}
	s.pick(s.VCMPPS, s.VCMPPD)(operand.Imm(predicate), y, x, m)
}

// gather: into |= what f writes.
func (s *sliceLoop) gather(into reg.Register, f func(reg.Register)) {
	m := s.reg()
	f(m)
	s.orInt(into, into, m)
}

// finish adds the tallies up and writes them.
func (s *sliceLoop) finish() {
	t := s.Load(s.Param("t"), s.GP64())
	space := s.AllocLocal(64)
	for n, v := range []reg.VecVirtual{s.lost, s.bad} {
		s.VMOVDQU(low256(v, s.zmm), space)
		lanes := []operand.Mem{space, space.Offset(8), space.Offset(16), space.Offset(24)}
		if s.zmm {
			high := s.YMM()
			s.VEXTRACTI64X4(operand.Imm(1), v, high)
			s.VMOVDQU(high, space.Offset(32))
			lanes = append(lanes, space.Offset(32), space.Offset(40), space.Offset(48), space.Offset(56))
		}
		sum := s.GP64()
		s.XORQ(sum, sum)
		for _, m := range lanes {
			if n == 1 {
				s.ORQ(m, sum)
				continue
			}
			s.addLane(sum, m)
		}
		s.ADDQ(sum, operand.Mem{Base: t, Disp: 8 * n})
	}
	s.end()
}

// addLane adds 64 bits of lanes to sum: one count, or two of 32 bits.
func (s *sliceLoop) addLane(sum reg.Register, m operand.Mem) {
	if s.double {
		s.ADDQ(m, sum)
		return
	}
	for _, at := range []operand.Mem{m, m.Offset(4)} {
		v := s.GP32()
		s.MOVL(at, v)
		s.ADDQ(v.As64(), sum)
	}
}

func low256(r reg.VecVirtual, zmm bool) reg.Register {
	if zmm {
		return r.AsY()
	}
	return r
}

// emitNearest32 rounds binary32 numbers.
func emitNearest32(g *loop) {
	s := newSliceLoop(g)
	dst, src, n := g.base("dst"), g.base("src"), g.length("src")
	mask, least, grow := s.constant("ExponentMask"), s.constant("SumLeast"), s.constant("SumGrow")
	sign, magnitude := s.constant("SignMask"), s.constant("MagnitudeMask")
	g.each(n, g.bytes()/4, func(i reg.Register) {
		v, e, x, size := g.reg(), g.reg(), g.reg(), g.reg()
		g.load(v, g.at(src, i, 4))
		s.nearest(v, e, x, size, mask, least, grow, sign, magnitude)
		g.store(g.at(dst, i, 4), x)
	})
	s.finish()
}

// emitNearest64 rounds binary64 numbers, exact or rounded to odd, to a grid of
// binary32 numbers.
func emitNearest64(g *loop) {
	g.double = true
	s := newSliceLoop(g)
	dst, src, n := g.base("dst"), g.base("src"), g.length("src")
	mask, least, grow := s.constant("ExponentMask"), s.constant("SumLeast"), s.constant("SumGrow")
	sign, magnitude := s.constant("SignMask"), s.constant("MagnitudeMask")
	g.each(n, g.bytes()/8, func(i reg.Register) {
		v, e, x, size := g.reg(), g.reg(), g.reg(), g.reg()
		g.load(v, g.at(src, i, 8))
		s.nearest(v, e, x, size, mask, least, grow, sign, magnitude)
		s.storeNarrow(g.at(dst, i, 4), x)
	})
	s.finish()
}

// nearest: x = v rounded, see tile.nearest, with checks and the sign of v.
func (s *sliceLoop) nearest(v, e, x, size, mask, least, grow, sign, magnitude reg.Register) {
	s.and(size, v, magnitude)
	s.check(size)
	s.and(e, v, mask)
	s.max(e, e, least)
	s.VMOVAPS(v, x)
	s.fma(x, e, grow)
	s.fnma(x, e, grow)
	s.and(x, x, magnitude)
	s.count(x, v)
	s.and(e, v, sign)
	s.or(x, x, e)
}

// storeNarrow stores binary64 lanes as binary32 numbers, which they are.
func (s *sliceLoop) storeNarrow(m operand.Mem, x reg.VecVirtual) {
	if s.zmm {
		s.VCVTPD2PS(x, x.AsY())
		s.VMOVUPS(x.AsY(), m)
		return
	}
	s.VCVTPD2PSY(x, x.AsX())
	s.VMOVUPS(x.AsX(), m)
}

// emitStochastic32 rounds binary32 numbers with one random word each: the magnitude
// as units of the quantum and a fraction of 32 bits, to which the random bits are
// added; the carry is T + U >= 2^r. Numbers that are subnormal in binary32 are
// marked bad.
func emitStochastic32(g *loop) {
	s := newSliceLoop(g)
	dst, src, words, n := g.base("dst"), g.base("src"), g.base("words"), g.length("src")
	thirtyTwo, ones := g.literal(32), g.literal(1<<32-1)
	g.each(n, g.bytes()/4, func(i reg.Register) {
		v, e, scale, sig, up := g.reg(), g.reg(), g.reg(), g.reg(), g.reg()
		g.load(v, g.at(src, i, 4))
		g.and(e, v, s.memory("MagnitudeMask"))
		s.check(e)
		s.subnormal(e, ones)
		g.and(e, v, s.memory("ExponentMask"))
		g.VPMINUD(s.memory("Implicit"), e, up)
		g.andInt(sig, v, s.memory("Fraction"))
		g.orInt(sig, sig, up)
		g.max(scale, e, s.memory("SumLeast"))
		g.subInt(e, scale, e)
		g.VPSRLD(operand.Imm(23), e, e)
		g.addInt(e, e, s.memory("BaseShift")) // bits of sig below the quantum
		fraction, rest, whole := g.reg(), g.reg(), g.reg()
		g.shiftRight(whole, sig, e)
		g.subInt(up, thirtyTwo, e)
		g.shiftLeft(fraction, sig, up)
		g.subInt(up, e, thirtyTwo)
		g.shiftRight(rest, sig, up)
		g.orInt(fraction, fraction, rest)
		u := g.reg()
		g.load(u, g.at(words, i, 4))
		g.andInt(u, u, s.memory("RandomMask"))
		g.orInt(u, u, s.memory("RandomHalf"))
		g.addInt(fraction, fraction, u)
		g.subInt(whole, whole, ones) // whole + 1, less one where nothing is carried
		if g.zmm {
			const notLess = 5
			k := g.K()
			g.VPCMPUD(operand.Imm(notLess), u, fraction, k)
			g.VPADDD(ones, whole, k, whole)
		} else {
			g.VPMAXUD(u, fraction, u)
			g.VPCMPEQD(u, fraction, fraction)
			g.addInt(whole, whole, fraction)
		}
		g.VCVTDQ2PS(whole, whole)
		g.mul(whole, whole, s.memory("Quantum"))
		g.mul(whole, whole, scale)
		s.count(whole, v)
		g.and(v, v, s.memory("SignMask"))
		g.or(v, v, whole)
		g.store(g.at(dst, i, 4), v)
	})
	s.finish()
}

// subnormal marks sizes below 2^-126 that are not zero.
func (s *sliceLoop) subnormal(size, ones reg.Register) {
	m, least := s.reg(), s.literal(1<<23-2)
	s.addInt(m, size, ones)
	s.VPMINUD(m, least, least)
	if s.zmm {
		k := s.K()
		s.VPCMPEQD(m, least, k)
		s.VPMOVM2D(k, m)
	} else {
		s.VPCMPEQD(m, least, m)
	}
	s.orInt(s.bad, s.bad, m)
}

// emitStochastic64 rounds binary64 numbers, exact or rounded to odd, with one random
// word each, see tile.stochasticWide.
func emitStochastic64(g *loop) {
	g.double = true
	s := newSliceLoop(g)
	dst, src, words, n := g.base("dst"), g.base("src"), g.base("words"), g.length("src")
	frame := g.AllocLocal(8)
	if !g.zmm {
		roundTowardZero(g.Context, frame)
	}
	sign, magnitude, least := s.constant("SignMask"), s.constant("MagnitudeMask"), s.constant("SumLeast")
	g.each(n, g.bytes()/8, func(i reg.Register) {
		v, size, lift, x, u := g.reg(), g.reg(), g.reg(), g.reg(), g.reg()
		g.load(v, g.at(src, i, 8))
		g.and(size, v, magnitude)
		s.check(size)
		const less = 17
		s.compare(less, size, least, lift)
		g.and(lift, lift, least)
		g.and(x, v, sign)
		g.or(lift, lift, x)
		if g.zmm {
			g.VADDPD_RZ_SAE(lift, v, x)
		} else {
			g.add(x, v, lift)
		}
		g.VPMOVZXDQ(g.at(words, i, 4), u)
		g.andInt(u, u, s.memory("RandomMask"))
		g.shiftLeft(u, u, s.memory("PreShift"))
		g.shiftRight(u, u, s.memory("RandomShift"))
		g.orInt(u, u, s.memory("RandomHalf"))
		g.addInt(x, x, u)
		g.andInt(x, x, s.memory("Keep"))
		g.sub(x, x, lift)
		g.and(x, x, magnitude)
		s.count(x, v)
		g.and(v, v, sign)
		g.or(x, x, v)
		s.storeNarrow(g.at(dst, i, 4), x)
	})
	if !g.zmm {
		g.LDMXCSR(frame)
	}
	s.finish()
}

// emitScale64 is x = alpha y rounded to odd, y in place; t[1] marks products beyond
// 2^1000, below 2^-900 where y is not zero, or not finite.
func emitScale64(g *loop) {
	g.double = true
	s := newSliceLoop(g)
	y, n := g.base("y"), g.length("y")
	m, err := g.Param("alpha").Resolve()
	if err != nil {
		panic(err)
	}
	alpha := g.reg()
	g.spread(alpha, m.Addr)
	g.each(n, g.bytes()/8, func(i reg.Register) {
		v, x, rest := g.reg(), g.reg(), g.reg()
		g.load(v, g.at(y, i, 8))
		g.mul(x, v, alpha)
		g.VMOVAPD(x, rest)
		g.VFMSUB231PD(alpha, v, rest) // alpha v - x
		s.range64(x, v)
		s.fold(x, rest)
		g.store(g.at(y, i, 8), x)
	})
	s.finish()
}

// range64 marks products outside the range in which their rest is exact.
func (s *sliceLoop) range64(x, v reg.Register) {
	const notLessOrEqual, less, notEqual = 6, 17, 4
	size, a, b := s.reg(), s.reg(), s.reg()
	s.and(size, x, s.memory("MagnitudeMask"))
	s.gather(s.bad, func(m reg.Register) { s.compare(notLessOrEqual, size, s.memory("Limit"), m) })
	s.compare(less, size, s.memory("SumLeast"), a)
	s.zero(size)
	s.compare(notEqual, v, size, b)
	s.andInt(a, a, b)
	s.orInt(s.bad, s.bad, a)
}

// emitAdd64 is x = x + b factor rounded to odd, factor +1 or -1; t[1] marks sums that
// are not finite.
func emitAdd64(g *loop) {
	g.double = true
	s := newSliceLoop(g)
	x, b, n := g.base("x"), g.base("b"), g.length("x")
	m, err := g.Param("factor").Resolve()
	if err != nil {
		panic(err)
	}
	factor := g.reg()
	g.spread(factor, m.Addr)
	g.each(n, g.bytes()/8, func(i reg.Register) {
		p, q, v, w, rest := g.reg(), g.reg(), g.reg(), g.reg(), g.reg()
		g.load(p, g.at(x, i, 8))
		g.mul(q, factor, g.at(b, i, 8))
		g.add(v, p, q)
		g.sub(w, v, p)
		g.sub(rest, v, w)
		g.sub(rest, p, rest)
		g.sub(q, q, w)
		g.add(rest, rest, q)
		g.and(w, v, s.memory("MagnitudeMask"))
		s.check(w)
		s.fold(v, rest)
		g.store(g.at(x, i, 8), v)
	})
	s.finish()
}

// fold: x rounded to odd, where x + rest is exact and x its nearest.
func (s *sliceLoop) fold(x, rest reg.Register) {
	const notEqual = 12 // and ordered: a NaN leaves x alone
	inexact, zero, less := s.reg(), s.reg(), s.reg()
	s.zero(zero)
	s.compare(notEqual, rest, zero, inexact)
	// One less where the rest points toward zero, then the last bit.
	s.xorInt(less, x, rest)
	if s.zmm {
		s.VPSRAQ(operand.Imm(63), less, less)
	} else {
		s.VPCMPGTQ(less, zero, less) // 0 > less
	}
	s.andInt(less, less, inexact)
	s.addInt(x, x, less)
	s.VPSRLQ(operand.Imm(63), inexact, inexact)
	s.orInt(x, x, inexact)
}
