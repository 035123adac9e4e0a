package cost

import (
	"math"
	"strings"
	"testing"
)

// TestAdditions holds the number of additions of each order against a walk
// through the sum itself.
func TestAdditions(t *testing.T) {
	for terms := uint64(1); terms <= 40; terms++ {
		for _, k := range []int{1, 2, 3, 8, 64} {
			for _, order := range []Order{"", Sequential, Pairwise, Chunk, Lanes, Compensated} {
				s := Sums{Order: order, K: k}
				inner, outer := s.additions(terms)
				if wantInner, wantOuter := walk(order, terms, uint64(k)); inner != wantInner || outer != wantOuter {
					t.Errorf("%s(%d) of %d terms: %d and %d additions, want %d and %d", order, k, terms, inner, outer, wantInner, wantOuter)
				}
			}
		}
	}
}

func walk(order Order, terms, k uint64) (inner, outer uint64) {
	switch order {
	case Chunk:
		for first := uint64(0); first < terms; first += k {
			for i := first; i < min(first+k, terms); i++ {
				inner++ // from zero
			}
			outer++
		}
	case Lanes:
		for range terms {
			inner++
		}
		for left := k; left > 1; left = (left + 1) / 2 {
			inner += left / 2
		}
	case Pairwise:
		for left := terms; left > 1; left = (left + 1) / 2 {
			inner += left / 2
		}
	case Compensated:
		for range terms {
			inner += 4 // y = x - c; t = s + y; c = (t - s) - y
		}
	default:
		for range terms {
			inner++
		}
	}
	return inner, outer
}

// TestRandomBits counts the draws of stochasticArm in the layer dense 10 of
// 784-100-10, batch 32, on paper.
func TestRandomBits(t *testing.T) {
	n := twoLayers()
	r := estimate(t, n, DefaultMachine, stochasticArm(t, &n))
	layer := &r.Arms[0].Once.Step.Layers[2]
	const (
		products = 32 * 1000
		sums     = 32 * 10
		params   = 1010
	)
	for p, want := range []uint64{
		// Products, inner additions, 7 chunks of 16 for 100 terms and the bias in the
		// outer format, outputs.
		5*products + 6*products + 7*(7*sums+sums) + 8*sums,
		// The weights and the output's gradient converted to E4M3; sums and results
		// round to nearest.
		3*1000 + 3*sums,
		// The output's gradient converted to E4M3; four additions a term of the
		// weights' and the biases' sums.
		3*sums + 4*products + 4*sums,
		// Two operations on the velocity, one step, the master copy, three carried
		// errors, the working copy.
		params * (12*2 + 11 + 10 + 2*3 + 9),
	} {
		if got := layer.Phases[p].Random; got != want {
			t.Errorf("%s: %d random bits, want %d", layer.Phases[p].Phase, got, want)
		}
	}
	loss := &r.Arms[0].Once.Step.Layers[3]
	if loss.Total.Random != 0 {
		t.Errorf("the loss draws %d bits, its gradient rounds to nearest", loss.Total.Random)
	}
	if r.Reference.Once.Step.Total.Random != 0 {
		t.Error("FP32 draws random bits")
	}
}

// TestCharges: random bits and compensation raise energy, traffic and, where the
// machine says what drawing takes, time.
func TestCharges(t *testing.T) {
	n := twoLayers()
	plain, stochastic, compensated := uniform(t, &n, "bf16"), uniform(t, &n, "bf16"), uniform(t, &n, "bf16")
	for _, i := range []int{0, 2} {
		stochastic.Layers[i].Master.RandomBits = 16
		compensated.Layers[i].Compensation = &Point{Format: formatOf(t, "bf16")}
	}
	m := slow(1e12)
	m.RandomBits = 1e9
	in := Input{
		Network: n, Optimizer: Momentum, Batch: 32, Machine: m, Energy: DefaultEnergy(),
		Arms: []Arm{plain, stochastic, compensated},
	}
	r, err := Estimate(&in)
	if err != nil {
		t.Fatal(err)
	}
	update := func(i int) *Figures { return &r.Arms[i].Once.Step.Phases[3].Figures }
	if got := update(1).Random; got != 16*79510 {
		t.Errorf("%d random bits, want 16 a parameter", got)
	}
	const drawn = 16 * 79510 * 0.00625
	if got := update(1).Energy.Random; !near(got, drawn) {
		t.Errorf("random bits take %v pJ, want %v", got, drawn)
	}
	if got := update(1).Energy.Total - update(0).Energy.Total; math.Abs(got-drawn) > 1e-6*drawn {
		t.Errorf("random bits add %v pJ, want %v", got, drawn)
	}
	if s := update(1).Time; s.Binds != Drawing || !near(s.Seconds, 16*79510/1e9) {
		t.Errorf("an update that draws 16 bits a parameter at 1 G/s takes %+v", s)
	}
	if got := update(2).Additions - update(0).Additions; got != 3*79510 {
		t.Errorf("compensation adds %d additions, want three a parameter", got)
	}
	if got := update(2).Traffic.State - update(0).Traffic.State; got != 2*16*79510 {
		t.Errorf("compensation moves %d bits more, want one more tensor in and out", got)
	}
	if got := r.Arms[2].Memory.Training.State - r.Arms[0].Memory.Training.State; got != 16*79510 {
		t.Errorf("compensation keeps %d bits more, want one more tensor", got)
	}
}

