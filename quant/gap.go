package quant

import (
	"math/big"
	"math/bits"
)

// gapFraction returns where |x| lies between two values toward <= |x| < away:
// floor of the fraction of the gap times 2^64, and whether more follows. The gap of
// a table or of a logarithmic format is no power of two, so it takes a division.
//
// A sticky x, a quotient cut off at 128 bits, gives the fraction of what is kept.
// Decisions on it, which are multiples of 2^-33 of the gap, are those of the whole
// while away is below 2^40 times toward: they are then multiples of the last bit
// kept, and no cut off rest reaches the next of them.
func gapFraction(x Real, toward, away float64) (fraction uint64, rest bool) {
	rest = x.Sticky
	x.Neg, x.Sticky = false, false
	num := x.Add(Exactly(toward).Negated())
	den := Exactly(away).Add(Exactly(toward).Negated())
	if num.IsZero() {
		return 0, rest
	}
	if den.Lo != 0 || den.Sticky || num.Sticky {
		f, more := longFraction(x, toward, away)
		return f, more || rest
	}
	// num = N 2^e, den = d 2^64 2^(e+s) with d normalised: f 2^64 = N/d 2^-s.
	var high uint64
	hi := num.Hi
	if hi >= den.Hi {
		high, hi = 1, hi-den.Hi
	}
	q, r := bits.Div64(hi, num.Lo, den.Hi)
	rest = rest || r != 0
	switch s := uint(den.Exp - num.Exp); {
	case s == 0:
		return q, rest
	case s <= 64:
		return high<<(64-s) | q>>s, rest || q<<(64-s) != 0
	default:
		return high >> (s - 64), rest || q != 0 || high != 0 && s > 64
	}
}

// longFraction is gapFraction for gaps of more than 64 significant bits and places
// in them of more than 128.
func longFraction(x Real, toward, away float64) (fraction uint64, rest bool) {
	exact := func(x float64) *big.Rat { return new(big.Rat).SetFloat64(x) }
	n := new(big.Int).SetUint64(x.Hi)
	n.Lsh(n, 64).Or(n, new(big.Int).SetUint64(x.Lo))
	f := new(big.Rat).SetInt(n)
	if x.Exp < 0 {
		f.SetFrac(n, new(big.Int).Lsh(big.NewInt(1), uint(-x.Exp)))
	} else {
		f.SetInt(n.Lsh(n, uint(x.Exp)))
	}
	f.Sub(f, exact(toward)).Quo(f, new(big.Rat).Sub(exact(away), exact(toward)))
	q, r := n.QuoRem(n.Lsh(f.Num(), 64), f.Denom(), new(big.Int))
	return q.Uint64(), r.Sign() != 0
}

// between is the bracket of |x| between two values of which the lower one's code is
// odd or not.
func between(x Real, toward, away float64, odd bool) Bracket {
	b := Bracket{Toward: toward, Away: away, Odd: odd}
	b.Fraction, b.Rest = gapFraction(x, toward, away)
	b.Exact = b.Fraction == 0 && !b.Rest
	return b
}
