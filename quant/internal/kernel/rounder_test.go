package kernel

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"ulpine/quant/random"
)

// roundings are the sums whose rounders are tested.
var roundings = []Sum{
	nearestSum(fp16), nearestSum(bf16), nearestSum(e4m3), nearestSum(e5m2), nearestSum(e6m9),
	nearestSum(Grid{23, -126, math.MaxFloat32}), nearestSum(Grid{1, 0, 3}),
	randomSum(fp16, 16, false, false), randomSum(fp16, 32, false, false), randomSum(bf16, 16, false, true),
	randomSum(bf16, 32, false, false), randomSum(e4m3, 4, false, true), randomSum(e5m2, 1, false, false),
	randomSum(Grid{23, -126, math.MaxFloat32}, 16, false, false), randomSum(e6m9, 31, false, true),
}

// expected rounds an exact number, or one rounded to odd.
func expected(s *Sum, x float64, word uint32) float64 {
	r := nearestTo(x, s.Grid)
	if s.Kind == StochasticSum {
		r = stochasticTo(x, s, word>>(32-s.Bits))
	}
	return math.Copysign(r, x)
}

// operation is one method of a rounder on slices of one length.
type operation struct {
	name  string
	exact func(a, b, alpha float64) float64 // rounded to odd
	run   func(r *Rounder, dst, a, b []float32, alpha float64, d random.Draws, first uint64) (done, lost int)
}

var operations = []operation{
	{
		"round", func(a, _, _ float64) float64 { return a },
		func(r *Rounder, dst, a, _ []float32, _ float64, d random.Draws, first uint64) (int, int) {
			return r.Round(dst, a, d, first)
		},
	},
	{
		"round wide", func(a, _, _ float64) float64 { return a },
		func(r *Rounder, dst, a, _ []float32, _ float64, d random.Draws, first uint64) (int, int) {
			wide := make([]float64, len(a))
			for i, v := range a {
				wide[i] = float64(v)
			}
			return r.RoundWide(dst, wide, d, first)
		},
	},
	{
		"scale", func(a, _, alpha float64) float64 { return oddProduct(alpha, a) },
		func(r *Rounder, dst, a, _ []float32, alpha float64, d random.Draws, first uint64) (int, int) {
			return Scale(r, dst, alpha, a, d, first)
		},
	},
	{
		"add", func(a, b, _ float64) float64 { return oddSum(a, b) },
		func(r *Rounder, dst, a, b []float32, _ float64, d random.Draws, first uint64) (int, int) {
			return Add(r, dst, a, 1, b, d, first)
		},
	},
	{
		"subtract", func(a, b, _ float64) float64 { return oddSum(a, -b) },
		func(r *Rounder, dst, a, b []float32, _ float64, d random.Draws, first uint64) (int, int) {
			return Add(r, dst, a, -1, b, d, first)
		},
	},
}

// oddProduct is x y rounded to odd.
func oddProduct(x, y float64) float64 {
	p := float64(x * y)
	if p == 0 {
		return p // with its sign
	}
	return oddSum(p, math.FMA(x, y, -p))
}

// TestRounder rounds slices of 0 to 99 elements, and of some blocks, in place and not,
// with guards.
func TestRounder(t *testing.T) {
	for n, s := range roundings {
		t.Run(fmt.Sprintf("%+v", s), func(t *testing.T) {
			t.Parallel()
			r := rand.New(rand.NewPCG(uint64(n), 20))
			for _, set := range Sets {
				rounder := NewRounderWith(set, s)
				if rounder == nil {
					t.Fatal("no rounder")
				}
				done, seen := 0, 0
				for length := range 104 {
					if length >= 100 {
						length = 500 + r.IntN(1500)
					}
					if testing.Short() && length%7 > 0 {
						continue
					}
					kind := kinds[r.IntN(len(kinds))]
					for _, o := range operations {
						done += roundOnce(t, r, rounder, &s, o, length, kind.draw, set.Name+", "+o.name+" of "+kind.name)
						seen += length
					}
				}
				if done*10 < seen {
					t.Errorf("%s: only %d of %d elements are rounded by the loops", set.Name, done, seen)
				}
			}
		})
	}
}

func roundOnce(t *testing.T, r *rand.Rand, rounder *Rounder, s *Sum, o operation, n int, draw func(*rand.Rand) float64, label string) int {
	t.Helper()
	a, b := make([]float32, n), make([]float32, n)
	for i := range a {
		a[i], b[i] = float32(draw(r)), float32(draw(r))
	}
	space := make([]float32, n+40)
	for i := range space {
		space[i] = guard
	}
	dst := space[20:][:n]
	from := a
	if r.IntN(2) == 0 {
		copy(dst, a)
		from = dst
	}
	alpha := math.Exp(r.NormFloat64())
	d := random.Draws{Seed: r.Uint64(), Step: r.Uint32(), Site: r.Uint32(), Phase: uint32(r.IntN(256))}
	first := r.Uint64N(1 << 40)
	done, lost := o.run(rounder, dst, from, b, alpha, d, first)
	zeros := 0
	for i := range done {
		x := o.exact(float64(a[i]), float64(b[i]), alpha)
		want := expected(s, x, d.Word(first+uint64(i)))
		if !(math.Abs(want) <= s.Grid.Max) || math.Float32bits(dst[i]) != math.Float32bits(float32(want)) {
			t.Fatalf("%s: element %d of %d: %x becomes %x, want %x", label, i, n, x, dst[i], want)
		}
		if want == 0 && x != 0 {
			zeros++
		}
	}
	if lost != zeros {
		t.Fatalf("%s: %d numbers became zero, want %d", label, lost, zeros)
	}
	if done < n && &from[0] == &dst[0] {
		for i := done; i < n; i++ {
			if math.Float32bits(dst[i]) != math.Float32bits(a[i]) {
				t.Fatalf("%s: element %d beyond the %d done has changed", label, i, done)
			}
		}
	}
	for i := range 20 {
		if space[i] != guard || space[len(space)-1-i] != guard {
			t.Fatalf("%s: written beyond the slice", label)
		}
	}
	return done
}

// TestStreamWords: the words of a stream, and their order.
func TestStreamWords(t *testing.T) {
	d := random.Draws{Seed: 0x0123456789abcdef, Step: 7, Site: 0x0203, Phase: 1}
	for _, set := range Sets {
		l := set.loops
		for _, q := range []uint64{0, 5, 1<<32 + 3} {
			for _, blocks := range []int{1, 7, 8, 16, 33, 100} {
				dst := make([]uint32, 4*blocks+4*2*wholeLanes)
				l.streamWords(dst, d, q, blocks)
				for i := range 4 * blocks {
					if want := d.Word(4*q + uint64(i)); dst[i] != want {
						t.Fatalf("%s: word %d from block %d is %x, want %x", set.Name, i, q, dst[i], want)
					}
				}
			}
		}
	}
}
