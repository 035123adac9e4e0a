package main

import (
	"strconv"
	"strings"

	"github.com/mmcloughlin/avo/attr"
	"github.com/mmcloughlin/avo/build"
	"github.com/mmcloughlin/avo/gotypes"
	"github.com/mmcloughlin/avo/operand"
	"github.com/mmcloughlin/avo/reg"
)

const readOnly = attr.RODATA | attr.NOPTR

func itoa(n int) string { return strconv.Itoa(n) }

// A loop is a function over slices of one length, a multiple of a register's lanes.
type loop struct {
	lanes
	name, doc, signature string
	emit                 func(g *loop)
}

func (g *loop) generate(c *build.Context, name string) {
	g.Context = c
	c.Function(name)
	c.Pragma("noescape")
	c.Doc(strings.Split(name+" "+g.doc, "\n")...)
	s, err := gotypes.ParseSignatureInPackage(declared, g.signature)
	if err != nil {
		panic(err)
	}
	c.Signature(s)
	g.emit(g)
}

// base loads the address of a slice argument.
func (g *loop) base(name string) reg.Register {
	return g.Load(g.Param(name).Base(), g.GP64())
}

// length loads the length of a slice argument.
func (g *loop) length(name string) reg.Register {
	return g.Load(g.Param(name).Len(), g.GP64())
}

// at is the element i of the slice at base.
func (g *loop) at(base, i reg.Register, size int) operand.Mem {
	return operand.Mem{Base: base, Index: i, Scale: uint8(size)}
}

// each runs body for i = 0, step, 2 step, ... below n.
func (g *loop) each(n reg.Register, step int, body func(i reg.Register)) {
	i := g.GP64()
	g.XORQ(i, i)
	g.Label("next")
	body(i)
	g.ADDQ(operand.Imm(uint64(step)), i)
	g.CMPQ(i, n)
	g.JLT(operand.LabelRef("next"))
}

// return_ ends the function.
func (g *loop) end() {
	g.VZEROUPPER()
	g.RET()
}

// literal is a vector of one 32-bit value, in a register.
func (g *loop) literal(v uint32) reg.VecVirtual {
	bits, r, x := g.GP32(), g.reg(), g.XMM()
	g.MOVL(operand.U32(v), bits)
	g.VMOVD(bits, x)
	g.VPBROADCASTD(x, r)
	return r
}

