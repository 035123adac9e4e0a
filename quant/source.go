package quant

import (
	"fmt"
	"sync"
)

// Source says where the random bits of stochastic rounding come from. The zero
// value gives every rounding a word of its own of the counter-based generator. The
// other two model cheap random hardware; both keep every word a pure function of
// its address, so that results do not depend on workers.
type Source struct {
	// Share: one draw serves Share lanes, 0 and 1 both meaning none is shared.
	// Lanes are consecutive elements of a tensor, and consecutive columns j of a
	// product: element n takes word n div Share, column j the words of column
	// j div Share.
	Share uint16
	// Register: the draws are the states of a linear-feedback shift register of
	// this many bits, 4 to 16, which has a period of 2^Register - 1. Rounding
	// number n of a tensor takes state start + n, addition k of result (i, j) state
	// start(i, j) + k, the starts drawn from the counter-based generator.
	Register uint8
}

// The widths of registers that are known.
const (
	minRegister = 4
	maxRegister = 16
)

// registerTaps are the feedback masks of Galois registers of 4 to 16 bits with
// primitive polynomials, bit e-1 set for x^e (from memory, after the tables of
// maximal-length sequences; TestRegisterPeriods walks through every period).
var registerTaps = [maxRegister - minRegister + 1]uint32{
	0xc, 0x14, 0x30, 0x60, 0xb8, 0x110, 0x240, 0x500, 0xe08, 0x1c80, 0x3802, 0x6000, 0xd008,
}

// registerStates are the states of each register over one period from state 1,
// left-aligned in 32 bits; filled when first asked for.
var registerStates [maxRegister - minRegister + 1]struct {
	once   sync.Once
	states []uint32
}

// states returns one period of a register's states, left-aligned.
func states(width uint8) []uint32 {
	r := &registerStates[width-minRegister]
	r.once.Do(func() {
		r.states = make([]uint32, 1<<width-1)
		state := uint32(1)
		for i := range r.states {
			r.states[i] = state << (32 - width)
			state = state>>1 ^ -(state&1)&registerTaps[width-minRegister]
		}
	})
	return r.states
}

// check reports a source that cannot deliver random bits of the number given.
func (s Source) check(random uint) error {
	switch {
	case s.Register == 0:
		return nil
	case s.Register < minRegister || s.Register > maxRegister:
		return fmt.Errorf("register of %d bits: %d to %d are known", s.Register, minRegister, maxRegister)
	case random > uint(s.Register):
		return fmt.Errorf("%d random bits from a register of %d: ask for at most as many", random, s.Register)
	}
	return nil
}

// plain reports whether every rounding has a word of its own.
func (s Source) plain() bool { return s.Share <= 1 && s.Register == 0 }

// lane is the lane whose words lane n takes.
func (s Source) lane(n uint64) uint64 {
	if s.Share > 1 {
		return n / uint64(s.Share)
	}
	return n
}

// Word returns the word of rounding n of a tensor: what RoundSlice and the other
// elementwise operations give element n.
func (r Rounding) Word(d Draws, n uint64) uint32 {
	w := newWords(d, r)
	return w.at(n)
}

// from returns the word of addition k of result (i, j) under a source.
func (s Streams) from(source Source, k, i, j uint32) uint32 {
	j = uint32(source.lane(uint64(j)))
	if source.Register == 0 {
		return s.Word(k, i, j)
	}
	period := states(source.Register)
	start := s.Word(0, i, j) >> 16
	return period[(uint64(start)+uint64(k))%uint64(len(period))]
}

// words yields the words of a stream in ascending order, four a block.
type words struct {
	draws    Draws
	on       bool // words are needed at all
	source   Source
	register []uint32 // one period of the register, nil where there is none
	start    uint64

	valid bool
	block uint64
	four  [4]uint32
}

// newWords yields the words that a rounding draws from a stream, zeros where it
// draws none.
func newWords(d Draws, r Rounding) words {
	w := words{draws: d, on: r.Mode == Stochastic, source: r.Source}
	if w.on && r.Source.Register != 0 {
		w.register, w.start = states(r.Source.Register), uint64(d.Word(0))
	}
	return w
}

// at returns word n, zero when no words are needed.
func (w *words) at(n uint64) uint32 {
	if !w.on {
		return 0
	}
	if w.source.Share > 1 {
		n = w.source.lane(n)
	}
	if w.register != nil {
		return w.register[(w.start+n)%uint64(len(w.register))]
	}
	if !w.valid || n/4 != w.block {
		w.valid, w.block, w.four = true, n/4, w.draws.Words(n/4)
	}
	return w.four[n%4]
}
