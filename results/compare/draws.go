package compare

import "math/bits"

// draws are random words by address: word i of a stream depends on the stream's
// seed and i alone, so that resamples come out the same in any order and on any
// machine. The mixing is that of splitmix64 (Steele, Lea and Flood, Fast splittable
// pseudorandom number generators, OOPSLA 2014, 453-472; the constants are those of
// its variant 13 of Stafford's mixers, from memory).
type draws uint64

const golden = 0x9e3779b97f4a7c15 // 2^64 over the golden ratio, odd

// stream is one of many independent streams of the same seed.
func (d draws) stream(i int) draws { return draws(d.word(uint64(i)) | 1) }

func (d draws) word(i uint64) uint64 {
	x := uint64(d) + (i+1)*golden
	x = (x ^ x>>30) * 0xbf58476d1ce4e5b9
	x = (x ^ x>>27) * 0x94d049bb133111eb
	return x ^ x>>31
}

// below is draw i of a whole number from 0 to n-1, off from uniform by less than
// n/2^64.
func (d draws) below(i uint64, n int) int {
	high, _ := bits.Mul64(d.word(i), uint64(n))
	return int(high)
}
