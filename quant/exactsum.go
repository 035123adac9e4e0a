package quant

import "math/bits"

// The range of an exact sum: limb i weighs 2^(32 i + exactBase). Products of two
// binary64 numbers are multiples of 2^-2148 below 2^2048; their normalised
// significands reach 127 places further down.
const (
	exactBase  = -2304
	exactLimbs = (2304 + 2048 + 64) / 32
)

// exactSum adds reals without any rounding: a fixed-point number of 32-bit digits,
// each held in 64 bits so that 2^30 additions need no carry (Kulisch's long
// accumulator; digits with slack as in R. M. Neal, Fast exact summation using
// small and large superaccumulators, 2015). The zero value is +0.
type exactSum struct {
	limb      [exactLimbs]int64
	additions int
	plus      bool // +infinity was added
	minus     bool // -infinity was added
	nan       bool
}

// add adds a real that is not sticky.
func (s *exactSum) add(x Real) {
	switch {
	case x.Sticky:
		panic("quant: sum of a real that was already cut off")
	case x.Kind == NotANumber:
		s.nan = true
		return
	case x.Kind == Infinite:
		s.plus, s.minus = s.plus || !x.Neg, s.minus || x.Neg
		return
	case x.IsZero():
		return
	}
	if s.additions++; s.additions == 1<<30 {
		s.carry()
	}
	at := x.Exp - exactBase
	i, shift := at/32, uint(at%32)
	// The significand over five digits.
	d := [5]uint64{
		x.Lo << shift & 0xffffffff, x.Lo >> (32 - shift) & 0xffffffff, 0,
		x.Hi >> (32 - shift) & 0xffffffff, x.Hi >> (64 - shift),
	}
	d[2] = (x.Hi<<shift | x.Lo>>(64-shift)) & 0xffffffff
	limb := s.limb[i : i+5]
	for n, v := range d {
		if x.Neg {
			limb[n] -= int64(v)
		} else {
			limb[n] += int64(v)
		}
	}
}

// carry brings every digit but the last into 0..2^32-1; the last keeps the sign.
func (s *exactSum) carry() {
	var c int64
	for i := range s.limb {
		v := s.limb[i] + c
		if i == exactLimbs-1 {
			s.limb[i] = v
			break
		}
		s.limb[i], c = v&0xffffffff, v>>32
	}
	s.additions = 1
}

// total returns the sum, its first 128 bits and a sticky rest.
func (s *exactSum) total() Real {
	switch {
	case s.nan, s.plus && s.minus:
		return Real{Kind: NotANumber}
	case s.plus, s.minus:
		return Real{Kind: Infinite, Neg: s.minus}
	}
	s.carry()
	neg := s.limb[exactLimbs-1] < 0
	if neg {
		for i := range s.limb {
			s.limb[i] = -s.limb[i]
		}
		s.carry()
	}
	top := exactLimbs - 1
	for top >= 0 && s.limb[top] == 0 {
		top--
	}
	if top < 0 {
		return Real{}
	}
	return s.gather(neg, top)
}

// gather normalises the digits from top downwards.
func (s *exactSum) gather(neg bool, top int) Real {
	digit := func(i int) uint64 {
		if i < 0 {
			return 0
		}
		return uint64(s.limb[i])
	}
	w := [3]uint64{
		digit(top)<<32 | digit(top-1),
		digit(top-2)<<32 | digit(top-3),
		digit(top-4)<<32 | digit(top-5),
	}
	sticky := false
	for i := top - 6; i >= 0; i-- {
		sticky = sticky || s.limb[i] != 0
	}
	if bits.LeadingZeros64(w[0]) >= 64 {
		panic("quant: exact sum lost its leading digit")
	}
	return normalised(neg, w, sticky, exactBase+32*(top-3))
}
