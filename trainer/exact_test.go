package trainer

import (
	"fmt"
	"math"
	"testing"

	"ulpine/quant"
	"ulpine/quant/random"
)

// TestCombineRoundsExactResults holds every operation, road and element type to
// exact reals, bounds and specials included.
func TestCombineRoundsExactResults(t *testing.T) {
	points := []quant.Point{
		point(t, "fp32"), point(t, "bf16"), point(t, "E4M3"), stochastic(t, "bf16", 16), stochastic(t, "fp16", 32), stochastic(t, "fp32", 16),
		point(t, "posit16"), point(t, "LNS4.3"), point(t, "Q4.12"), stochastic(t, "Q4.12", 9), cheap(stochastic(t, "LNS4.3", 8)), cheap(stochastic(t, "posit8", 8)),
	}
	for _, how := range []arithmetic{sum, difference, product, quotient} {
		for i := range points {
			t.Run(fmt.Sprint(how, " ", points[i]), func(t *testing.T) {
				if quant.Fits32(points[i].Format) {
					checkCombine[float32](t, how, &points[i])
				}
				checkCombine[float64](t, how, &points[i])
			})
		}
		double := point(t, "fp64")
		checkCombine[float64](t, how, &double)
	}
}

// cheap draws the words of a point from a register that lanes share.
func cheap(p quant.Point) quant.Point {
	p.Rounding.Source = quant.Source{Share: 4, Register: 8}
	return p
}

func checkCombine[T quant.Element](t *testing.T, how arithmetic, p *quant.Point) {
	const n = 700
	a, b := operands[T](n, 1), operands[T](n, 2)
	d := random.Draws{Seed: 9, Step: 3, Site: 77}
	for _, right := range [][]T{b, b[7:8], b[:1]} {
		got := make([]T, n)
		var counts, want quant.Counts
		combine(got, a, right, how, p, d, 12, &counts)
		for i := range got {
			x, y := float64(a[i]), float64(right[i%len(right)])
			word := uint32(0)
			if p.Rounding.Mode == quant.Stochastic {
				word = p.Rounding.Word(d, 12+uint64(i))
			}
			v, e := p.Round(exactly(x, y, how), word)
			want.Count(e)
			if math.Float64bits(float64(got[i])) != math.Float64bits(v) {
				t.Fatalf("%x, %x: %x, want %x", x, y, float64(got[i]), v)
			}
		}
		if counts != want {
			t.Fatalf("counts %+v, want %+v", counts, want)
		}
	}
}

// operands are numbers of all sizes; two blocks are ordinary, the others hold
// zeros, specials and the bounds of the type.
func operands[T quant.Element](n int, seed uint64) []T {
	d := random.Draws{Seed: seed, Site: 0xbeef}
	x := make([]T, n)
	for i := range x {
		w := d.Word(uint64(2 * i))
		v := math.Ldexp(1+float64(d.Word(uint64(2*i+1)))/0x1p32, int(w%24)-12)
		if w>>31 != 0 {
			v = -v
		}
		x[i] = T(v)
	}
	specials := []float64{0, math.Copysign(0, -1), math.Inf(1), math.Inf(-1), math.NaN(), 1e30, 1e-30, 1e-44, 1, 3, -1}
	if _, wide := any(x[0]).(float64); wide {
		specials = append(specials, 1e300, -1e300, 1e-300, 5e-324, math.MaxFloat64)
	}
	for i := 2 * combineLength; i < n; i++ {
		if w := d.Word(uint64(i)) >> 8; w%3 != 0 {
			x[i] = T(specials[int(w/3)%len(specials)])
		}
	}
	return x
}
