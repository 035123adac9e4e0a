package main

import (
	"github.com/mmcloughlin/avo/operand"
	"github.com/mmcloughlin/avo/reg"
)

// treeTerms is the number of terms of a pairwise kernel.
const treeTerms = 8

// tree emits the pairwise sums of all rows and vectors of the tile. In what the
// kernel starts from is not read.
func (g *tile) tree() {
	g.sums = make([][]reg.VecVirtual, g.rows)
	for r := range g.rows {
		for v := range g.vectors {
			g.sums[r] = append(g.sums[r], g.branch(r, v, 0, treeTerms))
		}
	}
}

// branch is the pairwise sum of terms from to to-1, a power of two of them.
func (g *tile) branch(r, v, from, to int) reg.VecVirtual {
	if to-from > 1 {
		middle := (from + to) / 2
		low, high := g.branch(r, v, from, middle), g.branch(r, v, middle, to)
		g.add(low, low, high)
		return low
	}
	p := g.reg()
	g.spread(p, operand.Mem{Base: g.a[r/2], Disp: (2*from + r%2) * g.element()})
	g.mul(p, p, operand.Mem{Base: g.b, Disp: from*g.vectors*g.bytes() + v*g.bytes()})
	return p
}
