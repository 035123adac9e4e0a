package kernel

import "math"

// Grid is a binary floating-point format as the kernels see it: the values n 2^q
// of at most Fraction+1 bits with q >= MinExponent - Fraction, up to Max.
type Grid struct {
	Fraction    int     // fraction bits m
	MinExponent int     // exponent of the least normal value
	Max         float64 // largest finite value
}

// quantum is the exponent of the least subnormal value.
func (g Grid) quantum() int { return g.MinExponent - g.Fraction }

// top is the exponent of the largest finite value.
func (g Grid) top() int { return exponent(g.Max) }

// full tells whether the top binade has no code beyond the largest finite value,
// so that overflow is reaching the next power of two.
func (g Grid) full() bool {
	return g.Max == math.Ldexp(2-math.Ldexp(1, -g.Fraction), g.top())
}

// exponent is floor(log2 |x|) of a finite x that is not zero.
func exponent(x float64) int {
	_, e := math.Frexp(x)
	return e - 1
}

// lane is the binary format of a vector's elements.
type lane struct {
	fraction int // fraction bits
	top      int // exponent of the largest binade
}

var (
	single = lane{23, 127}
	double = lane{52, 1023}
)

// nearestScale is the exponent of the power of two by which sums (or products) of
// the grid are multiplied where they are rounded to nearest-even by the sequences
// that multiply by 2^s, s = fraction - m: values of the top binade and beyond then
// overflow in the sequence and stick. A grid with as many exponents as the lane is
// not scaled, never down: its tiles are handed back 2^s below the top.
func (l lane) nearestScale(g Grid) int {
	return max(0, l.top+1-(l.fraction-g.Fraction)-g.top())
}

// carryScale is the same where rounding is a carry into the exponent: overflow is
// the lane's own. A top binade that is not full is handed back as a whole.
func (l lane) carryScale(g Grid) int {
	if g.full() {
		return l.top - g.top()
	}
	return l.top + 1 - g.top()
}
