package cost

import "testing"

// TestResidue: error feedback keeps a tensor of the parameters' size, reads and
// writes it, and adds twice a parameter.
func TestResidue(t *testing.T) {
	const params = 79510
	n := twoLayers()
	fed := uniform(t, &n, "fp16")
	for i := range fed.Layers {
		if n.Layers[i].parameters() > 0 {
			fed.Layers[i].WeightGradient.Residue = &Point{Format: formatOf(t, "bf16"), RandomBits: 4}
		}
	}
	r := estimate(t, n, DefaultMachine, uniform(t, &n, "fp16"), fed)
	plain, with := &r.Arms[0], &r.Arms[1]
	a, b := &plain.Once.Step.Phases[2], &with.Once.Step.Phases[2]
	if got := with.Memory.Training.State - plain.Memory.Training.State; got != 16*params {
		t.Errorf("%d more bits of memory", got)
	}
	if b.Traffic.State-a.Traffic.State != 2*16*params || b.Additions-a.Additions != 2*params || b.Random-a.Random != 4*params {
		t.Errorf("%d bits moved, %d additions, %d random bits", b.Traffic.State-a.Traffic.State, b.Additions-a.Additions, b.Random-a.Random)
	}
	if plain.Once.Inference.Total != with.Once.Inference.Total {
		t.Error("an inference pays for error feedback")
	}
}

// TestChannels: an input of two channels of 8 bits and one of 32 moves 16 bits a value
// on average, where the first layer reads it; multipliers hold the widest.
func TestChannels(t *testing.T) {
	n := twoLayers()
	n.Layers[0].Inputs = n.Layers[0].Inputs / 3 * 3
	arm := Uniform(&n, &SGD, "mixed", FP32)
	eight := Point{Format: formatOf(t, "E4M3")}
	arm.Channels = []Point{eight, {Format: FP32}, eight}
	b := bind(&n, &SGD, &arm)
	if x := b.input(0, 10); x.bits() != 16*x.values || x.format.Bits != 32 {
		t.Errorf("%d values take %d bits", x.values, x.bits())
	}
	if y := b.output(0, 10); y.bits() != 32*y.values {
		t.Errorf("the first layer's output takes %d bits", y.bits())
	}
	var memory Memory
	memory.keep(-1, b.input(0, 10))
	if got := memory.Tensors[0]; got.Width != 16 || got.Format != "by channel" {
		t.Errorf("%+v", got)
	}
}