// loops are the elementwise functions; their lengths must be multiples of 16 and
// not zero.
var loops = []loop{
	{
		name: "measure", signature: "func(x []float32, e *[48]uint32)",
		doc: "gathers an extent lane by lane: e[0:16] bits that occur, e[16:32] greatest\nmagnitudes, e[32:48] least magnitudes less one.",
		emit: func(g *loop) {
			x, n := g.base("x"), g.length("x")
			any, greatest, least := g.reg(), g.reg(), g.reg()
			g.zero(any)
			g.zero(greatest)
			magnitude, ones := g.literal(1<<31-1), g.literal(1<<32-1)
			g.VMOVUPS(ones, least)
			g.each(n, g.bytes()/4, func(i reg.Register) {
				v, w := g.reg(), g.reg()
				g.load(v, g.at(x, i, 4))
				g.orInt(any, any, v)
				g.andInt(v, v, magnitude)
				g.VPMAXUD(v, greatest, greatest)
				g.addInt(w, v, ones)
				g.VPMINUD(w, least, least)
			})
			e := g.Load(g.Param("e"), g.GP64())
			for n, v := range []reg.Register{any, greatest, least} {
				for at := 0; at < 64; at += g.bytes() {
					g.store(operand.Mem{Base: e, Disp: 64*n + at}, v)
				}
			}
			g.end()
		},
	},
	{
		name: "widen", signature: "func(dst []float64, src []float32)",
		doc: "converts src to binary64.",
		emit: func(g *loop) {
			dst, src, n := g.base("dst"), g.base("src"), g.length("src")
			g.each(n, g.bytes()/8, func(i reg.Register) {
				v := g.reg()
				g.VCVTPS2PD(g.at(src, i, 4), v)
				g.VMOVUPD(v, g.at(dst, i, 8))
			})
			g.end()
		},
	},
	{
		name: "interleave", signature: "func(dst, first, second []float32, factor float32)",
		doc: "writes first[k] factor and second[k] factor by turns to dst.",
		emit: func(g *loop) {
			dst, first, second, n := g.base("dst"), g.base("first"), g.base("second"), g.length("first")
			factor := g.reg()
			m, err := g.Param("factor").Resolve()
			if err != nil {
				panic(err)
			}
			g.spread(factor, m.Addr)
			i := g.GP64()
			g.XORQ(i, i)
			g.Label("next")
			// Halves of registers of 256 bits: the width at which lanes cross simply.
			x, y, low, high := g.YMM(), g.YMM(), g.YMM(), g.YMM()
			f := factor
			g.VMULPS(g.at(first, i, 4), half(f, g.zmm), x)
			g.VMULPS(g.at(second, i, 4), half(f, g.zmm), y)
			g.VUNPCKLPS(y, x, low)
			g.VUNPCKHPS(y, x, high)
			g.VPERM2F128(operand.Imm(0x20), high, low, x)
			g.VPERM2F128(operand.Imm(0x31), high, low, y)
			g.VMOVUPS(x, g.at(dst, i, 8))
			g.VMOVUPS(y, g.at(dst, i, 8).Offset(32))
			g.ADDQ(operand.Imm(8), i)
			g.CMPQ(i, n)
			g.JLT(operand.LabelRef("next"))
			g.end()
		},
	},
	{
		name: "transpose", signature: "func(dst, src []float32, dstRow, srcRow, blocks int)",
		doc: "writes dst[k*dstRow + j] = src[j*srcRow + k] for j below 8, k below 8*blocks.",
		emit: func(g *loop) {
			dst, src := g.base("dst"), g.base("src")
			load := func(name string) reg.Register { return g.Load(g.Param(name), g.GP64()) }
			dstRow, srcRow, blocks := load("dstRow"), load("srcRow"), load("blocks")
			g.Label("next")
			at := g.GP64()
			g.MOVQ(src, at)
			var rows [8]reg.VecVirtual
			for j := range rows {
				rows[j] = g.YMM()
				g.VMOVUPS(operand.Mem{Base: at}, rows[j])
				if j < 7 {
					g.LEAQ(g.at(at, srcRow, 4), at)
				}
			}
			for _, column := range g.transpose8(rows) {
				g.VMOVUPS(column, operand.Mem{Base: dst})
				g.LEAQ(g.at(dst, dstRow, 4), dst)
			}
			g.ADDQ(operand.Imm(32), src)
			g.DECQ(blocks)
			g.JNZ(operand.LabelRef("next"))
			g.end()
		},
	},
	{
		name: "copyColumns", signature: "func(dst, data []float32, rows []int32, width int)",
		doc: "copies eight neighbours a row: dst[k*width + j] = data[rows[k] + j] for j below 8.",
		emit: func(g *loop) {
			dst, data, rows, n := g.base("dst"), g.base("data"), g.base("rows"), g.length("rows")
			width := g.Load(g.Param("width"), g.GP64())
			g.each(n, 1, func(k reg.Register) {
				at, v := g.GP64(), g.YMM()
				g.MOVLQSX(g.at(rows, k, 4), at)
				g.VMOVUPS(g.at(data, at, 4), v)
				g.VMOVUPS(v, operand.Mem{Base: dst})
				g.LEAQ(g.at(dst, width, 4), dst)
			})
			g.end()
		},
	},
	{
		name: "gatherColumns", signature: "func(dst, data []float32, rows, columns []int32, width int)",
		doc: "gathers eight columns a row: dst[k*width + j] = data[rows[k] + columns[j]] for j below 8.",
		emit: func(g *loop) {
			dst, data, rows, columns := g.base("dst"), g.base("data"), g.base("rows"), g.base("columns")
			n, width := g.length("rows"), g.Load(g.Param("width"), g.GP64())
			index := g.YMM()
			g.VMOVDQU(operand.Mem{Base: columns}, index)
			g.each(n, 1, func(k reg.Register) {
				at, v, mask := g.GP64(), g.YMM(), g.YMM()
				g.MOVLQSX(g.at(rows, k, 4), at)
				g.LEAQ(g.at(data, at, 4), at)
				g.zero(v) // live with the mask: a gather's registers must differ
				g.VPCMPEQD(mask, mask, mask)
				g.VGATHERDPS(mask, operand.Mem{Base: at, Index: index, Scale: 4}, v)
				g.VMOVUPS(v, operand.Mem{Base: dst})
				g.LEAQ(g.at(dst, width, 4), dst)
			})
			g.end()
		},
	},
	{
		name: "addNative", signature: "func(total, chunk []float32)",
		doc: "adds chunk to total.",
		emit: func(g *loop) {
			total, chunk, n := g.base("total"), g.base("chunk"), g.length("total")
			g.each(n, g.bytes()/4, func(i reg.Register) {
				v := g.reg()
				g.load(v, g.at(total, i, 4))
				g.add(v, v, g.at(chunk, i, 4))
				g.store(g.at(total, i, 4), v)
			})
			g.end()
		},
	},
	{
		name: "roundNearest32", signature: "func(dst, src []float32, c *Constants, t *[2]uint64)", emit: emitNearest32,
		doc: "is dst = R(src), R nearest-even to the grid of c's sums, t as in slices.go.",
	},
	{
		name: "roundStochastic32", signature: "func(dst, src []float32, words []uint32, c *Constants, t *[2]uint64)", emit: emitStochastic32,
		doc: "is dst = S(src), S stochastic to the grid of c's sums, t as in slices.go.",
	},
	{
		name: "roundNearest64", signature: "func(dst []float32, src []float64, c *Constants, t *[2]uint64)", emit: emitNearest64,
		doc: "is dst = R(src), R nearest-even to the grid of c's sums, t as in slices.go.",
	},
	{
		name: "roundStochastic64", signature: "func(dst []float32, src []float64, words []uint32, c *Constants, t *[2]uint64)", emit: emitStochastic64,
		doc: "is dst = S(src), S stochastic to the grid of c's sums, t as in slices.go.",
	},
	{
		name: "scale64", signature: "func(y []float64, alpha float64, c *Constants, t *[2]uint64)", emit: emitScale64,
		doc: "is y = alpha y rounded to odd, t as in slices.go.",
	},
	{
		name: "add64", signature: "func(x, b []float64, factor float64, c *Constants, t *[2]uint64)", emit: emitAdd64,
		doc: "is x = x + factor b rounded to odd, factor 1 or -1, t as in slices.go.",
	},
	{
		name: "fetch", signature: "func(x []float32)",
		doc: "asks for the cache lines of x, which stay as they are.",
		emit: func(g *loop) {
			x, n := g.base("x"), g.length("x")
			const line = 16
			g.each(n, line, func(i reg.Register) { g.PREFETCHT0(g.at(x, i, 4)) })
			g.end()
		},
	},
	{
		name: "addNearest", signature: "func(total, chunk []float32, c *Constants)",
		doc:  "is total = R(binary32(total + chunk)), R nearest-even to the grid of c's sums.",
		emit: func(g *loop) { emitAdd(g, false) },
	},
	{
		name: "addOdd", signature: "func(total, chunk []float32, c *Constants)",
		doc:  "is total = R(total + chunk), R nearest-even to the grid of c's sums of the exact sum.",
		emit: func(g *loop) { emitAdd(g, true) },
	},
}

