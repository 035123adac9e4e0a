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

// ShortName is the trade's short word for a format where it has one: "bf16".
func ShortName(f Format) string { return shortName(f) }
