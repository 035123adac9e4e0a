package main

import (
	"github.com/mmcloughlin/avo/build"
	"github.com/mmcloughlin/avo/operand"
	"github.com/mmcloughlin/avo/reg"
)

// lanes emits vector instructions of one width and one element type, so that a
// kernel is written once for both. Every method names its result first and its
// sources in the order of the formula in its comment; the order of Go assembly
// (result last, the sources of a subtraction swapped) stays inside this file.
// The last source may be memory.
type lanes struct {
	*build.Context
	zmm    bool // 512-bit registers (AVX-512 F, BW, DQ), else 256-bit (AVX2, FMA)
	double bool // binary64 lanes, else binary32
}

type emitter func(...operand.Op)

func (l lanes) bytes() int {
	if l.zmm {
		return 64
	}
	return 32
}

func (l lanes) element() int {
	if l.double {
		return 8
	}
	return 4
}

// reg returns a new virtual register.
func (l lanes) reg() reg.VecVirtual {
	if l.zmm {
		return l.ZMM()
	}
	return l.YMM()
}

// pick chooses by element type.
func (l lanes) pick(single, double emitter) emitter {
	if l.double {
		return double
	}
	return single
}

// integer chooses among the three names of a bitwise instruction.
func (l lanes) integer(ymm func(y, x, dst operand.Op), single, double emitter) emitter {
	if l.zmm {
		return l.pick(single, double)
	}
	return func(ops ...operand.Op) { ymm(ops[0], ops[1], ops[2]) }
}

// Moves.

func (l lanes) load(dst reg.Register, m operand.Op)  { l.pick(l.VMOVUPS, l.VMOVUPD)(m, dst) }
func (l lanes) store(m operand.Op, src reg.Register) { l.pick(l.VMOVUPS, l.VMOVUPD)(src, m) }
func (l lanes) zero(dst reg.Register)                { l.integer(l.VPXOR, l.VPXORD, l.VPXORQ)(dst, dst, dst) }

// spread: every lane = the element at m.
func (l lanes) spread(dst reg.Register, m operand.Op) {
	l.pick(l.VBROADCASTSS, l.VBROADCASTSD)(m, dst)
}

// spreadWord: every 32-bit lane = the word at m.
func (l lanes) spreadWord(dst reg.Register, m operand.Op) { l.VPBROADCASTD(m, dst) }

// Floating point, each result rounded once.

func (l lanes) mul(dst, x reg.Register, y operand.Op) { l.pick(l.VMULPS, l.VMULPD)(y, x, dst) }
func (l lanes) add(dst, x reg.Register, y operand.Op) { l.pick(l.VADDPS, l.VADDPD)(y, x, dst) }
func (l lanes) sub(dst, x reg.Register, y operand.Op) { l.pick(l.VSUBPS, l.VSUBPD)(y, x, dst) }
func (l lanes) fma(dst, x reg.Register, y operand.Op) {
	l.pick(l.VFMADD231PS, l.VFMADD231PD)(y, x, dst)
}

func (l lanes) fnma(dst, x reg.Register, y operand.Op) {
	l.pick(l.VFNMADD231PS, l.VFNMADD231PD)(y, x, dst)
}

// max: the greater of two positive numbers. The first source is y, so that a
// NaN in x stays out of the result only where no caller has one.
func (l lanes) max(dst, x reg.Register, y operand.Op) { l.pick(l.VMAXPS, l.VMAXPD)(y, x, dst) }

// Bits.

// and: x & y. For 32-bit and 64-bit lanes alike it is the floating-point
// instruction, because its neighbours are: changing domains costs a cycle.
func (l lanes) and(dst, x reg.Register, y operand.Op) { l.pick(l.VANDPS, l.VANDPD)(y, x, dst) }

// or: x | y.
func (l lanes) or(dst, x reg.Register, y operand.Op) { l.pick(l.VORPS, l.VORPD)(y, x, dst) }

// andInt: x & y between integer instructions.
func (l lanes) andInt(dst, x reg.Register, y operand.Op) {
	l.integer(l.VPAND, l.VPANDD, l.VPANDQ)(y, x, dst)
}

// orInt: x | y between integer instructions.
func (l lanes) orInt(dst, x reg.Register, y operand.Op) {
	l.integer(l.VPOR, l.VPORD, l.VPORQ)(y, x, dst)
}

// xorInt: x ^ y between integer instructions.
func (l lanes) xorInt(dst, x reg.Register, y operand.Op) {
	l.integer(l.VPXOR, l.VPXORD, l.VPXORQ)(y, x, dst)
}

// addInt: x + y of the lanes as integers.
func (l lanes) addInt(dst, x reg.Register, y operand.Op) { l.pick(l.VPADDD, l.VPADDQ)(y, x, dst) }

// subInt: x - y of the lanes as integers.
func (l lanes) subInt(dst, x reg.Register, y operand.Op) { l.pick(l.VPSUBD, l.VPSUBQ)(y, x, dst) }

// shiftLeft, shiftRight: logical shifts of each lane of x by the count in the
// same lane of n, zero for counts beyond the lane.
func (l lanes) shiftLeft(dst, x reg.Register, n operand.Op) { l.pick(l.VPSLLVD, l.VPSLLVQ)(n, x, dst) }

func (l lanes) shiftRight(dst, x reg.Register, n operand.Op) { l.pick(l.VPSRLVD, l.VPSRLVQ)(n, x, dst) }
