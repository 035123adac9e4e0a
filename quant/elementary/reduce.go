package elementary

import (
	"math"
	"math/big"
	"math/bits"
	"sync"
)

// piBits is enough for the largest binary64: 1024 bits of integer part, and 2^-62
// for the worst cancellation, and 106 bits of result below that.
const piBits = 1280

// halfPi is pi/2 as an integer multiple of 2^-piBits.
var halfPi = sync.OnceValue(func() *big.Int {
	// J. Machin's formula of 1706: pi/2 = 8 arctan(1/5) - 2 arctan(1/239), with 64
	// bits to spare for the truncated divisions.
	const guard = 64
	sum := new(big.Int).Lsh(arctanInverse(5, piBits+guard), 3)
	sum.Sub(sum, new(big.Int).Lsh(arctanInverse(239, piBits+guard), 1))
	return sum.Rsh(sum, guard)
})

// arctanInverse returns arctan(1/n) 2^bits by its Taylor series, off by at most
// one a term.
func arctanInverse(n, bits int64) *big.Int {
	term := new(big.Int).Lsh(big.NewInt(1), uint(bits))
	term.Div(term, big.NewInt(n))
	square := big.NewInt(n * n)
	sum := new(big.Int)
	for k := int64(1); term.Sign() != 0; k += 2 {
		part := new(big.Int).Div(term, big.NewInt(k))
		if k&2 != 0 {
			part.Neg(part)
		}
		sum.Add(sum, part)
		term.Div(term, square)
	}
	return sum
}

// reduceHuge is reduce for |x| >= 2^20, in integers: a few microseconds.
func reduceHuge(x float64) (q int, r, rest float64) {
	u := math.Float64bits(x)
	significand := u&(1<<52-1) | 1<<52
	shift := int(u>>52&0x7FF) - 1075 + piBits // positive, since |x| >= 2^20
	n := new(big.Int).SetUint64(significand)
	n.Lsh(n, uint(shift))
	// |x| = quotient pi/2 + n, n brought to [-pi/4, pi/4).
	quotient, n := n.QuoRem(n, halfPi(), new(big.Int))
	q = int(quotient.Bit(0) | quotient.Bit(1)<<1)
	if twice := new(big.Int).Lsh(n, 1); twice.Cmp(halfPi()) >= 0 {
		n.Sub(n, halfPi())
		q++
	}
	if x < 0 {
		q = -q
		n.Neg(n)
	}
	r, rest = twoParts(n)
	return q & 3, r, rest
}

// twoParts returns n 2^-piBits as a number and what it leaves over, both cut off
// toward zero.
func twoParts(n *big.Int) (hi, lo float64) {
	hi, left := leading(n)
	lo, _ = leading(left)
	return hi, lo
}

// leading returns the 53 leading bits of n, scaled by 2^-piBits, and the rest of n.
func leading(n *big.Int) (float64, *big.Int) {
	drop := max(n.BitLen()-53, 0)
	magnitude := new(big.Int).Abs(n)
	top := magnitude.Rsh(magnitude, uint(drop))
	left := new(big.Int).Lsh(top, uint(drop))
	f := float64(top.Uint64()) // exact
	if n.Sign() < 0 {
		f = -f
		left.Neg(left)
	}
	left.Sub(n, left)
	// The exponent may pass below -1022 only where f is zero or negligible.
	e := drop - piBits
	if e+bits.Len64(top.Uint64()) < -900 {
		return 0, left
	}
	return float64(float64(f*power2(e/2)) * power2(e-e/2)), left
}
