package main

import (
	"github.com/mmcloughlin/avo/build"
	"github.com/mmcloughlin/avo/operand"
	"github.com/mmcloughlin/avo/reg"
)

// A tile generates one kernel: rows x vectors accumulators kept in registers
// over the terms of a block, for group after group of rows.
type tile struct {
	lanes
	mode          mode
	rows, vectors int
	spacing       int
	inMemory      map[string]bool // constants read as memory operands

	args, table reg.Register // *Tile, *Constants
	constants   map[string]operand.Op
	sums        [][]reg.VecVirtual // the accumulators
	left        []reg.VecVirtual   // A[k, r] in every lane
	leftWord    []reg.VecVirtual   // R[k, r] in every lane
	leftTerm    []reg.VecVirtual   // TermR[k, r] in every lane
	right       []reg.VecVirtual   // B[k, columns] where the mode keeps it in registers
	top         [2]reg.Register    // greatest sums, and products, where the mode watches them
	events      []reg.VecVirtual   // counters of careful modes
	slots       map[string]operand.Mem
	frame       operand.Mem    // the caller's MXCSR, then the changed one
	a, r        []reg.Register // a pair of rows of A, of R
	b, v, k     reg.Register
	termR       []reg.Register // as r and v, of the products' tables
	termV       reg.Register
}

func (g *tile) arg(name string) operand.Mem {
	return operand.Mem{Base: g.args, Disp: offset(tileFields, name)}
}

// loadArg returns a field of the argument in a new general register.
func (g *tile) loadArg(name string) reg.Register {
	r := g.GP64()
	g.MOVQ(g.arg(name), r)
	return r
}

// constant returns a constant of the mode as an operand.
func (g *tile) constant(name string) operand.Op {
	c, ok := g.constants[name]
	if !ok {
		panic(g.mode.name + ": constant " + name + " is not declared")
	}
	return c
}

// vec returns a constant that is kept in a register.
func (g *tile) vec(name string) reg.Register { return g.constant(name).(reg.Register) }

// generate emits the kernel, or returns false where the spacing is too wide.
func (g *tile) generate(c *build.Context, name string) bool {
	g.Context = c
	c.Function(name)
	c.Pragma("noescape")
	c.Doc(name+" is "+g.mode.doc, "It keeps a tile of "+itoa(g.rows)+" x "+itoa(g.width())+" sums in registers.")
	c.Signature(signature(g.double))
	g.args = c.Load(c.Param("t"), c.GP64())
	g.table = g.loadArg("C")
	g.loadConstants()
	if g.mode.truncate && !g.zmm {
		g.setRounding(true)
	}

	for _, name := range g.cursors() {
		g.MOVQ(g.loadArg(name), g.cursor(name))
	}

	if g.mode.careful {
		g.startEvents()
	}
	c.Label("group")
	if !g.mode.tree {
		g.loadSums()
	}
	g.a = g.pairs("A", g.element())
	if g.mode.random {
		g.r = g.pairs("R", 4)
		g.v = g.loadArg("V")
	}
	if g.mode.terms {
		g.termR = g.pairs("TermR", 4)
		g.termV = g.loadArg("TermV")
	}
	g.b = g.loadArg("B")
	if g.mode.tree {
		g.tree()
	} else if !g.terms() {
		return false
	}
	g.storeSums()
	c.DECQ(g.cursor("Groups"))
	c.JNZ(operand.LabelRef("group"))
	if g.mode.careful {
		g.storeEvents()
	}
	if g.mode.truncate && !g.zmm {
		g.setRounding(false)
	}
	c.VZEROUPPER()
	c.RET()
	return true
}

// keepRight tells whether B[k, columns] is loaded once a term.
func (g *tile) keepRight() bool { return g.mode.keepRight || g.mode.truncate && g.zmm }

// width is the number of columns of the tile.
func (g *tile) width() int { return g.vectors * g.bytes() / g.element() }

func (g *tile) loadConstants() {
	g.constants = map[string]operand.Op{}
	for _, name := range g.mode.constants {
		m := operand.Mem{Base: g.table, Disp: offset(constantFields, name)}
		if g.inMemory[name] {
			g.constants[name] = m
			continue
		}
		x := g.reg()
		g.load(x, m)
		g.constants[name] = x
	}
}

// setRounding switches MXCSR to rounding toward zero and back to the nearest.
// Go's assembly functions are not preempted, and a signal handler starts with a
// control word of its own, so no Go code ever runs under the changed word.
func (g *tile) setRounding(towardZero bool) {
	if towardZero {
		g.frame = g.AllocLocal(8)
		roundTowardZero(g.Context, g.frame)
		return
	}
	g.LDMXCSR(g.frame)
}

