package cost

import "testing"

// twoLayers is the network 784-100-10 with a ReLU between its layers.
func twoLayers() Network {
	return Network{Layers: []Layer{
		{
			Name: "dense 100", Kind: "dense", Weights: 78400, Biases: 100, Inputs: 784, Outputs: 100,
			Work: Work{78400, 78400, 78400}, Terms: Work{784, 100, 1}, InAxis: 784, OutAxis: 100,
		},
		{Name: "relu", Kind: "relu", Inputs: 100, Outputs: 100},
		{
			Name: "dense 10", Kind: "dense", Weights: 1000, Biases: 10, Inputs: 100, Outputs: 10,
			Work: Work{1000, 1000, 1000}, Terms: Work{100, 10, 1}, InAxis: 100, OutAxis: 10,
		},
	}}
}

// convolutions is a network with every way a layer can be treated: 8x8 in one
// channel, six 3x3 kernels, average and maximum pools, a flatten, a dense layer.
func convolutions() Network {
	return Network{Layers: []Layer{
		{
			Name: "conv2d out=6 width=3", Kind: "conv2d", Weights: 54, Biases: 6, Inputs: 64, Outputs: 216,
			Work: Work{54 * 36, 54 * 36, 54 * 36}, Terms: Work{9, 54, 36}, InAxis: 1, OutAxis: 6,
		},
		{Name: "relu", Kind: "relu", Inputs: 216, Outputs: 216},
		{
			Name: "maxpool 2", Kind: "maxpool", Inputs: 216, Outputs: 54,
			Work: Work{216, 0, 0}, Terms: Work{4, 0, 0},
		},
		{
			Name: "conv2d out=8 width=2", Kind: "conv2d", Weights: 192, Biases: 8, Inputs: 54, Outputs: 32,
			Work: Work{192 * 4, 192 * 4, 192 * 4}, Terms: Work{24, 32, 4}, InAxis: 6, OutAxis: 8,
		},
		{
			Name: "avgpool 2", Kind: "avgpool", Inputs: 32, Outputs: 8,
			Work: Work{32, 32, 0}, Terms: Work{4, 1, 0},
		},
		{Name: "flatten", Kind: "flatten", Inputs: 8, Outputs: 8},
		{
			Name: "dense 4", Kind: "dense", Weights: 32, Biases: 4, Inputs: 8, Outputs: 4,
			Work: Work{32, 32, 32}, Terms: Work{8, 4, 1}, InAxis: 8, OutAxis: 4,
		},
	}}
}

func formatOf(t testing.TB, name string) Format {
	t.Helper()
	f, ok := FormatNamed(name)
	if !ok {
		t.Fatalf("no format %q", name)
	}
	return f
}

// uniform is Uniform for momentum, by the format's name.
func uniform(t testing.TB, n *Network, format string) Arm {
	return Uniform(n, &Momentum, format, formatOf(t, format))
}

// masterArm keeps momentum and master copy in FP32 and has FP32 sums.
func masterArm(t testing.TB, n *Network, format string) Arm {
	arm := uniform(t, n, format)
	arm.Name = format + " storage, fp32 master"
	wide := Point{Format: FP32}
	for i := range arm.Layers {
		a := &arm.Layers[i]
		for _, s := range []*Sums{&a.Forward, &a.InputGradient.Sums, &a.WeightGradient.Sums} {
			if !s.Sum.Format.IsZero() {
				s.Sum, s.Product = wide, nil
			}
		}
		if n.Layers[i].parameters() > 0 {
			a.Step, a.Master, a.States = wide, wide, []Point{wide}
		}
	}
	return arm
}

// stochasticArm draws at every kind of point and compensates its updates.
func stochasticArm(t testing.TB, n *Network) Arm {
	arm := masterArm(t, n, "bf16")
	arm.Name, arm.LossScaled = "stochastic", true
	bf16 := formatOf(t, "bf16")
	draw := func(f Format, bits int) Point { return Point{Format: f, RandomBits: bits} }
	for i := range arm.Layers {
		a := &arm.Layers[i]
		if n.Layers[i].parameters() == 0 {
			continue
		}
		e4m3 := draw(formatOf(t, "E4M3"), 3)
		product := draw(bf16, 5)
		outer := draw(FP32, 7)
		a.Activation.RandomBits, a.Weight.RandomBits, a.Master.RandomBits, a.Step.RandomBits = 8, 9, 10, 11
		a.States[0].RandomBits = 12
		a.InputGradient.First, a.InputGradient.Gradient, a.WeightGradient.Gradient = &e4m3, &e4m3, &e4m3
		a.Forward = Sums{Product: &product, Sum: draw(bf16, 6), Outer: &outer, Order: Chunk, K: 16}
		a.InputGradient.Sums.Order, a.InputGradient.Sums.K = Lanes, 4
		a.WeightGradient.Sums.Order = Compensated
		a.WeightGradient.Sums.Sum.RandomBits = 1
		a.Compensation = &Point{Format: bf16, RandomBits: 2}
	}
	return arm
}

// estimate is Estimate of a batch of 32 on the default tables.
func estimate(t testing.TB, n Network, machine string, arms ...Arm) *Result {
	t.Helper()
	m, ok := FindMachine(machine)
	if !ok {
		t.Fatalf("no machine %q", machine)
	}
	r, err := Estimate(&Input{
		Network: n, Optimizer: Momentum, Batch: 32, Arms: arms, Machine: m, Energy: DefaultEnergy(),
	})
	if err != nil {
		t.Fatal(err)
	}
	return r
}
