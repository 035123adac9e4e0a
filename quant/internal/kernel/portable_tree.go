package kernel

// treeTerms is the number of terms of the pairwise kernels.
const treeTerms = 8

// sweepTree is tree8: the pairwise sum of the products of eight terms, neighbours
// first, each operation rounded to the lane.
func sweepTree[L lanes](t *Tile[L]) {
	c, w := t.numbers, t.Width
	c.read(t.C)
	sums := c.sums[:t.Rows*w]
	for g := range t.Groups {
		for r := range t.Rows {
			a := t.A[(g*t.Rows+r)/2*t.AStride+r%2:]
			for j := range w {
				var p [treeTerms]L
				for k := range p {
					p[k] = L(a[2*k] * t.B[k*w+j])
				}
				sums[r*w+j] = ((p[0] + p[1]) + (p[2] + p[3])) + ((p[4] + p[5]) + (p[6] + p[7]))
			}
		}
		t.Flags[g] = storeGroup(t, c, sums, g, 1)
	}
}
