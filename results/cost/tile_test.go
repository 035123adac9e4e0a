package cost

import (
	"fmt"
	"math"
	"testing"
)

// product makes a tile of an i x k and a k x j matrix.
func product(i, j, k, cache uint64, left, right, sum Format) tile {
	return tile{
		i: i, j: j, k: k, cache: cache,
		left:    &flow{values: i * k, format: left, sweeps: 1},
		right:   &flow{values: k * j, format: right, sweeps: 1},
		partial: &flow{values: i * j, format: sum},
	}
}

// exhaustive is the least traffic of the three loops over every block shape, by
// trying all of them.
func exhaustive(t tile) uint64 {
	l, r, s := uint64(t.left.format.Bits), uint64(t.right.format.Bits), uint64(t.partial.format.Bits)
	best := uint64(math.MaxUint64)
	for a := uint64(1); a <= max(t.i, t.j); a++ {
		for b := uint64(1); b <= max(t.j, t.k); b++ {
			if a <= t.i && b <= t.j && a*b*s+a*l+b*r <= t.cache { // a block of the result
				best = min(best, t.bits(sweeps{ceilDiv(t.j, b), ceilDiv(t.i, a), 0}))
			}
			if a <= t.i && b <= t.k && a*b*l+a*s+b*r <= t.cache { // of the left operand
				best = min(best, t.bits(sweeps{1, ceilDiv(t.i, a), ceilDiv(t.k, b) - 1}))
			}
			if a <= t.j && b <= t.k && a*b*r+a*s+b*l <= t.cache { // of the right one
				best = min(best, t.bits(sweeps{ceilDiv(t.j, a), 1, ceilDiv(t.k, b) - 1}))
			}
		}
	}
	return best
}

// TestTileIsBest holds the search against trying every block.
func TestTileIsBest(t *testing.T) {
	fp16, e4m3 := formatOf(t, "fp16"), formatOf(t, "e4m3")
	for _, shape := range [][3]uint64{{1, 1, 1}, {1, 40, 30}, {40, 1, 30}, {40, 30, 1}, {17, 23, 29}, {32, 8, 64}, {7, 60, 5}, {3, 4, 70}} {
		for _, f := range [][3]Format{{FP32, FP32, FP32}, {fp16, e4m3, FP32}, {e4m3, FP32, fp16}} {
			for cache := uint64(96); cache < 1<<18; cache = cache*5/3 + 1 {
				p := product(shape[0], shape[1], shape[2], cache, f[0], f[1], f[2])
				want := exhaustive(p)
				p.sweep()
				got := p.left.bits() + p.right.bits() + p.partial.bits()
				if got != want {
					t.Errorf("%v in %d bits, %s %s %s: %d bits moved, best is %d", shape, cache, f[0].Name, f[1].Name, f[2].Name, got, want)
				}
			}
		}
	}
}

// TestTileBound: the traffic in values lies above 2 I J K / sqrt(Z) - 2 Z, below
// which no order of the multiply-adds can come (Smith, Lowery, Langou and van de
// Geijn, A tight I/O lower bound for matrix multiplication, 2019; from memory;
// Hong and Kung 1981 without the constant), and within a tenth of the leading
// term plus what the result itself takes.
func TestTileBound(t *testing.T) {
	for _, n := range []uint64{128, 256, 512} {
		for _, z := range []uint64{256, 1024, 4096} {
			p := product(n, n, n, 32*z, FP32, FP32, FP32)
			p.sweep()
			moved := float64(p.left.bits()+p.right.bits()+p.partial.bits())/32 + float64(n*n)
			leading := 2 * float64(n*n*n) / math.Sqrt(float64(z))
			if moved < leading-2*float64(z) {
				t.Errorf("%d^3 in %d values: %v moved, fewer than the bound of %v", n, z, moved, leading-2*float64(z))
			}
			// Whole blocks of at most sqrt(z + 1) - 1 rows.
			side := math.Floor(math.Sqrt(float64(z+1)) - 1)
			if limit := 2*float64(n*n)*math.Ceil(float64(n)/side) + float64(n*n); moved > limit {
				t.Errorf("%d^3 in %d values: %v moved, square blocks move %v", n, z, moved, limit)
			}
		}
	}
}

// TestNoCache: a cache of no size stands for the other model.
func TestNoCache(t *testing.T) {
	p := product(9, 9, 9, 0, FP32, FP32, FP32)
	p.sweep()
	if got := fmt.Sprint(p.left.sweeps, p.right.sweeps, p.partial.sweeps); got != "1 1 0" {
		t.Errorf("sweeps %s", got)
	}
}

// TestTiledPhases holds the blocks of a dense layer's three products in a
// training step against trying every block: batch 32, 100 inputs, 10 units, the
// operands and results in the order of the package comment.
func TestTiledPhases(t *testing.T) {
	n := twoLayers()
	m := slow(1e9)
	m.Cache = 96
	r, err := Estimate(&Input{Network: n, Optimizer: Momentum, Batch: 32, Machine: m, Energy: DefaultEnergy()})
	if err != nil {
		t.Fatal(err)
	}
	for p, want := range []uint64{
		exhaustive(product(10, 32, 100, 8*96, FP32, FP32, FP32)) + 32*(10+320), // biases, result
		exhaustive(product(100, 32, 10, 8*96, FP32, FP32, FP32)) + 32*3200,
		exhaustive(product(10, 100, 32, 8*96, FP32, FP32, FP32)) + 32*1010,
	} {
		got := &r.Reference.Tiled.Step.Layers[2].Phases[p]
		if got.Bits != want || got.Bits <= r.Reference.Once.Step.Layers[2].Phases[p].Bits {
			t.Errorf("%s: %d bits, want %d", got.Phase, got.Bits, want)
		}
	}
	wantModel := "products in blocks through a cache of 96 bytes"
	if got := r.Reference.Tiled.TrafficLabel.Model; got != wantModel {
		t.Errorf("model %q, want %q", got, wantModel)
	}
}

// TestGroups: a convolution of two groups fetches as often as each group alone.
func TestGroups(t *testing.T) {
	whole := Layer{
		Name: "conv", Kind: "conv1d", Weights: 2 * 8 * 9, Inputs: 2 * 3 * 20, Outputs: 2 * 8 * 18,
		Work: Work{2 * 8 * 9 * 18, 2 * 8 * 9 * 18, 2 * 8 * 9 * 18}, Terms: Work{9, 24, 18}, Groups: 2, InAxis: 3, OutAxis: 8,
	}
	half := whole
	half.Weights, half.Inputs, half.Outputs, half.Groups = 8*9, 3*20, 8*18, 1
	half.Work = Work{8 * 9 * 18, 8 * 9 * 18, 8 * 9 * 18}
	for _, cache := range []uint64{64, 256, 1024} {
		m := slow(1e9)
		m.Cache = cache
		var bits [2]uint64
		for i, l := range []Layer{whole, half} {
			in := Input{Network: Network{Layers: []Layer{l}}, Optimizer: SGD, Batch: 4, Machine: m, Energy: DefaultEnergy()}
			r, err := Estimate(&in)
			if err != nil {
				t.Fatal(err)
			}
			bits[i] = r.Reference.Tiled.Step.Total.Bits
		}
		if bits[0] != 2*bits[1] {
			t.Errorf("cache of %d bytes: two groups move %d bits, one %d", cache, bits[0], bits[1])
		}
	}
}
