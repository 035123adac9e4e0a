package trainer

import (
	"math/bits"

	"ulpine/quant"
	"ulpine/quant/random"
)

// shuffle fills order with the permutation of an epoch (1 is the first):
// Fisher-Yates from the identity, downwards, on the replicate's stream of
// orders. Place i is exchanged with place floor(x (i+1) / 2^64), x being the
// words 2i (high half) and 2i+1 of the epoch: no place is likelier than another
// by more than 2^-64. Every epoch stands alone, whatever came before.
func shuffle(order []int32, seed uint64, epoch int) {
	for i := range order {
		order[i] = int32(i)
	}
	d := quant.Draws{Seed: random.Derive(seed, random.Order), Step: uint32(epoch)}
	for i := len(order) - 1; i > 0; i-- {
		x := uint64(d.Word(uint64(2*i)))<<32 | uint64(d.Word(uint64(2*i+1)))
		j, _ := bits.Mul64(x, uint64(i+1))
		order[i], order[j] = order[j], order[i]
	}
}

// identity fills order with the data's own order.
func identity(order []int32) {
	for i := range order {
		order[i] = int32(i)
	}
}