// emitAdd adds slices and rounds to the grid; odd: the sum is rounded to odd first,
// see tile.plusOdd.
func emitAdd(g *loop, odd bool) {
	total, chunk, n := g.base("total"), g.base("chunk"), g.length("total")
	table := g.Load(g.Param("c"), g.GP64())
	constant := func(name string) reg.VecVirtual {
		r := g.reg()
		g.load(r, operand.Mem{Base: table, Disp: offset(constantFields, name)})
		return r
	}
	least, grow, mask := constant("SumLeast"), constant("SumGrow"), constant("ExponentMask")
	scale, unscale := constant("Scale"), constant("Unscale")
	g.each(n, g.bytes()/4, func(i reg.Register) {
		v, e := g.reg(), g.reg()
		g.load(v, g.at(total, i, 4))
		g.mul(v, v, scale)
		if odd {
			p := g.reg()
			g.mul(p, scale, g.at(chunk, i, 4))
			g.plusOdd(v, p)
		} else {
			g.fma(v, scale, g.at(chunk, i, 4))
		}
		g.and(e, v, mask)
		g.max(e, e, least)
		g.fma(v, e, grow)
		g.fnma(v, e, grow)
		g.mul(v, v, unscale)
		g.store(g.at(total, i, 4), v)
	})
	g.end()
}

// plusOdd: sum += p rounded to odd, see tile.plusOdd.
func (g *loop) plusOdd(sum, p reg.Register) {
	x, w, e, odd := g.reg(), g.reg(), g.reg(), g.reg()
	const notEqual = 12
	g.add(x, sum, p)
	g.sub(w, x, sum)
	g.sub(e, x, w)
	g.sub(e, sum, e)
	g.sub(w, p, w)
	g.add(e, e, w)
	g.zero(odd)
	if g.zmm {
		k := g.K()
		g.VCMPPS(operand.Imm(notEqual), odd, e, k)
		g.VPMOVM2D(k, odd)
	} else {
		g.VCMPPS(operand.Imm(notEqual), odd, e, odd)
	}
	g.xorInt(e, e, x)
	g.VPSRAD(operand.Imm(31), e, e)
	g.andInt(e, e, odd)
	g.addInt(x, x, e)
	g.VPSRLD(operand.Imm(31), odd, odd)
	g.orInt(sum, x, odd)
}

// transpose8 transposes eight registers of eight lanes: pairs of lanes, pairs of
// pairs, halves.
func (g *loop) transpose8(r [8]reg.VecVirtual) (t [8]reg.VecVirtual) {
	for n := range t {
		t[n] = g.YMM()
	}
	for n := 0; n < 8; n += 2 {
		g.VUNPCKLPS(r[n+1], r[n], t[n])
		g.VUNPCKHPS(r[n+1], r[n], t[n+1])
	}
	for n := 0; n < 8; n += 4 {
		g.VUNPCKLPD(t[n+2], t[n], r[n])
		g.VUNPCKHPD(t[n+2], t[n], r[n+1])
		g.VUNPCKLPD(t[n+3], t[n+1], r[n+2])
		g.VUNPCKHPD(t[n+3], t[n+1], r[n+3])
	}
	for n := range 4 {
		g.VPERM2F128(operand.Imm(0x20), r[n+4], r[n], t[n])
		g.VPERM2F128(operand.Imm(0x31), r[n+4], r[n], t[n+4])
	}
	return t
}

// half is the low 256 bits of a register.
func half(r reg.VecVirtual, zmm bool) reg.Register {
	if zmm {
		return r.AsY()
	}
	return r
}