// TestConvertedWeights: an input gradient with a weight format of its own reads
// the master copy where there is one, for it is rounded from there.
func TestConvertedWeights(t *testing.T) {
	n := twoLayers()
	arm := masterArm(t, &n, "bf16")
	e4m3 := Point{Format: formatOf(t, "e4m3")}
	arm.Layers[2].InputGradient.First = &e4m3
	r := estimate(t, n, DefaultMachine, arm, masterArm(t, &n, "bf16"))
	f, plain := &r.Arms[0].Once.Step.Layers[2].Phases[1], &r.Arms[1].Once.Step.Layers[2].Phases[1]
	if f.Traffic.Master != 32*1000 || f.Traffic.Weights != 0 || plain.Traffic.Master != 0 || plain.Traffic.Weights != 16*1000 {
		t.Errorf("input gradient reads %+v converted, %+v plain", f.Traffic, plain.Traffic)
	}
	if f.Energy.Multiply >= plain.Energy.Multiply {
		t.Error("narrower operands do not multiply at less energy")
	}
}

// TestForwardOperand: an operand of the forward product with a format of its own
// moves as it is stored, multiplies in its own format, and draws its random bits;
// the weight gradient takes it over, and rounds it anew where its blocks run along
// another axis. So do the weights of the input gradient, from the master copy.
func TestForwardOperand(t *testing.T) {
	n := twoLayers()
	const batch, inputs, weights = 32, 100, 1000 // of dense 10
	e4m3 := Point{Format: formatOf(t, "e4m3"), RandomBits: 3}
	blocked := Point{Format: e4m3.Format.WithBlocks("blocks of 32", 32, 8), RandomBits: 3}
	with := func(weight, operand *Point) Arm {
		arm := masterArm(t, &n, "bf16")
		if weight != nil {
			arm.Layers[2].Weight = *weight
		}
		arm.Layers[2].Operand = operand
		return arm
	}
	r := estimate(t, n, DefaultMachine, with(nil, nil), with(nil, &e4m3), with(nil, &blocked), with(&blocked, &blocked))
	of := func(arm, phase int) *Figures { return &r.Arms[arm].Once.Step.Layers[2].Phases[phase].Figures }
	for arm, want := range [][3]uint64{
		{0, 0, 0},
		{3 * batch * inputs, 0, 0},
		{3 * batch * inputs, 0, 3 * batch * inputs},
		{3 * batch * inputs, 3 * weights, 3 * batch * inputs},
	} {
		for phase, bits := range want {
			if got := of(arm, phase).Random; got != bits {
				t.Errorf("arm %d, %s: %d random bits, want %d", arm, Phases()[phase], got, bits)
			}
		}
		for _, phase := range []int{0, 2} {
			if got, plain := of(arm, phase).Traffic.Activations, of(0, phase).Traffic.Activations; got != plain {
				t.Errorf("arm %d, %s: %d bits of activations move, stored are %d", arm, Phases()[phase], got, plain)
			}
			if arm > 0 && of(arm, phase).Energy.Multiply >= of(0, phase).Energy.Multiply {
				t.Errorf("arm %d, %s: a narrower operand does not multiply at less energy", arm, Phases()[phase])
			}
		}
	}
	if f := of(3, 1); f.Traffic.Weights != 0 || f.Traffic.Master != 32*weights {
		t.Errorf("weights in blocks along the other axis come from %+v, want the master copy", f.Traffic)
	}
	// A scale of every 32 of 100 inputs: one addition a block beside 100 products.
	if a, b := of(2, 0).Energy.Add, of(1, 0).Energy.Add; a <= b {
		t.Errorf("block scales add nothing: %v pJ against %v", a, b)
	}
	bad := with(nil, &Point{Format: Format{Name: "x", Family: Float}})
	in := Input{Network: n, Optimizer: Momentum, Batch: batch, Machine: slow(1), Energy: DefaultEnergy(), Arms: []Arm{bad}}
	if _, err := Estimate(&in); err == nil || !strings.Contains(err.Error(), "operand") {
		t.Errorf("an operand of no bits: %v", err)
	}
}

