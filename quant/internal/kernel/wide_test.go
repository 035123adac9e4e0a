package kernel

import (
	"math"
	"math/rand/v2"
	"testing"
)

// wideColumns is a matrix of binary64 numbers as the right-hand operand.
type wideColumns struct {
	data []float64
	row  int
}

func (w wideColumns) Pack(dst []float64, width, k0, k1, j0, j1 int) {
	for k := k0; k < k1; k++ {
		to := dst[(k-k0)*width:][:width]
		clear(to[copy(to, w.data[k*w.row+j0:k*w.row+j1]):])
	}
}

// TestWide holds products in binary64 to the loop they stand for, each dimension from
// 0 to 99 in turn.
func TestWide(t *testing.T) {
	r := rand.New(rand.NewPCG(5, 6))
	fill := func(n int, special bool) []float64 {
		x := make([]float64, n)
		for i := range x {
			x[i] = r.NormFloat64() * math.Ldexp(1, r.IntN(60)-30)
			if special && r.IntN(30) == 0 {
				x[i] = [...]float64{math.Inf(1), math.NaN(), math.MaxFloat64}[r.IntN(3)]
			}
		}
		return x
	}
	for size := range 300 {
		if testing.Short() && size%7 > 0 {
			continue
		}
		dims := [3]int{1 + r.IntN(9), 1 + r.IntN(30), 1 + r.IntN(30)}
		dims[size%3] = size / 3
		if size > 290 {
			dims = [3]int{3, 20, blockTerms + r.IntN(blockTerms)}
		}
		i, j, k := dims[0], dims[1], dims[2]
		special := r.IntN(4) == 0
		p := &Product[float64]{I: i, J: j, K: k, A: fill(i*k, special), ARow: k, ACol: 1, B: wideColumns{fill(k*j, special), j}, C: make([]float64, i*j)}
		if r.IntN(2) == 0 {
			p.Bias = fill(i, false)
		}
		for _, set := range Sets {
			for _, fused := range []bool{false, true} {
				back := make([]bool, i*j)
				NewWideWith(set, fused).Mul(p, func(i0, i1, j0, j1 int) {
					for a := i0; a < i1; a++ {
						for b := j0; b < j1; b++ {
							back[a*j+b] = true
						}
					}
				})
				for n, got := range p.C {
					want := wideSum(p, n/j, n%j, fused)
					switch {
					case back[n] && !special && k > 0:
						t.Fatalf("%s, %v: (%d,%d) is handed back", set.Name, dims, n/j, n%j)
					case back[n]:
					case math.Float64bits(got) != math.Float64bits(want):
						t.Fatalf("%s, fused %v, %v: (%d,%d) = %x, want %x", set.Name, fused, dims, n/j, n%j, got, want)
					}
				}
			}
		}
	}
}

func wideSum(p *Product[float64], i, j int, fused bool) float64 {
	column := make([]float64, p.K)
	p.B.Pack(column, 1, 0, p.K, j, j+1)
	s := 0.0
	for k, b := range column {
		a := p.A[i*p.ARow+k]
		if fused {
			s = math.FMA(a, b, s) + 0
		} else {
			s += float64(a * b)
		}
	}
	if p.Bias != nil {
		s += p.Bias[i]
	}
	return s + 0
}
