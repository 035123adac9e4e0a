package main

import (
	"github.com/mmcloughlin/avo/operand"
	"github.com/mmcloughlin/avo/reg"
)

// The careful modes form tiles in which something left the range of a format: each
// rounding replaces what lies beyond the largest finite value, and infinities, as the
// overflow policy says, and counts events. Numbers are not scaled.

// care names the constants of a rounding with overflow, and its counters.
type care struct {
	rounds                           bool // else only what is not finite is replaced
	least, grow, max, over, infinite string
	counter                          int // of finite numbers beyond; then of infinite ones; then of NaN
}

var (
	termCare     = care{true, "Least", "Grow", "Max", "Over", "Infinite", 0}
	termOverflow = care{false, "", "", "Max", "Over", "Infinite", 0}
	sumCare      = care{true, "SumLeast", "SumGrow", "SumMax", "SumOver", "SumInfinite", 3}
)

// carefulEvents is the number of counters.
const carefulEvents = 6

var carefulConstants = []string{
	"ExponentMask", "SignMask", "MagnitudeMask", "Least", "Grow", "SumLeast", "SumGrow", "Max", "Over", "Infinite",
	"SumMax", "SumOver", "SumInfinite", "Infinity", "OddMask", "Ones",
}

// Predicates of comparisons.
const (
	isEqual       = 0
	isUnordered   = 3
	isNotAtMost   = 6
	isLessOrdered = 17
)

// roundCarefully rounds x, replaces what is beyond, and counts.
func (g *tile) roundCarefully(x reg.Register, c care) chain {
	y, e := g.reg(), g.reg()
	round := chain{func() { g.VMOVAPS(x, y) }}
	if c.rounds {
		round = append(round,
			func() { g.and(e, x, g.constant("ExponentMask")) },
			func() { g.max(e, e, g.constant(c.least)) },
			func() { g.fma(y, e, g.constant(c.grow)) },
			func() { g.fnma(y, e, g.constant(c.grow)) },
		)
	}
	if g.zmm {
		return join(round, g.replaceMasked(x, y, c))
	}
	return join(round, g.replace(x, y, c))
}

// replace: x = y, or what the policy puts in its place, for AVX2.
func (g *tile) replace(x, y reg.Register, c care) chain {
	size, beyond, finite, m := g.reg(), g.reg(), g.reg(), g.reg()
	compare := func(predicate uint64, a reg.Register, b operand.Op, m reg.Register) {
		g.VCMPPS(operand.Imm(predicate), b, a, m)
	}
	return chain{
		func() { g.and(size, y, g.constant("MagnitudeMask")) },
		func() { compare(isNotAtMost, size, g.constant(c.max), beyond) },
		func() { g.and(size, x, g.constant("MagnitudeMask")) },
		func() { compare(isLessOrdered, size, g.constant("Infinity"), finite) },
		func() { g.andInt(m, finite, beyond) },
		func() { g.subInt(g.events[c.counter], g.events[c.counter], m) },
		func() { compare(isEqual, size, g.constant("Infinity"), m) },
		func() { g.subInt(g.events[c.counter+1], g.events[c.counter+1], m) },
		func() { g.load(m, g.constant(c.infinite)) },
		func() { g.VBLENDVPS(finite, g.constant(c.over), m, m) },
		func() { g.and(size, x, g.constant("SignMask")) },
		func() { g.or(m, m, size) },
		func() { compare(isUnordered, x, x, size) },
		func() { g.subInt(g.events[c.counter+2], g.events[c.counter+2], size) },
		func() { g.or(m, m, size) }, // all ones are a NaN
		func() { g.VBLENDVPS(beyond, m, y, x) },
	}
}

// replaceMasked is replace for AVX-512.
func (g *tile) replaceMasked(x, y reg.Register, c care) chain {
	size, m := g.reg(), g.reg()
	beyond, finite, k := g.K(), g.K(), g.K()
	count := func(n int) {
		g.VPADDD(g.constant("Ones"), g.events[c.counter+n], k, g.events[c.counter+n])
	}
	return chain{
		func() { g.and(size, y, g.constant("MagnitudeMask")) },
		func() { g.VCMPPS(operand.Imm(isNotAtMost), g.constant(c.max), size, beyond) },
		func() { g.and(size, x, g.constant("MagnitudeMask")) },
		func() { g.VCMPPS(operand.Imm(isLessOrdered), g.constant("Infinity"), size, finite) },
		func() { g.KANDW(finite, beyond, k) },
		func() { count(0) },
		func() { g.VCMPPS(operand.Imm(isEqual), g.constant("Infinity"), size, k) },
		func() { count(1) },
		func() { g.VMOVUPS(g.constant(c.infinite), m) },
		func() { g.VMOVUPS(g.constant(c.over), finite, m) },
		func() { g.and(size, x, g.constant("SignMask")) },
		func() { g.or(m, m, size) },
		func() { g.VCMPPS(operand.Imm(isUnordered), x, x, k) },
		func() { count(2) },
		func() { g.VMOVAPS(x, k, m) },
		func() { g.VMOVAPS(y, x) },
		func() { g.VMOVAPS(m, beyond, x) },
	}
}

// plusCarefully: sum += p, to nearest, or to odd where OddMask says so, see plusOdd.
func (g *tile) plusCarefully(sum, p reg.Register) chain {
	x, w, e, odd := g.reg(), g.reg(), g.reg(), g.reg()
	const notEqual = 12
	return chain{
		func() { g.add(x, sum, p) },
		func() { g.sub(w, x, sum) },
		func() { g.sub(e, x, w) },
		func() { g.sub(e, sum, e) },
		func() { g.sub(w, p, w) },
		func() { g.add(e, e, w) },
		func() { g.zero(odd) },
		func() { g.inexact(odd, e, notEqual) },
		func() { g.andInt(odd, odd, g.constant("OddMask")) },
		func() { g.xorInt(e, e, x) },
		func() { g.VPSRAD(operand.Imm(31), e, e) },
		func() { g.andInt(e, e, odd) },
		func() { g.addInt(x, x, e) },
		func() { g.VPSRLD(operand.Imm(31), odd, odd) },
		func() { g.orInt(sum, x, odd) },
	}
}

// inexact: odd = all ones where e is not zero; odd holds zero before.
func (g *tile) inexact(odd, e reg.Register, predicate uint64) {
	if g.zmm {
		k := g.K()
		g.VCMPPS(operand.Imm(predicate), e, odd, k)
		g.VPMOVM2D(k, odd)
		return
	}
	g.VCMPPS(operand.Imm(predicate), e, odd, odd)
}

// startEvents clears the counters.
func (g *tile) startEvents() {
	g.events = nil
	for range carefulEvents {
		e := g.reg()
		g.zero(e)
		g.events = append(g.events, e)
	}
}

// storeEvents adds the counters of all lanes to Events.
func (g *tile) storeEvents() {
	events := g.loadArg("Events")
	space := g.AllocLocal(g.bytes())
	for n, e := range g.events {
		g.VMOVUPS(e, space)
		sum, v := g.GP64(), g.GP32()
		g.XORQ(sum, sum)
		for at := 0; at < g.bytes(); at += 4 {
			g.MOVL(space.Offset(at), v)
			g.ADDQ(v.As64(), sum)
		}
		g.ADDQ(sum, operand.Mem{Base: events, Disp: 8 * n})
	}
}