// TestFirstLayers: layers below the first parameters form no input gradient, and
// neither does the first layer with parameters.
func TestFirstLayers(t *testing.T) {
	n := twoLayers()
	n.Layers = append([]Layer{{Name: "relu", Kind: "relu", Inputs: 784, Outputs: 784}}, n.Layers...)
	r := estimate(t, n, DefaultMachine)
	for i, want := range []uint64{0, 0, 9600, 4520, 320} {
		if got := r.Reference.Once.Step.Layers[i].Phases[1].Values; got != want {
			t.Errorf("layer %d moves %d values in its input gradient, want %d", i, got, want)
		}
	}
	if got := r.Reference.Memory.Training.Activations; got != 32*32*(784+100+100+10) {
		t.Errorf("the input of a layer that forms no gradient is kept: %d bits", got)
	}
}

// TestShorterBlock: the scales of a product change where either operand's do.
func TestShorterBlock(t *testing.T) {
	mx, long := formatOf(t, "mxfp8"), Fixed("", 8).WithBlocks("rows", 100, 32)
	for _, c := range []struct {
		a, b       Format
		axis, want uint64
	}{
		{FP32, FP32, 64, 0},
		{mx, FP32, 64, 32},
		{FP32, mx, 64, 32},
		{mx, long, 784, 32},
		{long, mx, 784, 32},
		{long, FP32, 784, 100},
		{mx, mx, 6, 6},
	} {
		if got := shorterBlock(c.a, c.b, c.axis); got != c.want {
			t.Errorf("%s x %s along %d: %d terms, want %d", c.a.Name, c.b.Name, c.axis, got, c.want)
		}
	}
}

// TestExactAccumulator: the exact sum of products of binary16 numbers spans from
// 2^-48 to 65504^2 < 2^32, so 80 places; with the carries of 1024 terms and a
// sign the model's width may exceed that by a few, never fall below.
func TestExactAccumulator(t *testing.T) {
	fp16 := formatOf(t, "fp16")
	const need = 80 + 10 + 1
	if got := wideFormat(fp16, fp16, 1024).Bits; got < need || got > need+4 {
		t.Errorf("the exact accumulator of binary16 products has %d bits, needs %d", got, need)
	}
	if got := wideFormat(formatOf(t, "int8"), formatOf(t, "int8"), 1<<16).Bits; got < 32 || got > 36 {
		t.Errorf("the exact accumulator of 65536 8-bit products has %d bits", got)
	}
}

// TestStrideGaps: an emulation enumerates the gaps of a stride in the input
// gradient; hardware has as many products there as forward.
func TestStrideGaps(t *testing.T) {
	n := convolutions()
	want := estimate(t, n, DefaultMachine).Reference.Once.Step.Total
	n.Layers[3].Work.InputGradient *= 4
	if got := estimate(t, n, DefaultMachine).Reference.Once.Step.Total; got != want {
		t.Errorf("gaps change the cost: %+v, want %+v", got, want)
	}
	n.Layers[3].Work.InputGradient = 192
	if got := estimate(t, n, DefaultMachine).Reference.Once.Step.Total; got.Multiplies != want.Multiplies-32*(192*4-192) {
		t.Errorf("%d multiplications with a quarter of the products, %d with all", got.Multiplies, want.Multiplies)
	}
}

// TestGradientFormats: a gradient keeps its format through layers that do not
// round it, and a pool that does changes it.
func TestGradientFormats(t *testing.T) {
	n := convolutions()
	arm := uniform(t, &n, "fp32")
	e4m3, bf16 := Point{Format: formatOf(t, "e4m3")}, Point{Format: formatOf(t, "bf16"), RandomBits: 4}
	arm.Loss = e4m3
	arm.Layers[6].InputGradient.Result = e4m3
	arm.Layers[4].InputGradient = Backward{Sums: arm.Layers[4].InputGradient.Sums}
	read := func() (above, below uint64) {
		r := estimate(t, n, DefaultMachine, arm)
		pool := &r.Arms[0].Once.Step.Layers[4].Phases[1]
		conv := &r.Arms[0].Once.Step.Layers[3].Phases[1]
		return pool.Traffic.Gradients, conv.Traffic.Gradients
	}
	if pool, conv := read(); pool != 32*(8+32)*8 || conv != 32*(32*8+54*32) {
		t.Errorf("handed on: %d and %d bits", pool, conv)
	}
	arm.Layers[4].InputGradient.Result = bf16
	if pool, conv := read(); pool != 32*(8*8+32*16) || conv != 32*(32*16+54*32) {
		t.Errorf("rounded by the pool: %d and %d bits", pool, conv)
	}
	if r := estimate(t, n, DefaultMachine, arm); r.Arms[0].Once.Step.Layers[4].Total.Random != 4*32*32 {
		t.Errorf("the pool draws %d random bits, want 4 a gradient", r.Arms[0].Once.Step.Layers[4].Total.Random)
	}
}
