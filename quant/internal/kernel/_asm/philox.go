package main

import (
	"github.com/mmcloughlin/avo/build"
	"github.com/mmcloughlin/avo/operand"
	"github.com/mmcloughlin/avo/reg"
)

// The multipliers and Weyl increments of Philox4x32 (Salmon, Moraes, Dror, Shaw:
// Parallel random numbers: as easy as 1, 2, 3, SC 2011, table 2).
const (
	multiplier0 = 0xD2511F53
	multiplier1 = 0xCD9E8D57
	weyl0       = 0x9E3779B9
	weyl1       = 0xBB67AE85
)

// philox generates Philox4x32-10 for the lanes of the column table. A counter word
// occupies a 64-bit element, of which only the low half matters: the widening
// multiplication reads no more. Even and odd columns are two sets of counters, so
// that a shift and a blend give neighbouring columns.
type philox struct {
	lanes
	stream     bool // the words of one stream instead of lanes of a table
	multiplier [2]reg.VecVirtual
	weyl       [2]operand.Mem
	key        [2]reg.VecVirtual
	counter    [][4]reg.VecVirtual // even columns, odd columns; sets of a stream
}

// generate emits the function: for block after block of four terms, for group after
// group of columns, four rows of words.
func (g *philox) generate(c *build.Context, name string) {
	g.Context = c
	g.double = true
	g.counter = make([][4]reg.VecVirtual, g.sets())
	if g.stream {
		g.generateStream(name)
		return
	}
	constants := g.constants(name)
	c.Function(name)
	c.Pragma("noescape")
	c.Doc(name+" fills rows of the column table: Dst[k*Width + j] = word k%4 of Philox4x32-10,",
		"counter (Lane + j, Step, Site, Phase | (First + k/4)<<8), for k below 4*Blocks and j",
		"below Width, and up to "+itoa(2*g.count()-1)+" words beyond the last.")
	c.Signature(pointerSignature("philoxArgs"))
	args := c.Load(c.Param("t"), c.GP64())
	arg := func(name string) operand.Mem { return operand.Mem{Base: args, Disp: offset(philoxFields, name)} }
	load := func(name string) reg.Register {
		r := c.GP64()
		c.MOVQ(arg(name), r)
		return r
	}
	for n := range 2 {
		g.multiplier[n] = g.constant(constants, 8*n)
		g.weyl[n] = constants.Offset(64 * (1 + n))
	}
	ramp := constants.Offset(64 * 3) // 0, 2, 4, ...

	dst, blocks, width, phase := load("Dst"), load("Blocks"), load("Width"), load("First")
	c.SHLQ(operand.Imm(8), phase)
	c.ORQ(arg("Phase"), phase)
	column, last := c.GP64(), c.GP64()

	c.Label("block")
	c.XORQ(column, column)
	c.Label("columns")
	g.start(arg, column, phase, ramp)
	g.rounds()
	g.storeRows(dst, column, width)
	// The next group, or the last one, moved back so that it ends with the row.
	group := 2 * g.count()
	c.MOVQ(width, last)
	c.SUBQ(operand.Imm(uint64(group)), last)
	c.CMPQ(column, last)
	c.JGE(operand.LabelRef("done"))
	c.ADDQ(operand.Imm(uint64(group)), column)
	c.CMPQ(column, last)
	c.CMOVQGT(last, column)
	c.JMP(operand.LabelRef("columns"))
	c.Label("done")
	c.LEAQ(operand.Mem{Base: dst, Index: width, Scale: 8}, dst)
	c.LEAQ(operand.Mem{Base: dst, Index: width, Scale: 8}, dst)
	c.ADDQ(operand.U32(256), phase)
	c.DECQ(blocks)
	c.JNZ(operand.LabelRef("block"))
	c.VZEROUPPER()
	c.RET()
}

// count is the number of 64-bit elements of a register.
func (g *philox) count() int { return g.bytes() / 8 }

