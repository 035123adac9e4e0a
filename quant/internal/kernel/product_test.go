package kernel

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"
)

// TestProductAgainstReference lets each dimension run from 0 to 99 with the others
// drawn, for every arithmetic, on drawn kinds of data, and holds every set to the
// reference: results that were not handed back are the reference's, bit for bit, and
// so are the events in them.
func TestProductAgainstReference(t *testing.T) {
	step := 1
	if testing.Short() {
		step = 9
	}
	for n, a := range arithmetics {
		t.Run(fmt.Sprint(n), func(t *testing.T) {
			t.Parallel()
			sets := multipliers(t, a)
			r := rand.New(rand.NewPCG(uint64(n), 7))
			for size := n % step; size < 100; size += step {
				for dimension := range 3 {
					dims := [3]int{1 + r.IntN(9), 1 + r.IntN(40), 1 + r.IntN(24)}
					dims[dimension] = size
					one, two := kinds[r.IntN(len(kinds))], kinds[r.IntN(len(kinds))]
					if r.IntN(2) == 0 {
						two = one
					}
					p := draw(r, dims[0], dims[1], dims[2], one.draw, two.draw)
					label := fmt.Sprintf("%+v: %v of %s x %s", a, dims, one.name, two.name)
					compare(t, sets, a, p, label)
				}
			}
			if !testing.Short() && sets[Portable.Name].careful != nil && sets[Portable.Name].again == 0 {
				t.Error("nothing was formed with care")
			}
			for name, m := range sets {
				if m.seen > 0 && m.back == m.seen {
					t.Errorf("%s hands back everything", name)
				}
			}
		})
	}
}

// TestLongSums forms sums over several blocks, in which the span of the operands
// changes from block to block.
func TestLongSums(t *testing.T) {
	for n, a := range arithmetics {
		if testing.Short() && n%5 > 0 {
			continue
		}
		t.Run(fmt.Sprint(n), func(t *testing.T) {
			t.Parallel()
			r := rand.New(rand.NewPCG(uint64(n), 8))
			grow := func(r *rand.Rand) float64 {
				return float64(toGrid(r.NormFloat64()*math.Ldexp(1, -r.IntN(1+r.IntN(40))), bf16))
			}
			compare(t, multipliers(t, a), a, draw(r, 5, 27, 2*blockTerms+60, grow, grow), fmt.Sprintf("%+v: long", a))
			one := kinds[1].draw
			compare(t, multipliers(t, a), a, draw(r, 3, 33, 3*blockTerms+1, one, one), fmt.Sprintf("%+v: long fp16", a))
		})
	}
}

// tallied is a multiplier with the numbers of results formed and handed back.
type tallied struct {
	*Multiplier
	seen, back int
	again      uint64 // events
}

func multipliers(t *testing.T, a Arithmetic) map[string]*tallied {
	t.Helper()
	ms := map[string]*tallied{}
	for _, s := range Sets {
		m := NewWith(s, a)
		if m == nil {
			t.Fatalf("%+v has no kernels in %s", a, s.Name)
		}
		ms[s.Name] = &tallied{Multiplier: m}
	}
	return ms
}

// compare forms the product with every multiplier and compares.
func compare(t *testing.T, ms map[string]*tallied, a Arithmetic, p *Product[float32], label string) {
	t.Helper()
	want := make([]reference, p.I*p.J)
	column := make([]float32, p.K)
	for j := range p.J {
		p.B.Pack(column, 1, 0, p.K, j, j+1)
		for i := range p.I {
			want[i*p.J+j] = result(&a, p, column, i, j)
		}
	}
	for name, m := range ms {
		const margin = 40
		space := make([]float32, p.I*p.J+2*margin)
		for i := range space {
			space[i] = guard
		}
		p.C = space[margin:][:p.I*p.J]
		back := make([]bool, p.I*p.J)
		var tally, wantTally Tally
		p.Tally = &tally
		m.Mul(p, func(i0, i1, j0, j1 int) {
			for i := i0; i < i1; i++ {
				for j := j0; j < j1; j++ {
					if back[i*p.J+j] {
						t.Fatalf("%s, %s: element (%d,%d) is handed back twice", name, label, i, j)
					}
					back[i*p.J+j] = true
					m.back++
				}
			}
		})
		m.seen += p.I * p.J
		m.again += tally.Sums.Beyond + tally.Products.Beyond
		for n, w := range want {
			if back[n] {
				continue
			}
			wantTally.add(w.tally)
			if math.Float32bits(p.C[n]) != math.Float32bits(w.value) {
				t.Fatalf("%s, %s: (%d,%d) = %x, want %x", name, label, n/p.J, n%p.J, p.C[n], w.value)
			}
		}
		if tally != wantTally {
			t.Fatalf("%s, %s: events %+v, want %+v", name, label, tally, wantTally)
		}
		for i := range margin {
			if space[i] != guard || space[len(space)-1-i] != guard {
				t.Fatalf("%s, %s: written beyond the result", name, label)
			}
		}
	}
}

// TestOrdinaryOperandsAreNotHandedBack: activations and weights of ordinary size, in
// the formats of their arithmetic, are formed by the kernels, all of them.
func TestOrdinaryOperandsAreNotHandedBack(t *testing.T) {
	for _, mode := range benchModes {
		for _, set := range Sets {
			r := rand.New(rand.NewPCG(1, 9))
			value := func(r *rand.Rand) float64 { return float64(toGrid(r.NormFloat64()*0.25, mode.g)) }
			p := draw(r, 19, 50, 300, value, value)
			p.C = make([]float32, p.I*p.J)
			NewWith(set, mode.a).Mul(p, func(i0, i1, j0, j1 int) {
				t.Errorf("%s, %s: rows %d..%d, columns %d..%d are handed back", set.Name, mode.name, i0, i1, j0, j1)
			})
		}
	}
}

// TestMulDoesNotAllocate: after the first product of a shape.
func TestMulDoesNotAllocate(t *testing.T) {
	for _, mode := range benchModes {
		r := rand.New(rand.NewPCG(1, 10))
		value := func(r *rand.Rand) float64 { return float64(toGrid(r.NormFloat64()*0.25, mode.g)) }
		p := draw(r, 5, 30, 70, value, value)
		p.C = make([]float32, p.I*p.J)
		p.Bias = make([]float32, p.I)
		for _, set := range Sets {
			m := NewWith(set, mode.a)
			redo := func(int, int, int, int) {}
			if n := testing.AllocsPerRun(5, func() { m.Mul(p, redo) }); n > 0 {
				t.Errorf("%s, %s: %v allocations a product", set.Name, mode.name, n)
			}
		}
	}
}