// roundTowardZero keeps MXCSR in the first four bytes of frame and changes its
// rounding mode.
func roundTowardZero(c *build.Context, frame operand.Mem) {
	const towardZero = 0x6000
	t := c.GP32()
	c.STMXCSR(frame)
	c.MOVL(frame, t)
	c.ORL(operand.U32(towardZero), t)
	c.MOVL(t, frame.Offset(4))
	c.LDMXCSR(frame.Offset(4))
}

// cursors are the arguments that advance from group to group. They live in the
// frame: the loop over terms needs the general registers for pairs of rows.
func (g *tile) cursors() []string {
	names := []string{"Groups", "In", "Out", "Flags", "A"}
	if g.mode.random {
		names = append(names, "R")
	}
	if g.mode.terms {
		names = append(names, "TermR")
	}
	if g.double {
		names = append(names, "Final")
	}
	return names
}

func (g *tile) cursor(name string) operand.Mem {
	if m, ok := g.slots[name]; ok {
		return m
	}
	g.slots[name] = g.AllocLocal(8)
	return g.slots[name]
}

func (g *tile) loadCursor(name string) reg.Register {
	r := g.GP64()
	g.MOVQ(g.cursor(name), r)
	return r
}

// loadSums: sums = In * Scale.
func (g *tile) loadSums() {
	scale := operand.Mem{Base: g.table, Disp: offset(constantFields, "Scale")}
	in, row := g.loadCursor("In"), g.loadArg("InRow")
	g.sums = nil
	for range g.rows {
		var sums []reg.VecVirtual
		for v := range g.vectors {
			x := g.reg()
			g.load(x, operand.Mem{Base: in, Disp: v * g.bytes()})
			g.mul(x, x, scale)
			sums = append(sums, x)
		}
		g.sums = append(g.sums, sums)
		g.LEAQ(operand.Mem{Base: in, Index: row, Scale: uint8(g.element())}, in)
	}
	g.MOVQ(in, g.cursor("In"))
	for n := range g.watched() {
		g.top[n] = g.reg()
		g.zero(g.top[n])
	}
}

// pairs returns the addresses of the pairs of rows of the group and moves the
// cursor to the next group's.
func (g *tile) pairs(name string, size int) []reg.Register {
	stride := g.loadArg("AStride")
	ps := []reg.Register{g.loadCursor(name)}
	for range g.rows / 2 {
		p := g.GP64()
		g.LEAQ(operand.Mem{Base: ps[len(ps)-1], Index: stride, Scale: uint8(size)}, p)
		ps = append(ps, p)
	}
	g.MOVQ(ps[g.rows/2], g.cursor(name))
	return ps[:g.rows/2]
}

// terms emits the loop over the terms of the block, at least one.
func (g *tile) terms() bool {
	g.left = make([]reg.VecVirtual, g.rows)
	g.leftWord = make([]reg.VecVirtual, g.rows)
	g.leftTerm = make([]reg.VecVirtual, g.rows)
	g.right = make([]reg.VecVirtual, g.vectors)
	for r := range g.rows {
		g.left[r], g.leftWord[r], g.leftTerm[r] = g.reg(), g.reg(), g.reg()
	}
	for v := range g.vectors {
		g.right[v] = g.reg()
	}
	var chains []chain
	for r := range g.rows {
		for v := range g.vectors {
			chains = append(chains, append(chain{func() { g.operands(r, v) }}, g.mode.step(g, r, v)...))
		}
	}
	s, ok := pipeline(chains, g.mode.heads(), g.spacing)
	if !ok {
		return false
	}
	end := g.loadArg("K")
	g.ADDQ(end, end)
	g.k = g.GP64()
	g.XORQ(g.k, g.k)
	if g.spacing > 0 {
		s.first()
		g.advance(end)
		g.JGE(operand.LabelRef("last"))
	}
	g.Label("term")
	s.both()
	g.advance(end)
	g.JLT(operand.LabelRef("term"))
	if g.spacing > 0 {
		g.Label("last")
		s.last()
	}
	return true
}

// advance steps to the next term and compares; k counts elements of a pair.
func (g *tile) advance(end reg.Register) {
	g.ADDQ(operand.U32(uint64(g.vectors*g.bytes())), g.b)
	if g.mode.random {
		g.ADDQ(operand.U32(uint64(g.width()*4)), g.v)
	}
	if g.mode.terms {
		g.ADDQ(operand.U32(uint64(g.width()*4)), g.termV)
	}
	g.ADDQ(operand.Imm(2), g.k)
	g.CMPQ(g.k, end)
}

// operands loads what the chain of sum (r, v) needs and no earlier chain has
// loaded for it.
func (g *tile) operands(r, v int) {
	if r == 0 && g.keepRight() {
		g.load(g.right[v], operand.Mem{Base: g.b, Disp: v * g.bytes()})
	}
	if v > 0 {
		return
	}
	g.spread(g.left[r], g.pairElement(g.a, r, g.element()))
	if g.mode.random {
		g.spreadWord(g.leftWord[r], g.pairElement(g.r, r, 4))
	}
	if g.mode.terms {
		g.spreadWord(g.leftTerm[r], g.pairElement(g.termR, r, 4))
	}
}

