package kernel

import (
	"fmt"
	"math"
	"testing"
)

// nearestSignificands returns, for every binary32 number from 1 to 2, its rounding to
// m fraction bits, by integers: the definition.
func nearestSignificands(m int) []float32 {
	want := make([]float32, 1<<23)
	s := 23 - m
	half := uint32(1) << (s - 1)
	for f := range uint32(1 << 23) {
		n := 1<<23 | f
		q, rest := n>>s, n&(1<<s-1)
		if rest > half || rest == half && q&1 == 1 {
			q++
		}
		want[f] = float32(q) / float32(uint32(1)<<m)
	}
	return want
}

// sequence is one way to round x through a kernel: as the only product, 1 x, or as
// the only sum, 0 + 1 x.
type sequence struct {
	name string
	plan func(g Grid) *plan
}

var sequences = []sequence{
	{"product", func(g Grid) *plan {
		a := in(RoundedProduct, g, Sum{})
		return newPlans(Sets[0], &a, a.Sum).native
	}},
	{"sum with subnormals", func(g Grid) *plan {
		a := in(ExactProduct, Grid{}, throughSum(g))
		return newPlans(Sets[0], &a, a.Sum).care
	}},
	{"sum", func(g Grid) *plan {
		a := in(ExactProduct, Grid{}, throughSum(g))
		return newPlans(Sets[0], &a, a.Sum).free
	}},
	{"exact sum", func(g Grid) *plan {
		a := in(ExactProduct, Grid{}, nearestSum(g))
		return newPlans(Sets[0], &a, a.Sum).odd
	}},
}

// roundAll rounds x through the kernel of a plan, signs alternating by row.
func roundAll(set *Set, p *plan, x []float32, check func(i int, row int, got float32)) {
	f := &set.single
	s := f.of(p.mode, f.width)[0]
	c := p.c
	a := make([]float32, 2*s.rows)
	for r := range s.rows {
		a[r] = float32(math.Ldexp(1-2*float64(r%2), p.scale))
	}
	out := make([]float32, s.rows*f.width)
	tile := Tile[float32]{
		K: 1, Groups: 1, Rows: s.rows, Width: f.width, C: &c, A: a, AStride: 2,
		In: make([]float32, f.width), Out: out, OutRow: f.width, Flags: make([]uint8, 1), numbers: &numbers[float32]{},
	}
	for at := 0; at < len(x); at += f.width {
		at = min(at, len(x)-f.width)
		tile.B = x[at:]
		s.run(&tile)
		if tile.Flags[0] != 0 {
			panic("a tile is flagged")
		}
		for r := range 2 {
			for j, v := range out[r*f.width:][:f.width] {
				check(at+j, r, v)
			}
		}
	}
}

// TestEverySignificand rounds every binary32 number from 1 to 2 and its negative to
// 1 to 10 fraction bits, by every rounding sequence of every set. Other binades only
// shift the exponents of all intermediate numbers.
func TestEverySignificand(t *testing.T) {
	x := make([]float32, 1<<23)
	for f := range x {
		x[f] = math.Float32frombits(0x3f800000 | uint32(f))
	}
	for m := 1; m <= 10; m++ {
		if testing.Short() && m != 3 && m != 10 {
			continue
		}
		t.Run(fmt.Sprint(m), func(t *testing.T) {
			t.Parallel()
			want := nearestSignificands(m)
			g := Grid{m, -14, math.Ldexp(2-math.Ldexp(1, -m), 15)}
			for _, set := range Sets {
				for _, s := range sequences {
					if set == Portable && m%3 != 1 {
						continue // slow, and the same for all m
					}
					p := s.plan(g)
					roundAll(set, p, x, func(i, row int, got float32) {
						w := want[i]
						if row == 1 {
							w = -w
						}
						if got != w {
							t.Fatalf("%s, %s to %d fraction bits: %x rounds to %x, want %x", set.Name, s.name, m, x[i], got, w)
						}
					})
				}
			}
		})
	}
}

// TestSubnormals rounds numbers of every binade from far below the least value of a
// grid to above its least normal one: all patterns of the upper 12 fraction bits
// with those of the rest that decide ties.
func TestSubnormals(t *testing.T) {
	for _, g := range []Grid{fp16, bf16, e4m3, e5m2, e6m9, {1, -2, 6}} {
		var x []float32
		for e := max(g.quantum()-3, -149); e <= g.MinExponent+1; e++ {
			for high := range uint32(1 << 12) {
				for _, low := range []uint32{0, 1, 1<<10 - 1, 1 << 10, 1<<10 + 1, 1<<11 - 1} {
					v := math.Ldexp(1+float64(high<<11|low)/(1<<23), e)
					if float64(float32(v)) == v {
						x = append(x, float32(v))
					}
				}
			}
		}
		for _, set := range Sets {
			for _, s := range sequences {
				if s.name == "sum" {
					continue // has no subnormals
				}
				roundAll(set, s.plan(g), x, func(i, row int, got float32) {
					w := float32(nearestTo(float64(x[i]), g))
					if row == 1 {
						w = -w
					}
					if got != w {
						t.Fatalf("%s, %s to %+v: %x rounds to %x, want %x", set.Name, s.name, g, x[i], got, w)
					}
				})
			}
		}
	}
}
