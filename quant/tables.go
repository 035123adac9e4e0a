package quant

import "ulpine/quant/random"

// table holds the random words of one stream pair for the additions first to last
// of one block of results: one row of the result, width columns.
type table struct {
	on          bool
	first, last int // numbers of the additions, first a multiple of 4
	width       int
	row         []uint32 // word k of the row at k-first, low bit set
	column      []uint32 // word k of column j at (k-first) width + j
}

// span prepares the table for the additions from..to of width columns.
func (t *table) span(from, to, width int) {
	t.first, t.last, t.width = from&^3, to, width
	n := (to - t.first + 3) &^ 3
	t.row = grown(t.row, n)
	t.column = grown(t.column, n*width)
}

// fillColumns draws the words of lanes lane, lane+1, ... for the columns.
func (t *table) fillColumns(d random.Draws, lane uint32, odd uint32) {
	w := t.width
	for k := t.first; k < t.last; k += 4 {
		at := t.column[(k-t.first)*w:][:4*w]
		for j := range w {
			four := d.LaneWords(uint32(k/4), lane+uint32(j))
			at[j], at[w+j], at[2*w+j], at[3*w+j] = four[0]|odd, four[1]|odd, four[2]|odd, four[3]|odd
		}
	}
}

// fillRow draws the words of one lane for the row.
func (t *table) fillRow(d random.Draws, lane uint32, odd uint32) {
	for k := t.first; k < t.last; k += 4 {
		four := d.LaneWords(uint32(k/4), lane)
		for n, v := range four {
			t.row[k-t.first+n] = v | odd
		}
	}
}

// at returns the row's word and the columns' words of addition k.
func (t *table) at(k int) (row uint32, column []uint32) {
	n := k - t.first
	return t.row[n], t.column[n*t.width:][:t.width]
}

// word returns the word of addition k of column j, as Streams.word does.
func (t *table) word(k, j int) uint32 {
	if !t.on {
		return 0
	}
	n := k - t.first
	return halves(t.row[n], t.column[n*t.width+j]) << 16
}

// grown returns a slice of length n, x where it is long enough.
func grown[E any](x []E, n int) []E {
	if cap(x) < n {
		return make([]E, n)
	}
	return x[:n]
}
