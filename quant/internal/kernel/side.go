package kernel

// side is what a multiplier owns for one lane type: the operand A packed at the
// scales in use, the sums that wait between blocks, and the kernel's argument.
type side[L lanes] struct {
	family *family[L]
	packs  []packed[L]
	panel  []L // B of a block, binary64 lanes only
	sums   []L // waiting sums, rows x width
	zeros  []L
	ones   []L
	tile   *Tile[L]
	flags  []uint8
	work   work[L]

	numbers numbers[L]
}

// packed is A times 2^scale by pairs of rows.
type packed[L lanes] struct {
	scale int
	ready bool
	a     []L
}

func newSide[L lanes](f *family[L]) side[L] {
	s := side[L]{family: f, tile: &Tile[L]{}}
	s.zeros, s.ones = make([]L, maxWidth), make([]L, maxWidth)
	for i := range s.ones {
		s.ones[i] = 1
	}
	return s
}

// begin forgets the packed operand of the product before.
func (s *side[L]) begin() {
	for i := range s.packs {
		s.packs[i].ready = false
	}
}

// pack returns A at a scale.
func pack[L, T lanes](s *side[L], l *loops, p *Product[T], scale int) []L {
	var at *packed[L]
	for i := range s.packs {
		if s.packs[i].scale == scale {
			at = &s.packs[i]
		}
	}
	if at == nil {
		s.packs = append(s.packs, packed[L]{scale: scale})
		at = &s.packs[len(s.packs)-1]
	}
	if !at.ready {
		at.a = grown(at.a, 2*pairsOf(p.I)*p.K)
		packRows(l, at.a, p.A, p.ARow, p.ACol, p.I, p.K, scale)
		at.ready = true
	}
	return at.a
}

// work is a block of terms for pairs first <= q < last of rows. Slices of rows start
// with row 0; in may be one row, with inRow 0.
type work[L lanes] struct {
	mode          mode
	c             *Constants
	width         int
	first, last   int // pairs of rows
	terms         int
	a             []L // by pairs, already at the block's first term
	aStride       int
	b             []L
	r, v          []uint32
	termR, termV  []uint32
	events        []uint64
	in, out       []L
	inRow, outRow int
	final         []float32
	finalRow      int
}

// sweep runs the kernels of a mode over the rows of s.work, and marks the pairs of
// rows in which a sum is not finite.
func (s *side[L]) sweep(bad []bool) {
	t, w := s.tile, &s.work
	*t = Tile[L]{
		K: w.terms, AStride: w.aStride, B: w.b, V: w.v, InRow: w.inRow, OutRow: w.outRow,
		FinalRow: w.finalRow, C: w.c, Width: w.width, Events: w.events, numbers: &s.numbers,
	}
	pair := w.first
	for _, shape := range s.family.of(w.mode, w.width) {
		pairs := shape.rows / 2
		t.Groups = (w.last - pair) / pairs
		if t.Groups == 0 {
			continue
		}
		t.Rows = shape.rows
		t.A = w.a[pair*w.aStride:]
		t.In, t.Out = w.in[2*pair*w.inRow:], from(w.out, 2*pair*w.outRow)
		t.R, t.Final = from(w.r, pair*w.aStride), from(w.final, 2*pair*w.finalRow)
		t.TermR, t.TermV = from(w.termR, pair*w.aStride), w.termV
		s.flags = grown(s.flags, t.Groups)
		t.Flags = s.flags
		shape.run(t)
		for g, flag := range s.flags {
			if flag != 0 {
				for q := range pairs {
					bad[pair+g*pairs+q] = true
				}
			}
		}
		pair += t.Groups * pairs
	}
	*t = Tile[L]{} // keep nothing of the caller's alive
}

// from is x[at:], nil for a nil x.
func from[E any](x []E, at int) []E {
	if x == nil {
		return nil
	}
	return x[at:]
}

// grown returns a slice of length n, x where it is long enough.
func grown[E any](x []E, n int) []E {
	if cap(x) < n {
		return make([]E, n)
	}
	return x[:n]
}