// constants is the function's read-only data: multipliers, increments, the ramp.
func (g *philox) constants(name string) operand.Mem {
	m := g.StaticGlobal(name + "Constants")
	g.DataAttributes(readOnly)
	for _, v := range []uint64{multiplier0, multiplier1, 0, 0, 0, 0, 0, 0} {
		g.AppendDatum(operand.U64(v))
	}
	for _, v := range []uint64{weyl0, weyl1} {
		for range 8 {
			g.AppendDatum(operand.U64(v))
		}
	}
	step := 2
	if g.stream {
		step = 1
	}
	for n := range 8 {
		g.AppendDatum(operand.U64(step * n))
	}
	return m
}

func (g *philox) constant(m operand.Mem, at int) reg.VecVirtual {
	r := g.reg()
	g.spread(r, m.Offset(at))
	return r
}

// start sets the counters of a group of columns and the keys.
func (g *philox) start(arg func(string) operand.Mem, column, phase reg.Register, ramp operand.Mem) {
	lane, x := g.GP64(), g.XMM()
	for n := range 2 {
		g.key[n] = g.reg()
		g.spread(g.key[n], arg("Key"+itoa(n)))
	}
	for n := range g.counter {
		for w := range 4 {
			g.counter[n][w] = g.reg()
		}
		g.MOVQ(arg("Lane"), lane)
		g.ADDQ(column, lane)
		if n > 0 {
			g.ADDQ(operand.Imm(uint64(n*g.apart())), lane)
		}
		g.VMOVQ(lane, x)
		g.VPBROADCASTQ(x, g.counter[n][0])
		g.addInt(g.counter[n][0], g.counter[n][0], ramp)
		g.spread(g.counter[n][1], arg("Step"))
		g.spread(g.counter[n][2], arg("Site"))
		g.VMOVQ(phase, x)
		g.VPBROADCASTQ(x, g.counter[n][3])
	}
}

// sets is the number of sets of counters under way at once. A stream has as many as
// the registers hold: a round is a chain of six cycles or so.
func (g *philox) sets() int {
	if g.stream && g.zmm {
		return 4
	}
	return 2
}

// apart is the distance of neighbouring sets of counters.
func (g *philox) apart() int {
	if g.stream {
		return g.count()
	}
	return 1
}

// generateStream emits the function for one stream: four words a counter, counters
// ascending.
func (g *philox) generateStream(name string) {
	constants := g.constants(name)
	g.Function(name)
	g.Pragma("noescape")
	g.Doc(name+" fills Dst with the words of one stream: Dst[4n + w] = word w of Philox4x32-10,",
		"counter (Lane + n, Step, Site, Phase), for n below Blocks and on to a multiple of "+itoa(g.sets()*g.count())+".")
	g.Signature(pointerSignature("philoxArgs"))
	args := g.Load(g.Param("t"), g.GP64())
	arg := func(name string) operand.Mem { return operand.Mem{Base: args, Disp: offset(philoxFields, name)} }
	for n := range 2 {
		g.multiplier[n] = g.constant(constants, 8*n)
		g.weyl[n] = constants.Offset(64 * (1 + n))
	}
	dst, blocks, phase, at := g.GP64(), g.GP64(), g.GP64(), g.GP64()
	g.MOVQ(arg("Dst"), dst)
	g.MOVQ(arg("Blocks"), blocks)
	g.MOVQ(arg("Phase"), phase)
	g.XORQ(at, at)
	g.Label("counters")
	g.start(arg, at, phase, constants.Offset(64*3))
	g.rounds()
	for set := range g.counter {
		g.storeCounters(operand.Mem{Base: dst, Disp: set * 2 * g.bytes()}, &g.counter[set])
	}
	g.ADDQ(operand.U32(uint64(2*g.sets()*g.bytes())), dst)
	g.ADDQ(operand.Imm(uint64(g.sets()*g.count())), at)
	g.CMPQ(at, blocks)
	g.JLT(operand.LabelRef("counters"))
	g.VZEROUPPER()
	g.RET()
}