func (g *tile) pairElement(pairs []reg.Register, r, size int) operand.Mem {
	return operand.Mem{Base: pairs[r/2], Index: g.k, Scale: uint8(size), Disp: r % 2 * size}
}

// factor is B[k, columns of v].
func (g *tile) factor(v int) operand.Op {
	if g.keepRight() {
		return g.right[v]
	}
	return operand.Mem{Base: g.b, Disp: v * g.bytes()}
}

// storeSums: Out (or Final) = sums * Unscale + 0, and the group's flag is set
// unless every sum is finite. The addition of +0 turns -0 into +0.
func (g *tile) storeSums() {
	unscale, zero, bad := g.reg(), g.reg(), g.reg()
	g.load(unscale, operand.Mem{Base: g.table, Disp: offset(constantFields, "Unscale")})
	g.zero(zero)
	g.zero(bad)
	for n, limit := range []string{"Limit", "TermLimit"}[:g.watched()] {
		g.poison(g.top[n], limit)
	}
	for _, row := range g.sums {
		for _, x := range row {
			g.fma(bad, x, zero)
			g.mul(x, x, unscale)
			g.add(x, x, zero)
		}
	}
	if g.double {
		g.CMPQ(g.cursor("Final"), operand.Imm(0))
		g.JNE(operand.LabelRef("narrow"))
	}
	g.storeRows("Out", g.element(), g.bytes(), g.store)
	if g.double {
		g.JMP(operand.LabelRef("stored"))
		g.Label("narrow")
		g.storeRows("Final", 4, g.bytes()/2, func(m operand.Op, x reg.Register) {
			h := g.half(x)
			g.narrow(x, h)
			g.VMOVUPS(h, m)
		})
		g.Label("stored")
	}
	g.storeFlag(bad)
}

// watched is the number of magnitudes that the mode watches.
func (g *tile) watched() int {
	switch {
	case g.mode.terms:
		return 2
	case g.mode.watch:
		return 1
	}
	return 0
}

// poison makes NaN of the sums of every lane whose greatest magnitude reached the
// limit, so that the flag stands and stays.
func (g *tile) poison(top reg.Register, name string) {
	const notLess = 5
	limit := operand.Mem{Base: g.table, Disp: offset(constantFields, name)}
	if g.zmm {
		k := g.K()
		g.pick(g.VCMPPS, g.VCMPPD)(operand.Imm(notLess), limit, top, k)
		if g.double {
			g.VPMOVM2Q(k, top)
		} else {
			g.VPMOVM2D(k, top)
		}
	} else {
		g.pick(g.VCMPPS, g.VCMPPD)(operand.Imm(notLess), limit, top, top)
	}
	for _, row := range g.sums {
		for _, x := range row {
			g.or(x, x, top)
		}
	}
}

func (g *tile) storeRows(name string, size, bytes int, store func(operand.Op, reg.Register)) {
	out, row := g.loadCursor(name), g.loadArg(name+"Row")
	for _, sums := range g.sums {
		for v, x := range sums {
			store(operand.Mem{Base: out, Disp: v * bytes}, x)
		}
		g.LEAQ(operand.Mem{Base: out, Index: row, Scale: uint8(size)}, out)
	}
	g.MOVQ(out, g.cursor(name))
}

// half is the register of half the width that holds x narrowed to binary32.
func (g *tile) half(x reg.Register) reg.Register {
	if g.zmm {
		return x.(reg.Vec).AsY()
	}
	return x.(reg.Vec).AsX()
}

// narrow: h = x rounded to binary32; the values are binary32 already.
func (g *tile) narrow(x, h reg.Register) {
	if g.zmm {
		g.VCVTPD2PS(x, h)
	} else {
		g.VCVTPD2PSY(x, h)
	}
}

// storeFlag: *flags++ = any lane of bad is NaN.
func (g *tile) storeFlag(bad reg.Register) {
	any := g.GP32()
	const unordered = 3
	switch {
	case g.zmm:
		k := g.K()
		g.pick(g.VCMPPS, g.VCMPPD)(operand.Imm(unordered), bad, bad, k)
		g.KMOVW(k, any)
	default:
		g.pick(g.VCMPPS, g.VCMPPD)(operand.Imm(unordered), bad, bad, bad)
		if g.double {
			g.VMOVMSKPD(bad, any)
		} else {
			g.VMOVMSKPS(bad, any)
		}
	}
	g.TESTL(any, any)
	flags := g.loadCursor("Flags")
	g.SETNE(operand.Mem{Base: flags})
	g.INCQ(g.cursor("Flags"))
}
