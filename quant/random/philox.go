// Package random yields counter-based random words: every word is a pure
// function of a key and a counter, so any worker, in any order, on any machine
// draws the same bits.
//
// The generator is Philox4x32-10 (J. K. Salmon, M. A. Moraes, R. O. Dror,
// D. E. Shaw: Parallel random numbers: as easy as 1, 2, 3, SC 2011).
package random

import "math/bits"

// The multipliers and Weyl increments of Philox4x32 (Salmon et al. 2011, table 2).
const (
	mul0  = 0xD2511F53
	mul1  = 0xCD9E8D57
	weyl0 = 0x9E3779B9
	weyl1 = 0xBB67AE85
)

// Block returns the four words of Philox4x32 with ten rounds for a counter and
// a 64-bit key whose low half is the first key word.
func Block(counter [4]uint32, key uint64) [4]uint32 {
	k0, k1 := uint32(key), uint32(key>>32)
	c0, c1, c2, c3 := counter[0], counter[1], counter[2], counter[3]
	for range 10 {
		h0, l0 := bits.Mul32(mul0, c0)
		h1, l1 := bits.Mul32(mul1, c2)
		c0, c1, c2, c3 = h1^c1^k0, l1, h0^c3^k1, l0
		k0 += weyl0
		k1 += weyl1
	}
	return [4]uint32{c0, c1, c2, c3}
}

// Stream names one of the independent streams of a replicate. Streams never
// share words: data drawn from the rounding stream would correlate with its own
// rounding and make stochastic sums stagnate.
type Stream uint32

// The streams of a replicate.
const (
	Data Stream = iota + 1
	Weights
	Order
	RoundingBits
	Augmentation
	Dropout
)

// Derive returns the 64-bit key of one stream of a seed: the first two words, low
// half first, of the block with counter (stream, 0x756c7069, 0x6e65, 0) and the
// seed as key. The streams are numbered from 1: data, weights, order, rounding
// bits, augmentation, dropout. The two constants, the letters "ulpine", only keep
// these blocks apart from those of small counters.
func Derive(seed uint64, s Stream) uint64 {
	w := Block([4]uint32{uint32(s), 0x756c7069, 0x6e65, 0}, seed)
	return uint64(w[0]) | uint64(w[1])<<32
}

// Draws addresses the random words of one rounding point in one step: key =
// Seed, counter = (n div 4, Step, Site, Phase).
type Draws struct {
	Seed  uint64 // the replicate's rounding key
	Step  uint32 // training step; the epoch in an evaluation
	Site  uint32 // layer<<8 | point
	Phase uint32 // at most 8 bits: training, evaluation of one split, ...
}

// Word returns word n of the stream: word n mod 4 of the block whose counter is
// (n div 4, Step, Site, Phase). Bits 32 and up of n div 4 enter the upper 24
// bits of the last counter word, so no two elements share a word.
func (d Draws) Word(n uint64) uint32 { return d.Words(n / 4)[n%4] }

// Words returns words 4q to 4q+3 of the stream.
func (d Draws) Words(q uint64) [4]uint32 {
	return Block([4]uint32{uint32(q), d.Step, d.Site, d.Phase | uint32(q>>32)<<8}, d.Seed)
}

// Lane returns word k of lane i, for the tables R[k,i] and V[k,j] of random
// bits inside sums: word k mod 4 of counter (i, Step, Site, Phase | (k div 4)<<8).
// The lane has a counter word of its own, so the words of a lane do not depend
// on how many lanes or terms a product has.
func (d Draws) Lane(k, i uint32) uint32 { return d.LaneWords(k/4, i)[k%4] }

// LaneWords returns words 4q to 4q+3 of lane i.
func (d Draws) LaneWords(q, i uint32) [4]uint32 {
	return Block([4]uint32{i, d.Step, d.Site, d.Phase | q<<8}, d.Seed)
}