// storeCounters stores the four words of each counter of a set, side by side.
func (g *philox) storeCounters(m operand.Mem, c *[4]reg.VecVirtual) {
	for _, pair := range [][2]reg.VecVirtual{{c[0], c[1]}, {c[2], c[3]}} {
		g.VPSLLQ(operand.Imm(32), pair[1], pair[1])
		g.merge(pair[0], pair[1])
	}
	low, high := g.reg(), g.reg() // even counters, odd ones
	g.VPUNPCKLQDQ(c[2], c[0], low)
	g.VPUNPCKHQDQ(c[2], c[0], high)
	a, b := c[0], c[2]
	if g.zmm {
		const lowHalves, highHalves, inTurn = 0x44, 0xEE, 0xD8
		g.VSHUFI64X2(operand.Imm(lowHalves), high, low, a)
		g.VSHUFI64X2(operand.Imm(inTurn), a, a, a)
		g.VSHUFI64X2(operand.Imm(highHalves), high, low, b)
		g.VSHUFI64X2(operand.Imm(inTurn), b, b, b)
	} else {
		g.VPERM2I128(operand.Imm(0x20), high, low, a)
		g.VPERM2I128(operand.Imm(0x31), high, low, b)
	}
	g.store(m, a)
	g.store(m.Offset(g.bytes()), b)
}

// merge: even = the low halves of even, the high halves of odd.
func (g *philox) merge(even, odd reg.Register) {
	if g.zmm {
		k, bits := g.K(), g.GP32()
		g.MOVL(operand.U32(0xAAAA), bits)
		g.KMOVW(bits, k)
		g.VPBLENDMD(odd, even, k, even)
		return
	}
	g.VPBLENDD(operand.Imm(0xAA), odd, even, even)
}

// rounds runs the ten rounds on all sets of counters.
func (g *philox) rounds() {
	for n := range 10 {
		if n > 0 {
			g.addInt(g.key[0], g.key[0], g.weyl[0])
			g.addInt(g.key[1], g.key[1], g.weyl[1])
		}
		for set := range g.counter {
			g.round(&g.counter[set])
		}
	}
}

// round: (h0, l0) = m0 c0, (h1, l1) = m1 c2; c = (h1^c1^k0, l1, h0^c3^k1, l0).
func (g *philox) round(c *[4]reg.VecVirtual) {
	p0, p1, h0, h1 := g.reg(), g.reg(), g.reg(), g.reg()
	g.VPMULUDQ(c[0], g.multiplier[0], p0)
	g.VPMULUDQ(c[2], g.multiplier[1], p1)
	g.VPSRLQ(operand.Imm(32), p0, h0)
	g.VPSRLQ(operand.Imm(32), p1, h1)
	g.xor3(h1, c[1], g.key[0])
	g.xor3(h0, c[3], g.key[1])
	c[0], c[1], c[2], c[3] = h1, p1, h0, p0
}

// xor3: x = x ^ y ^ z.
func (g *philox) xor3(x, y, z reg.Register) {
	if g.zmm {
		const parity = 0x96
		g.VPTERNLOGQ(operand.Imm(parity), y, z, x)
		return
	}
	g.xorInt(x, x, y)
	g.xorInt(x, x, z)
}

// storeRows merges even and odd columns and stores the four rows.
func (g *philox) storeRows(dst, column, width reg.Register) {
	at := g.GP64()
	g.LEAQ(operand.Mem{Base: dst, Index: column, Scale: 4}, at)
	for w := range 4 {
		even, odd := g.counter[0][w], g.counter[1][w]
		g.VPSLLQ(operand.Imm(32), odd, odd)
		g.merge(even, odd)
		g.store(operand.Mem{Base: at}, even)
		if w < 3 {
			g.LEAQ(operand.Mem{Base: at, Index: width, Scale: 4}, at)
		}
	}
}
