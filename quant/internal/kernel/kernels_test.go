package kernel

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"
)

// planned is every plan of the arithmetics of the tests, one for each mode at least.
func planned() (singles, doubles []*plan) {
	add := func(p *plan) {
		switch {
		case p == nil:
		case p.double:
			doubles = append(doubles, p)
		default:
			singles = append(singles, p)
		}
	}
	for i := range arithmetics {
		p := newPlans(Sets[0], &arithmetics[i], arithmetics[i].Sum)
		for _, q := range []*plan{p.native, p.rounded, p.free, p.care, p.product, p.odd, p.fused, p.fusedFree, p.random, p.randomCare, p.wide, p.truncated} {
			add(q)
		}
	}
	singles = append(singles, &plan{mode: tree8, c: single.masks()})
	for i := range arithmetics {
		m := &Multiplier{a: arithmetics[i]}
		if m.setCareful(); m.careful != nil {
			singles = append(singles, &plan{mode: m.careful.mode, c: m.careful.c})
		}
	}
	for _, m := range []mode{baseline64, fmaChain64} {
		add(&plan{double: true, mode: m, c: double.masks()})
	}
	return singles, doubles
}

// TestKernelsAgainstPortable runs every kernel of every set beside its portable loop
// on the same tile, with guard words around what it writes.
func TestKernelsAgainstPortable(t *testing.T) {
	singles, doubles := planned()
	for _, set := range Sets {
		seen := map[string]bool{}
		againstPortable(t, set, &set.single, &Portable.single, singles, seen)
		againstPortable(t, set, &set.double, &Portable.double, doubles, seen)
		if len(seen) != int(singleModes+doubleModes) {
			t.Errorf("%s: %d modes tested, there are %d", set.Name, len(seen), singleModes+doubleModes)
		}
	}
}

func againstPortable[L lanes](t *testing.T, set *Set, f, portable *family[L], plans []*plan, seen map[string]bool) {
	r := rand.New(rand.NewPCG(3, 4))
	rounds := 6
	if testing.Short() {
		rounds = 2
	}
	for _, p := range plans {
		seen[fmt.Sprint(p.double, p.mode)] = true
		loop := portable.tiles[p.mode][0][0].run
		tree := !p.double && p.mode == tree8
		for narrow, width := range []int{f.width, f.narrow} {
			for _, s := range f.tiles[p.mode][narrow] {
				for range rounds {
					kind := kinds[r.IntN(len(kinds))]
					k := 1 + r.IntN(12)
					if r.IntN(4) == 0 {
						k = 40 + r.IntN(60)
					}
					if tree {
						k = treeTerms
					}
					label := fmt.Sprintf("%s, mode %v %d of %dx%d, %d terms, %s", set.Name, p.double, p.mode, s.rows, width, k, kind.name)
					oneTile(t, r, s, loop, p, width, k, kind.draw, label)
				}
			}
		}
	}
}

// oneTile compares one call.
func oneTile[L lanes](t *testing.T, r *rand.Rand, s shape[L], loop func(*Tile[L]), p *plan, width, k int, value func(*rand.Rand) float64, label string) {
	t.Helper()
	groups := 1 + r.IntN(3)
	rows := groups * s.rows
	fill := func(n int, scale int) []L {
		x := make([]L, n)
		for i := range x {
			x[i] = L(float32(value(r))) * L(math.Ldexp(1, scale))
		}
		return x
	}
	word := func(n int) []uint32 {
		x := make([]uint32, n)
		for i := range x {
			x[i] = r.Uint32() | 1
		}
		return x
	}
	stride := 2 * (k + r.IntN(3))
	inRow, outRow := r.IntN(2)*(width+r.IntN(5)), width+r.IntN(5)
	tile := Tile[L]{
		K: k, Groups: groups, Rows: s.rows, Width: width, C: &p.c, AStride: stride,
		A: fill(rows/2*stride, p.scale), B: fill(k*width, 0), R: word(rows / 2 * stride), V: word(k * width),
		In: make([]L, rows*max(inRow, 1)+width), InRow: inRow, OutRow: outRow, FinalRow: outRow,
		TermR: word(rows / 2 * stride), TermV: word(k * width), numbers: &numbers[L]{},
	}
	const margin = 19
	out := func() (space []L, flags []uint8) {
		space, flags = make([]L, rows*outRow+2*margin), make([]uint8, groups+2*margin)
		for i := range space {
			space[i] = guard
		}
		for i := range flags {
			flags[i] = 77
		}
		return space, flags
	}
	got, gotFlags := out()
	want, wantFlags := out()
	var gotEvents, wantEvents [6]uint64
	tile.Out, tile.Flags, tile.Events = got[margin:], gotFlags[margin:], gotEvents[:]
	s.run(&tile)
	tile.Out, tile.Flags, tile.Events = want[margin:], wantFlags[margin:], wantEvents[:]
	loop(&tile)
	if gotEvents != wantEvents {
		t.Fatalf("%s: events %v, want %v", label, gotEvents, wantEvents)
	}
	equalTiles(t, label, margin, s.rows*outRow, got, want, gotFlags, wantFlags)

	if _, wide := any(tile.In).([]float64); wide {
		gotSpace, wantSpace := make([]float32, len(got)), make([]float32, len(want))
		tile.Final = gotSpace[margin:]
		s.run(&tile)
		tile.Final = wantSpace[margin:]
		loop(&tile)
		equalTiles(t, label+", binary32 results", margin, s.rows*outRow, gotSpace, wantSpace, gotFlags, wantFlags)
	}
}

// equalTiles compares flags, results of groups without a flag, and margins.
func equalTiles[L lanes](t *testing.T, label string, margin, group int, got, want []L, gotFlags, wantFlags []uint8) {
	t.Helper()
	for i, w := range wantFlags {
		if gotFlags[i] != w {
			t.Fatalf("%s: flag %d of %d is %d, want %d", label, i, len(wantFlags), gotFlags[i], w)
		}
	}
	for i, w := range want {
		flag := min(max(i-margin, 0)/group+margin, len(wantFlags)-margin)
		if math.Float64bits(float64(got[i])) != math.Float64bits(float64(w)) && wantFlags[flag] != 1 {
			t.Fatalf("%s: result %d is %x, want %x", label, i, got[i], w)
		}
	}
}
