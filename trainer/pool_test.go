package trainer

import (
	"math"
	"math/rand/v2"
	"testing"

	"ulpine/quant"
)

// bareLayer builds one layer between two edges of float32.
func bareLayer(t *testing.T, arm Arm, input []int, text string, samples int) (layer[float32], *edge[float32], *edge[float32]) {
	t.Helper()
	net := network(t, input, text)
	spec := &net.Layers[0]
	below, above := newEdge[float32](samples, spec.In), newEdge[float32](samples, spec.Out)
	l, err := builderOf[float32](findKind(spec.Kind))(&bench[float32]{place: place{set: &arm.Layers[0]}, spec: spec, below: below, above: above, batch: samples})
	if err != nil {
		t.Fatal(err)
	}
	return l, below, above
}

func same32(t *testing.T, what string, got, want []float32) {
	t.Helper()
	for i := range want {
		if math.Float32bits(got[i]) != math.Float32bits(want[i]) {
			t.Fatalf("%s: %v, want %v", what, got, want)
		}
	}
}

var (
	nan32 = float32(math.NaN())
	inf32 = float32(math.Inf(1))
	neg0  = float32(math.Copysign(0, -1))
)

func TestReluAtTheEdges(t *testing.T) {
	l, below, above := bareLayer(t, baseline(t, 1), []int{7}, "relu", 1)
	copy(below.value.data, []float32{-1, 0, neg0, 2, inf32, -inf32, nan32})
	copy(above.gradient.data, []float32{1, 2, 3, -4, 5, 6, 7})
	p := &pass{samples: 1}
	l.forward(p)
	same32(t, "forward", above.value.data, []float32{0, 0, 0, 2, inf32, 0, nan32})
	l.backward(p, true)
	same32(t, "backward", below.gradient.data, []float32{0, 0, 0, -4, 5, 0, 7})
}

// TestReluDerivativeIsOfItsInput: an output that was flushed to zero passes its gradient.
func TestReluDerivativeIsOfItsInput(t *testing.T) {
	arm := baseline(t, 1)
	arm.Layers[0].Activation = point(t, "E4M3")
	l, below, above := bareLayer(t, arm, []int{1}, "relu", 1)
	below.value.data[0], above.gradient.data[0] = 1e-6, 3
	tally := make(tally, 2)
	p := &pass{samples: 1, tally: tally}
	l.forward(p)
	l.backward(p, true)
	if above.value.data[0] != 0 || below.gradient.data[0] != 3 || tally[1][ForwardActivation].Underflow != 1 {
		t.Errorf("y %v, dx %v, %+v", above.value.data, below.gradient.data, tally[1][ForwardActivation])
	}
}

func TestMaxPoolChoosesTheFirst(t *testing.T) {
	l, below, above := bareLayer(t, baseline(t, 1), []int{1, 4, 4}, "maxpool size=2", 1)
	copy(below.value.data, []float32{
		1, 1, neg0, 0,
		1, 1, -1, -1,
		5, nan32, 2, 3,
		nan32, 9, 4, 4,
	})
	copy(above.gradient.data, []float32{1, 2, 3, 4})
	p := &pass{samples: 1}
	l.forward(p)
	l.backward(p, true)
	same32(t, "forward", above.value.data, []float32{1, neg0, nan32, 4})
	same32(t, "backward", below.gradient.data, []float32{
		1, 0, 2, 0,
		0, 0, 0, 0,
		0, 3, 0, 0,
		0, 0, 4, 0,
	})
}

// TestMaxPoolOfEveryShape compares choices, outputs and gradients of windows that do
// not overlap with the definition, on few values: ties, both zeros, NaN, infinities.
func TestMaxPoolOfEveryShape(t *testing.T) {
	values := []float32{0, neg0, 1, -1, math.SmallestNonzeroFloat32, -math.SmallestNonzeroFloat32, inf32, -inf32, nan32, 2, -2, 3}
	rng := rand.New(rand.NewPCG(3, 4))
	const samples, channels = 2, 3
	for _, text := range []string{"size=2", "size=2 stride=3", "size=2x2 stride=3x2", "size=2x2 stride=2x3", "size=2x3", "size=3x2", "size=1x2", "size=3"} {
		for h := 3; h <= 8; h++ {
			for w := 3; w <= 9; w++ {
				l, below, above := bareLayer(t, baseline(t, 1), []int{channels, h, w}, "maxpool "+text, samples)
				m := l.(*maxPool[float32])
				x, dy := below.value.data, numbered(len(above.value.data))
				few := 1 + rng.IntN(len(values)) // of one value: all equal
				for i := range x {
					x[i] = values[rng.IntN(few)]
				}
				copy(above.gradient.data, dy)
				y, dx := make([]float32, len(dy)), make([]float32, len(x))
				for out := range y {
					at := firstLargest(x, &m.g, out)
					y[out], dx[at] = x[at], dy[out]
				}
				p := &pass{samples: samples}
				l.forward(p)
				same32(t, text+" forward", above.value.data, y)
				l.backward(p, true)
				same32(t, text+" backward", below.gradient.data, dx)
			}
		}
	}
}

// firstLargest is the place of the choice of an output, by comparing numbers.
func firstLargest(x []float32, g *window, out int) int {
	plane, oy, ox := unravel(out, g.oh, g.ow)
	best := -1
	for r := range g.kh {
		for c := range g.kw {
			at := (plane*g.h+oy*g.sh+r)*g.w + ox*g.sw + c
			if best < 0 || x[best] == x[best] && (x[at] != x[at] || x[at] > x[best]) {
				best = at
			}
		}
	}
	return best
}

