package cost

import (
	"strings"
	"testing"
)

// TestAdam: two states in and out, and the operations of the formula, a
// parameter: m = b1 m + (1-b1) g; v = b2 v + (1-b2) g g; step = lr (c1 m) /
// (sqrt(c2 v) + epsilon); w - step. Multiplications: 2 + 3 + 3, additions: 1 +
// 1 + 1 + 1, one root and one division.
func TestAdam(t *testing.T) {
	n := twoLayers()
	m := slow(1e6)
	in := Input{Network: n, Optimizer: Adam, Batch: 32, Machine: m, Energy: DefaultEnergy()}
	r, err := Estimate(&in)
	if err != nil {
		t.Fatal(err)
	}
	const params = 79510
	f := &r.Reference.Once.Step.Phases[3]
	if f.Multiplies != 8*params || f.Additions != 4*params || f.Traffic.State != 4*32*params {
		t.Errorf("%d multiplications, %d additions, %d bits of states", f.Multiplies, f.Additions, f.Traffic.State)
	}
	if want := 3.7 * (8 + 2*DivisionAsMultiplies) * params; !near(f.Energy.Multiply, want) || !f.Energy.Extrapolated {
		t.Errorf("multiplications and divisions take %v pJ, want %v, extrapolated", f.Energy.Multiply, want)
	}
	if want := (12 + 2*DivisionAsMultiplies) * params / 1e6; !near(f.Time.Arithmetic, want) {
		t.Errorf("arithmetic takes %v s at a million a second, want %v", f.Time.Arithmetic, want)
	}
	if got := r.Reference.Memory.Training.State; got != 2*32*params {
		t.Errorf("states take %d bits", got)
	}
	if !strings.Contains(strings.Join(r.Assumptions, "\n"), "counts as 6 multiplications") {
		t.Error("the price of a division is not stated")
	}
}

// TestOptimizers counts the operations of the other formulas a parameter, the
// final difference included.
func TestOptimizers(t *testing.T) {
	for _, c := range []struct {
		o                     Optimizer
		multiplies, additions uint64
	}{
		{SGD, 1, 1},      // lr g; w - step
		{Momentum, 2, 2}, // mu v, lr v; + g, w - step
		{Nesterov, 3, 3}, // mu v, mu v again, lr (); + g twice, w - step
		{AdamW, 9, 5},    // as Adam; (lr decay) w; its addition
	} {
		in := Input{Network: twoLayers(), Optimizer: c.o, Batch: 1, Machine: slow(1), Energy: DefaultEnergy()}
		r, err := Estimate(&in)
		if err != nil {
			t.Fatal(err)
		}
		f := &r.Reference.Once.Step.Phases[3]
		if f.Multiplies != c.multiplies*79510 || f.Additions != c.additions*79510 {
			t.Errorf("%s: %d multiplications and %d additions a parameter", c.o.Name, f.Multiplies/79510, f.Additions/79510)
		}
	}
}

// TestLossScale: dividing by the loss scale is one multiplication a parameter.
func TestLossScale(t *testing.T) {
	n := twoLayers()
	scaled := uniform(t, &n, "fp16")
	scaled.LossScaled = true
	r := estimate(t, n, DefaultMachine, uniform(t, &n, "fp16"), scaled)
	plain, with := &r.Arms[0].Once.Step.Phases[3], &r.Arms[1].Once.Step.Phases[3]
	if with.Multiplies-plain.Multiplies != 79510 || with.Bits != plain.Bits {
		t.Errorf("%d multiplications against %d, %d bits against %d", with.Multiplies, plain.Multiplies, with.Bits, plain.Bits)
	}
}

// TestMixedStates: a state narrower than the other moves and keeps its own bits.
func TestMixedStates(t *testing.T) {
	n := twoLayers()
	arm := Uniform(&n, &Adam, "mixed", FP32)
	for _, i := range []int{0, 2} {
		arm.Layers[i].States[1] = Point{Format: formatOf(t, "bf16"), RandomBits: 8}
	}
	m, _ := FindMachine(DefaultMachine)
	r, err := Estimate(&Input{Network: n, Optimizer: Adam, Batch: 32, Machine: m, Energy: DefaultEnergy(), Arms: []Arm{arm}})
	if err != nil {
		t.Fatal(err)
	}
	if got := r.Arms[0].Memory.Training.State; got != (32+16)*79510 {
		t.Errorf("states keep %d bits a parameter", got/79510)
	}
	if got := r.Arms[0].Once.Step.Phases[3].Traffic.State; got != 2*(32+16)*79510 {
		t.Errorf("states move %d bits a parameter", got/79510)
	}
}

// TestThrough32: an adder that rounds to binary32 first costs what a binary32
// adder does.
func TestThrough32(t *testing.T) {
	n := twoLayers()
	arm := uniform(t, &n, "fp16")
	for i := range arm.Layers {
		arm.Layers[i].Forward.Through32 = true
	}
	r := estimate(t, n, DefaultMachine, arm)
	if got, want := r.Arms[0].Once.Inference.Total.Energy.Add, 0.9*79510; !near(got, want) {
		t.Errorf("additions of an inference take %v pJ, want %v", got, want)
	}
}

// TestOtherLayers: a join adds without products, a normalisation with weights
// reads its input again for the input gradient.
func TestOtherLayers(t *testing.T) {
	n := Network{Layers: []Layer{
		{Name: "dense 8", Kind: "dense", Weights: 32, Inputs: 4, Outputs: 8, Work: Work{32, 32, 32}, Terms: Work{4, 8, 1}},
		{Name: "residual", Kind: "residual", Inputs: 8, Outputs: 8, Work: Work{8, 0, 0}, Terms: Work{1, 0, 0}},
		{Name: "norm", Kind: "layer norm", Weights: 8, Biases: 8, Inputs: 8, Outputs: 8, Work: Work{8, 8, 8}, Terms: Work{1, 1, 1}},
	}}
	r := estimate(t, n, "microcontroller-2011")
	step := &r.Reference.Once.Step
	if f := &step.Layers[1].Phases[0]; f.Multiplies != 0 || f.Additions != 32*8 {
		t.Errorf("a join multiplies %d times and adds %d times", f.Multiplies, f.Additions)
	}
	if f := &step.Layers[1].Phases[1]; f.Traffic.Activations != 0 {
		t.Errorf("a join's input gradient reads %d bits of activations", f.Traffic.Activations)
	}
	if f := &step.Layers[2].Phases[1]; f.Traffic.Activations != 32*32*8 {
		t.Errorf("a normalisation's input gradient reads %d bits of activations", f.Traffic.Activations)
	}
}
