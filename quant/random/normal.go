package random

import (
	"math"

	"ulpine/quant/elementary"
)

// Uniform returns a number in [0, 1) with 53 random bits, a multiple of 2^-53: the
// upper 27 bits of word 2n, then the upper 26 of word 2n+1.
//
// Uniform, Normal and Word of one Draws share words; give each quantity a Draws
// of its own.
func (d Draws) Uniform(n uint64) float64 {
	w := d.block(n / 2)
	i := (n % 2) << 1
	return uniform(w[i], w[i+1])
}

// Normal returns a draw of the standard normal distribution. Numbers 2p and
// 2p+1 are a pair made of the four words of block p: with u and v the uniforms
// 2p and 2p+1,
//
//	sqrt(-2 log(1-u)) cos(2 pi v)  and  sqrt(-2 log(1-u)) sin(2 pi v)
//
// (G. E. P. Box, M. E. Muller: A note on the generation of random normal deviates,
// Annals of Mathematical Statistics 29, 1958). 1-u is at least 2^-53, so no
// draw lies beyond 8.58 in magnitude; a true normal variable does once in 10^17.
func (d Draws) Normal(n uint64) float64 {
	w := d.block(n / 2)
	radius := math.Sqrt(float64(-2 * elementary.Log(1-uniform(w[0], w[1]))))
	angle := float64(twoPi * uniform(w[2], w[3]))
	if n%2 == 0 {
		return float64(radius * elementary.Cos(angle))
	}
	return float64(radius * elementary.Sin(angle))
}

const twoPi = 6.28318530717958647692528676655900577

// uniform joins the upper 27 bits of a and the upper 26 of b; every step is exact.
func uniform(a, b uint32) float64 {
	return float64(float64(uint64(a>>5)<<26|uint64(b>>6)) * 0x1p-53)
}

// block returns words 4q to 4q+3.
func (d Draws) block(q uint64) [4]uint32 {
	return Block([4]uint32{uint32(q), d.Step, d.Site, d.Phase | uint32(q>>32)<<8}, d.Seed)
}