// TestReluOfRandomNumbers compares the mask with the definition.
func TestReluOfRandomNumbers(t *testing.T) {
	const n = 4096
	l, below, above := bareLayer(t, baseline(t, 1), []int{n}, "relu", 1)
	x, dy := below.value.data, above.gradient.data
	y, dx := make([]float32, n), make([]float32, n)
	rng := rand.New(rand.NewPCG(5, 6))
	for i := range x {
		x[i], dy[i] = math.Float32frombits(rng.Uint32()), math.Float32frombits(rng.Uint32())
		if x[i] != x[i] {
			x[i] = nan32
		}
		if dy[i] != dy[i] {
			dy[i] = nan32
		}
		if !(x[i] <= 0) {
			y[i], dx[i] = x[i], dy[i]
		}
	}
	p := &pass{samples: 1}
	l.forward(p)
	same32(t, "forward", above.value.data, y)
	l.backward(p, true)
	same32(t, "backward", below.gradient.data, dx)
}

// TestOverlappingMaxPoolAddsInOutputOrder: the middle input is the largest of
// all windows, and the sum of its gradients depends on the order at four bits.
func TestOverlappingMaxPoolAddsInOutputOrder(t *testing.T) {
	arm := baseline(t, 1)
	arm.Layers[0].InputGradient.Sums.Sum = point(t, "E5M3")
	arm.Layers[0].InputGradient.Result = point(t, "E5M2")
	l, below, above := bareLayer(t, arm, []int{1, 3, 3}, "maxpool size=2 stride=1", 1)
	below.value.data[4] = 1
	// In output order, ties to even at four significant bits: 16+1 = 16, +1 = 16,
	// +9 = 25 -> 24; any order with 1+1 first gives 27 -> 28. Then 24 at three bits.
	copy(above.gradient.data, []float32{16, 1, 1, 9})
	p := &pass{samples: 1}
	l.forward(p)
	l.backward(p, true)
	same32(t, "backward", below.gradient.data, []float32{0, 0, 0, 0, 24, 0, 0, 0, 0})
}

// TestAveragePoolSumsThenDivides: the sum has its own rounding, the quotient is exact.
func TestAveragePoolSumsThenDivides(t *testing.T) {
	arm := baseline(t, 1)
	arm.Layers[0].Forward.Sum = point(t, "E5M3")
	l, below, above := bareLayer(t, arm, []int{1, 3}, "avgpool size=3", 1)
	copy(below.value.data, []float32{16, 1, 1}) // 16+1 = 16, +1 = 16 at four bits
	copy(above.gradient.data, []float32{1})
	p := &pass{samples: 1}
	l.forward(p)
	same32(t, "forward", above.value.data, []float32{float32(16.0 / 3)})
	l.backward(p, true)
	third := float32(1.0 / 3)
	same32(t, "backward", below.gradient.data, []float32{third, third, third})
}

// TestDividerRoadsAgree compares the fast roads with the exact scalar one.
func TestDividerRoadsAgree(t *testing.T) {
	points := map[string]quant.Point{
		"bf16": point(t, "bf16"), "fp32": point(t, "fp32"), "E4M3": point(t, "E4M3"), "fp16": point(t, "fp16"),
		"fp16 stochastic": stochastic(t, "fp16", 16), "bf16 stochastic": stochastic(t, "bf16", 32),
	}
	for _, mode := range []quant.Mode{quant.TowardZero, quant.Up, quant.Down, quant.ToOdd, quant.NearestAway} {
		p := point(t, "bf16")
		p.Rounding.Mode = mode
		points["bf16 "+mode.String()] = p
	}
	for name, p := range points {
		for _, n := range []int{2, 3, 4, 6, 9, 25, 49} {
			compareRoads(t, name, n, &p)
		}
	}
	wide := point(t, "fp64")
	if d := newDivider[float64](9, &wide, 4); d.road != byNearestQuotient {
		t.Errorf("binary64 takes road %d", d.road)
	}
	stochastic32 := stochastic(t, "fp32", 32)
	if d := newDivider[float32](9, &stochastic32, 4); d.road != byScalar {
		t.Errorf("stochastic binary32 takes road %d", d.road)
	}
}

func compareRoads(t *testing.T, name string, n int, p *quant.Point) {
	t.Helper()
	x := []float32{0, neg0, 1, -1, inf32, nan32, math.MaxFloat32, math.SmallestNonzeroFloat32, 65504, -65504}
	for i := range 300 { // multiples of n and their neighbours, and anything
		v := float32(n) * (1 + float32(i)/128) / 1024
		x = append(x, v, math.Nextafter32(v, 0), math.Nextafter32(v, 9), -v)
	}
	for _, v := range uniform(300, uint64(n)) {
		x = append(x, v, v*1e-38, v*1e38)
	}
	fast := newDivider[float32](n, p, len(x))
	if fast.road != byOddQuotient {
		t.Fatalf("%s takes road %d", name, fast.road)
	}
	d := quant.Draws{Seed: 9, Step: 3}
	var cf, cs quant.Counts
	got, want := make([]float32, len(x)), make([]float32, len(x))
	fast.divide(got, x, d, 5, &cf)
	fast.divideScalar(want, x, d, 5, &cs)
	for i := range x {
		if math.Float32bits(got[i]) != math.Float32bits(want[i]) {
			t.Fatalf("%s: %v/%d is %v, want %v", name, x[i], n, got[i], want[i])
		}
	}
	if cf != cs {
		t.Errorf("%s: counts %+v, want %+v", name, cf, cs)
	}
}
