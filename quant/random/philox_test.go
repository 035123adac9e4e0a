package random

import (
	"math"
	"testing"
)

// TestBlockKnownAnswers: the known answers published with Random123 for
// Philox4x32-10 (file kat_vectors; from memory, and recomputed with an independent
// program).
func TestBlockKnownAnswers(t *testing.T) {
	for _, c := range []struct {
		counter [4]uint32
		key     uint64
		want    [4]uint32
	}{
		{want: [4]uint32{0x6627e8d5, 0xe169c58d, 0xbc57ac4c, 0x9b00dbd8}},
		{
			[4]uint32{0xffffffff, 0xffffffff, 0xffffffff, 0xffffffff},
			0xffffffffffffffff,
			[4]uint32{0x408f276d, 0x41c83b0e, 0xa20bc7c6, 0x6d5451fd},
		},
		{ // the digits of pi
			[4]uint32{0x243f6a88, 0x85a308d3, 0x13198a2e, 0x03707344},
			0x299f31d0a4093822,
			[4]uint32{0xd16cfe09, 0x94fdcceb, 0x5001e420, 0x24126ea1},
		},
	} {
		if got := Block(c.counter, c.key); got != c.want {
			t.Errorf("Block(%08x, %016x) = %08x, want %08x", c.counter, c.key, got, c.want)
		}
	}
}

// vectors is the stream of the project's own test vectors. They were computed by a
// separate program in another language from the description of Word and Lane.
var vectors = Draws{Seed: 0x0123456789abcdef, Step: 7, Site: 0x0203, Phase: 1}

func TestWordVectors(t *testing.T) {
	for _, c := range []struct {
		n    uint64
		want uint32
	}{
		{0, 0x0daae5f2},
		{1, 0x93af703d},
		{2, 0x5f2bf656},
		{3, 0xcb8f8f42},
		{4, 0x1e497085},
		{1000003, 0x18a5a501},
		{1 << 34, 0x979498b9},
		{1<<34 + 5, 0x759b3ba7},
	} {
		if got := vectors.Word(c.n); got != c.want {
			t.Errorf("word %d = %08x, want %08x", c.n, got, c.want)
		}
		if got := vectors.Words(c.n / 4)[c.n%4]; got != c.want {
			t.Errorf("word %d of its block = %08x, want %08x", c.n, got, c.want)
		}
	}
}

func TestLaneVectors(t *testing.T) {
	for _, c := range []struct{ k, i, want uint32 }{
		{0, 0, 0x0daae5f2},
		{1, 0, 0x93af703d},
		{3, 0, 0xcb8f8f42},
		{4, 0, 0x979498b9},
		{0, 1, 0x1e497085},
		{5, 7, 0x3e78a6df},
		{1000, 123456, 0x669e1fc6},
		{1<<26 - 1, 1<<32 - 1, 0x127e25c8},
	} {
		if got := vectors.Lane(c.k, c.i); got != c.want {
			t.Errorf("word %d of lane %d = %08x, want %08x", c.k, c.i, got, c.want)
		}
		if got := vectors.LaneWords(c.k/4, c.i)[c.k%4]; got != c.want {
			t.Errorf("word %d of lane %d, by block = %08x, want %08x", c.k, c.i, got, c.want)
		}
	}
}

func TestDeriveVectors(t *testing.T) {
	want := []uint64{
		0xf858edc552a72ac0, 0x2295ed88abfce61e, 0x88818a10bfcfa1e3,
		0xd53eee6b810489af, 0xa9a75a71cba17c30, 0xe616b83d06df1bfc,
	}
	for n, w := range want {
		if got := Derive(103, Data+Stream(n)); got != w {
			t.Errorf("stream %d of seed 103 = %016x, want %016x", n+1, got, w)
		}
	}
}

// neighbours are streams that differ from vectors in one field, or by one.
func neighbours() map[string]Draws {
	n := map[string]Draws{}
	add := func(name string, change func(*Draws)) {
		d := vectors
		change(&d)
		n[name] = d
	}
	add("seed", func(d *Draws) { d.Seed++ })
	add("high half of the seed", func(d *Draws) { d.Seed += 1 << 32 })
	add("step", func(d *Draws) { d.Step++ })
	add("point", func(d *Draws) { d.Site++ })
	add("layer", func(d *Draws) { d.Site += 1 << 8 })
	add("phase", func(d *Draws) { d.Phase++ })
	add("derived", func(d *Draws) { d.Seed = Derive(d.Seed, Data) })
	return n
}

// centred maps a word to a number of mean 0 and variance 1/12.
func centred(w uint32) float64 { return (float64(w)+0.5)/(1<<32) - 0.5 }

// TestStreamsAreIndependent correlates the words of a stream with those of its
// neighbours in seed, step, site and phase, with its own at small lags, and its
// lanes with one another: no correlation of n pairs may leave 5 standard errors.
func TestStreamsAreIndependent(t *testing.T) {
	const n = 1 << 14
	check := func(name string, a, b func(uint64) uint32) {
		t.Helper()
		sum := 0.0
		for i := range uint64(n) {
			sum += centred(a(i)) * centred(b(i))
		}
		if z := sum * 12 / math.Sqrt(n); math.Abs(z) > 5 {
			t.Errorf("%s: correlation of %.1f standard errors", name, z)
		}
	}
	for name, d := range neighbours() {
		check(name, vectors.Word, d.Word)
	}
	for lag := uint64(1); lag <= 8; lag++ {
		check("lag", vectors.Word, func(i uint64) uint32 { return vectors.Word(i + lag) })
	}
	lane := func(l uint32) func(uint64) uint32 {
		return func(k uint64) uint32 { return vectors.Lane(uint32(k), l) }
	}
	for l := uint32(1); l < 5; l++ {
		check("lanes", lane(0), lane(l))
	}
}

// TestWordsAreUniform counts the values of the top and of the bottom byte; the
// chi-square statistic of 255 degrees of freedom has mean 255 and standard
// deviation sqrt(510).
func TestWordsAreUniform(t *testing.T) {
	const n = 1 << 16
	for shift := 0; shift < 32; shift += 8 {
		var count [256]float64
		for i := range uint64(n) {
			count[vectors.Word(i)>>shift&0xff]++
		}
		chi := 0.0
		for _, c := range count {
			d := c - n/256
			chi += d * d / (n / 256)
		}
		if z := (chi - 255) / math.Sqrt(510); math.Abs(z) > 5 {
			t.Errorf("byte %d: chi-square %.0f for 255 degrees of freedom", shift/8, chi)
		}
	}
}

// TestNoTwoElementsShareAWord: the counters of words far apart differ, also where
// the element number passes 2^34.
func TestNoTwoElementsShareAWord(t *testing.T) {
	seen := map[[4]uint32]uint64{}
	for _, q := range []uint64{0, 1, 1<<32 - 1, 1 << 32, 1<<32 + 1, 1 << 33, 1<<55 + 1} {
		w := vectors.Words(q)
		if other, ok := seen[w]; ok {
			t.Errorf("blocks %d and %d are equal", q, other)
		}
		seen[w] = q
	}
}
