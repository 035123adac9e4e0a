package cost

import (
	"fmt"
	"math/big"
)

// Family is how a format's arithmetic is built, which decides the rows of the
// tables it is looked up in.
type Family string

// The families. Posits and code books count as floats with their longest
// fraction; fixed point counts as integers.
const (
	Float       Family = "float"
	Integer     Family = "integer"
	Logarithmic Family = "logarithmic" // multiplies by adding
)

// Format is a number format as the cost model sees it: how many bits a value
// takes in memory and how wide its significand is in the arithmetic.
type Format struct {
	Name     string `json:"name"`
	Family   Family `json:"family"`
	Bits     int    `json:"bits"`     // of a value's own code
	Exponent int    `json:"exponent"` // exponent bits; 0 for integers
	Fraction int    `json:"fraction"` // fraction bits, without a leading one; 0 for integers
	// Block is the number of values that share a scale, 0 for none; a scale a
	// channel is a block of the channel's length. ScaleBits are the bits that a
	// block stores besides its values: scale, zero point, any metadata.
	Block     int `json:"block,omitempty"`
	ScaleBits int `json:"scale_bits,omitempty"`
	// TensorBits are stored once a tensor: a second-level scale.
	TensorBits int `json:"tensor_bits,omitempty"`
}

// FP32 is IEEE 754 binary32, what every arm is compared with.
var FP32 = Plain("fp32", 8, 23)

// Plain is a floating-point format of a sign, exponent and fraction bits.
func Plain(name string, exponent, fraction int) Format {
	return Format{Name: name, Family: Float, Bits: 1 + exponent + fraction, Exponent: exponent, Fraction: fraction}
}

// Fixed is an integer or fixed-point format of the given width.
func Fixed(name string, bits int) Format {
	return Format{Name: name, Family: Integer, Bits: bits}
}

// WithBlocks is the format under another name with a scale of scaleBits for
// every block of values.
func (f Format) WithBlocks(name string, block, scaleBits int) Format {
	f.Name, f.Block, f.ScaleBits = name, block, scaleBits
	return f
}

// Width is the exact number of bits a value takes in full blocks, block scale
// included: 8 + 8/32 = 33/4 for 8-bit values of which 32 share an 8-bit scale.
func (f Format) Width() *big.Rat {
	w := big.NewRat(int64(f.Bits), 1)
	if f.Block > 0 {
		w.Add(w, big.NewRat(int64(f.ScaleBits), int64(f.Block)))
	}
	return w
}

// BitsPerValue is Width as the nearest float64.
func (f Format) BitsPerValue() float64 {
	w, _ := f.Width().Float64()
	return w
}

// Size is the exact number of bits that a tensor takes whose blocks run along
// rows of axis values; axis 0, or one that does not divide the tensor: blocks
// run through the whole tensor. The last block of a row may be short and has a
// whole scale all the same.
func (f Format) Size(values, axis uint64) uint64 {
	if values == 0 {
		return 0
	}
	bits := values*uint64(f.Bits) + uint64(f.TensorBits)
	if f.Block == 0 {
		return bits
	}
	if axis == 0 || values%axis != 0 {
		axis = values
	}
	return bits + values/axis*ceilDiv(axis, uint64(f.Block))*uint64(f.ScaleBits)
}

// ceilDiv is a/b rounded up.
func ceilDiv(a, b uint64) uint64 { return (a + b - 1) / b }

// IsZero reports whether the format was never set.
func (f Format) IsZero() bool { return f.Name == "" && f.Bits == 0 }

// significand is the width of what enters a multiplier or an adder: fraction
// and leading bit of a float, all bits of an integer.
func (f Format) significand() int {
	if f.Family == Integer {
		return f.Bits
	}
	return f.Fraction + 1
}

// same reports whether two formats are built alike, whatever they are called:
// "E5M10" is "fp16".
func (f Format) same(g Format) bool {
	f.Name, g.Name = "", ""
	f.TensorBits, g.TensorBits = 0, 0
	return f == g
}

// reach is the number of exponent bits that a decoded value needs: a block's
// scale widens its elements' range.
func (f Format) reach() int {
	if f.Family == Float && f.Block > 0 {
		return max(f.Exponent, f.ScaleBits)
	}
	return f.Exponent
}

// heldBy reports whether g has every value of f, judged by the bit counts alone:
// biases and special codes, which differ by less than a binade or two, are
// passed over.
func (f Format) heldBy(g Format) bool {
	switch {
	case f.same(g):
		return true
	case g.Block > 0, f.Family == Logarithmic, g.Family == Logarithmic:
		return false
	case f.Family == Float && g.Family == Float:
		return f.reach() <= g.Exponent && f.Fraction <= g.Fraction
	case f.Family == Integer && g.Family == Integer:
		return f.Bits <= g.Bits
	case f.Family == Integer && g.Family == Float:
		// A two's complement code of n bits has n - 1 below its sign.
		return f.Bits-1 <= g.Fraction+1 && g.Exponent >= 5
	}
	return false
}

// wider returns the one of two formats that takes more bits, the first on a tie.
func wider(f, g Format) Format {
	if g.Bits > f.Bits {
		return g
	}
	return f
}

// maxBits bounds every field of a format: far above any use, far below overflow.
const maxBits = 1 << 12

// check says what is wrong with a format, field by field.
func (f Format) check(at string, e *fieldErrors) {
	switch f.Family {
	case Float, Integer, Logarithmic:
	default:
		e.add(at+".family", fmt.Sprintf("%q is no family of formats", f.Family),
			fmt.Sprintf("use %q, %q or %q", Float, Integer, Logarithmic))
	}
	if f.Name == "" {
		e.add(at+".name", "the format has no name", "name it as the plan does")
	}
	if f.Bits < 1 || f.Bits > maxBits {
		e.add(at+".bits", fmt.Sprintf("%d is no number of bits", f.Bits), fmt.Sprintf("use 1 to %d", maxBits))
	}
	for _, field := range []struct {
		name  string
		value int
	}{
		{"exponent", f.Exponent},
		{"fraction", f.Fraction},
		{"block", f.Block},
		{"scale_bits", f.ScaleBits},
		{"tensor_bits", f.TensorBits},
	} {
		limit := maxBits
		if field.name == "block" {
			limit = 1 << 30
		}
		if field.value < 0 || field.value > limit {
			e.add(at+"."+field.name, fmt.Sprintf("%d is out of range", field.value), fmt.Sprintf("use 0 to %d", limit))
		}
	}
	if f.ScaleBits > 0 && f.Block == 0 {
		e.add(at+".block", "the format has scale bits but no block that shares them",
			"state how many values share a scale, or put the bits into tensor_bits")
	}
}
