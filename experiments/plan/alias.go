package plan

import "ulpine/quant"

// A resolved plan holds arithmetic in the types of package quant. Those who read
// plans but do no arithmetic need only these of them.
type (
	// Point is what happens at a rounding point.
	Point = quant.Point
	// Accumulate is how a sum of products is formed.
	Accumulate = quant.Accumulate
	// Format is a number format.
	Format = quant.Format
)

// RandomBits is the number of random bits that one rounding at p draws.
func RandomBits(p Point) int {
	if p.Rounding.Mode != quant.Stochastic {
		return 0
	}
	return int(p.Rounding.Bits)
}

// Shape is how a format takes its bits: Family is "float", "integer" or
// "logarithmic"; Block values share ScaleBits, 0 where none do; TensorBits are
// stored once a tensor.
type Shape struct {
	Family                       string
	Bits, Exponent, Fraction     int
	Block, ScaleBits, TensorBits int
}

// SharesScales reports whether values of a format share scales: blocks and scaled
// integers, which only operands of products have.
func SharesScales(f Format) bool {
	_, shared := f.(quant.Blocked)
	return shared
}

// ShapeOf is the shape of a format. Posits count as floats with their longest
// fraction, lists of values as floats of a fraction as long as their codes; a format
// without exponent bits is an integer to the arithmetic.
func ShapeOf(f Format) Shape {
	if b, ok := f.(quant.Block); ok {
		spec := b.Spec()
		s := ShapeOf(spec.Element)
		s.Block, s.ScaleBits = spec.Size, spec.Scale.Limits().Bits
		if spec.Tensor {
			s.TensorBits = 32
		}
		return s
	}
	l := f.Limits()
	s := Shape{Family: "float", Bits: l.Bits, Exponent: l.Exponent, Fraction: l.Fraction}
	switch f.(type) {
	case quant.Logarithmic:
		s.Family = "logarithmic"
	case quant.Table:
		s.Exponent, s.Fraction = 0, l.Bits
	case quant.Posit:
		s.Exponent, s.Fraction = max(l.Exponent, 1), max(l.Fraction, l.Bits-5)
	default:
		if l.Exponent == 0 {
			s.Family, s.Fraction = "integer", 0
		}
	}
	return s
}

// ShortName is the trade's short word for a format where it has one: "bf16".
func ShortName(f Format) string { return shortName(f) }
