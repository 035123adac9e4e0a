package quant

import "ulpine/quant/random"

// Element is the storage type of a tensor: float32 where every value of every
// format in play is a binary32 number, else float64.
type Element interface{ float32 | float64 }

// Format is a set of real numbers, with the specials it has and their codes.
// One family of formats is one file with one type that implements it.
type Format interface {
	// String is the canonical name, the one a plan is resolved to.
	String() string
	// Limits states the extreme values, the width and the specials.
	Limits() Limits
	// Bracket encloses the magnitude of a finite exact real between the two
	// neighbouring values of the format, as if its exponent had no upper bound.
	Bracket(x Real) Bracket
}

// Coded is a format whose values have codes; every scalar family implements it.
type Coded interface {
	Format
	// Encode returns the code of a value of the format, right-aligned in
	// Limits().Bits bits; false where x has none.
	Encode(x float64) (uint64, bool)
	// Decode returns the value of a code; higher bits are ignored.
	Decode(code uint64) float64
}

// Limits are the figures of a format that a reader asks for first.
type Limits struct {
	Bits            int     // width of a code
	Exponent        int     // exponent bits, 0 when the family has none
	Fraction        int     // fraction bits
	Max             float64 // largest finite value
	Lowest          float64 // most negative finite value
	MinNormal       float64 // least positive normal value
	MinSubnormal    float64 // least positive value
	HasInfinity     bool
	HasNaN          bool
	DefaultOverflow Overflow
	Flush           bool // subnormal results become zero of their sign
	OneZero         bool // no negative zero: zero results are +0
	NoZero          bool // zero is no value: it is rounded like any other number
	InfinityIsNaN   bool // an infinity becomes NaN under every policy (posits)
	Binary32        bool // every finite value is a binary32 number
}

// Mode is a rounding direction.
type Mode uint8

// The rounding directions. The zero value is nearest-even.
const (
	NearestEven Mode = iota
	NearestAway
	TowardZero
	Up
	Down
	ToOdd
	Stochastic
)

// Variant says how stochastic rounding turns the exact fraction f of the gap
// into an integer threshold of r bits.
type Variant uint8

// The variants of stochastic rounding; T+U >= 2^r rounds away from zero, U
// uniform in 0..2^r-1.
const (
	Truncated   Variant = iota // T = floor(f 2^r): biased toward zero by up to 2^-r/2 of a gap
	Centred                    // T = floor(f 2^r + 1/2)
	CentredEven                // T = nearest-even(f 2^r): unbiased
	Equal                      // T = 2^(r-1): up and down equally probable, whatever f
)

// DefaultRandomBits is r where a plan asks for stochastic rounding without
// saying how many random bits.
const DefaultRandomBits = 16

// Rounding is a direction with what stochastic rounding needs besides.
type Rounding struct {
	Mode    Mode
	Bits    uint8 // random bits r, 1..32; at most 16 inside sums
	Variant Variant
	Source  Source // where the random bits come from; the zero value: a word for each rounding
}

// Overflow says what becomes of a result whose rounding with unbounded exponent
// lies beyond the largest finite value.
type Overflow uint8

// The overflow policies. The zero value asks for the format's own default.
const (
	FormatDefault Overflow = iota
	ToInfinity
	Saturate
	ToNaN
	Wrap
)

// Point is the arithmetic of one rounding point: which format, which rounding,
// and what happens on overflow.
type Point struct {
	Format   Format
	Rounding Rounding
	Overflow Overflow
}

// OrderKind is the order in which the terms of a sum are added.
type OrderKind uint8

// The summation orders.
const (
	Sequential OrderKind = iota
	Chunk
	Wide
	Pairwise
	Lanes
	Compensated // Kahan's, see compensated.go
	Aligned     // groups of products added as integers, see aligned.go
)

// Order is a summation order with its parameters: the chunk length, the number of
// lanes, or the terms of a group and the bits they are cut to.
type Order struct {
	Kind OrderKind
	K    int
	W    int // aligned sums: bits of the largest term that are kept
}

// Accumulate says how a sum of products is formed.
type Accumulate struct {
	Product   *Point // nil: the product is exact, one rounding a step
	Sum       Point
	Outer     *Point // where finished chunks and the bias are added; nil: Sum
	Order     Order
	Through32 bool // each addition is first rounded to binary32, nearest-even
}

// Counts tallies the range events of one rounding point.
type Counts struct {
	Overflow  uint64 // results beyond the largest finite value that became infinity or NaN
	Underflow uint64 // nonzero results that became zero (stored points only)
	Saturated uint64 // results beyond the largest finite value that became it
	NaN       uint64 // results that are NaN
}

// Add adds the tallies of o.
func (c *Counts) Add(o Counts) {
	c.Overflow += o.Overflow
	c.Underflow += o.Underflow
	c.Saturated += o.Saturated
	c.NaN += o.NaN
}

// Draws addresses random words; see package random.
type Draws = random.Draws
