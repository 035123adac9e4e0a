package kernel

import "ulpine/quant/random"

// fillRows writes the words of additions k0 <= k < k0+terms of lanes lane,
// lane+1, ... by pairs of rows, or-ed with odd: dst[(i/2*terms + k-k0)*2 + i%2].
func fillRows(dst []uint32, d random.Draws, lane uint32, rows, k0, terms int, odd uint32) {
	for i := range rows {
		at := dst[i/2*2*terms:]
		for k := 0; k < terms; {
			four := d.LaneWords(uint32((k0+k)/4), lane+uint32(i))
			for n := (k0 + k) % 4; n < 4 && k < terms; n, k = n+1, k+1 {
				at[2*k+i%2] = four[n] | odd
			}
		}
	}
}

// fillColumns writes the words of additions k0 <= k < k0+terms of lanes lane,
// lane+1, ...: dst[(k-k0)*width + j].
func fillColumns(dst []uint32, d random.Draws, width, k0, terms int, lane uint32) {
	for j := range width {
		for k := 0; k < terms; {
			four := d.LaneWords(uint32((k0+k)/4), lane+uint32(j))
			for n := (k0 + k) % 4; n < 4 && k < terms; n, k = n+1, k+1 {
				dst[k*width+j] = four[n]
			}
		}
	}
}
