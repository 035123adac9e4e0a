package quant

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"
)

// TestMulNarrowFormats crosses formats of few fraction bits with every mode, as
// product, sum and outer, with and without passing through binary32, on NaN,
// infinities that cancel, and products that binary32 loses. Rounding by integer
// addition adds most to a code where the fewest bits are kept: there a NaN's code
// must not carry into a number's.
func TestMulNarrowFormats(t *testing.T) {
	formats := []string{"E5M0", "E4M0", "E8M0(top=ieee)", "E2M1", "E5M1", "E8M1", "E4M1", "E5M2", "fp16", "bf16", "Q2.6"}
	modes := []string{
		"nearest-even", "nearest-away", "toward-zero", "up", "down", "to-odd",
		"stochastic(1)", "stochastic(3)", "stochastic(16)", "stochastic(14,centred)", "stochastic(5,centred-even)",
	}
	values := []float64{
		math.NaN(), math.Inf(1), math.Inf(-1), 0, math.Copysign(0, -1), 1, -1, 0.75, -3, 0x1p40, -0x1p100,
		0x1p-149, -0x1p-149, 0x1p-75, -0x1.8p-76, 0.25, math.MaxFloat32, -math.MaxFloat32,
	}
	r := rand.New(rand.NewPCG(3, 4))
	draw := func(r *rand.Rand) float64 { return values[r.IntN(len(values))] }
	// Mostly plain numbers, so that sums do not all end as NaN.
	mild := func(r *rand.Rand) float64 {
		if r.IntN(6) > 0 {
			return values[5+r.IntN(4)] * math.Ldexp(1, r.IntN(5)-160*r.IntN(2))
		}
		return draw(r)
	}
	for _, format := range formats {
		for _, mode := range modes {
			p, err := ParsePoint(format + " " + mode)
			if err != nil {
				t.Fatal(err)
			}
			for n := range 12 {
				acc := Accumulate{Sum: p, Order: testOrders[r.IntN(len(testOrders))]}
				acc.Through32 = n%2 == 1 && acc.Order.Kind != Wide
				switch n % 3 {
				case 1:
					acc.Product = &p
				case 2:
					acc.Product, acc.Sum, acc.Outer = &Point{Format: Binary32}, Point{Format: Binary32}, &p
				}
				label := fmt.Sprintf("narrow, round %d", n)
				againstReference(t, acc, randomProduct[float32](r, 2, 1+r.IntN(9), 1+r.IntN(6), mild, draw), label)
				againstReference(t, acc, randomProduct[float32](r, 2, 1+r.IntN(9), 1+r.IntN(6), mild, mild), label)
			}
		}
	}
}
