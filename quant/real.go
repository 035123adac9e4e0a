package quant

// Real is an exact real, or a special: (-1)^Neg x (Hi:Lo) x 2^Exp, the 128-bit
// significand Hi:Lo normalised (top bit set) unless zero; Sticky says that a
// nonzero rest below one unit of Lo was cut off.
type Real struct {
	Kind   Kind
	Neg    bool
	Sticky bool
	Hi, Lo uint64
	Exp    int
}

// Kind separates finite reals from the specials.
type Kind uint8

// The kinds.
const (
	Finite Kind = iota // zero included: Hi = Lo = 0
	Infinite
	NotANumber
)

// Bracket encloses a magnitude: Toward <= |x| < Away, two neighbours of the
// format, and how far x lies between them.
type Bracket struct {
	Toward, Away float64 // magnitudes; equal Toward = |x| exactly when Exact
	Exact        bool
	Odd          bool   // the code of Toward is odd
	Fraction     uint64 // floor of the fraction of the gap times 2^64
	Rest         bool   // the fraction has further bits below
}
