package kernel

import "math/bits"

// Span tells how far the finite values of an operand reach, binary32 numbers all:
// each is zero or a multiple of 2^Low below 2^(Top+1), with at most Bits
// significant bits.
type Span struct {
	Bits     int
	Top, Low int
}

// empty is the span of zeros.
var empty = Span{Bits: 1, Top: -149, Low: 127}

const (
	signBit32      = 1 << 31
	exponentMask32 = 0x7f800000
	fractionMask32 = 1<<23 - 1
)

// extent gathers what a Span is made of: the bits that occur in any fraction, the
// greatest magnitude, and the least one other than zero, less one, as codes.
type extent struct {
	any, greatest, least uint32
}

var noExtent = extent{least: 1<<32 - 1}

// add takes a value, which may be infinite or NaN.
func (e *extent) add(code uint32) {
	size := code &^ signBit32
	e.any |= code
	e.greatest = max(e.greatest, size)
	e.least = min(e.least, size-1)
}

// merge takes another extent.
func (e *extent) merge(o extent) {
	e.any |= o.any
	e.greatest = max(e.greatest, o.greatest)
	e.least = min(e.least, o.least)
}

// span reads the extent of finite values.
func (e extent) span() Span {
	if e.greatest == 0 {
		return empty
	}
	unused := min(bits.TrailingZeros32(e.any&fractionMask32), 23)
	field := func(size uint32) int { return max(1, int(size>>23)) }
	return Span{
		Bits: 24 - unused,
		Top:  field(e.greatest) - 127,
		Low:  field(e.least+1) - 150 + unused,
	}
}
