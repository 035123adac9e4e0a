package experiments

import (
	"errors"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"

	"ulpine/experiments/plan"
	"ulpine/results/cost"
	"ulpine/trainer"
)

// costsOf is the costs of a plan on the default tables.
func costsOf(t *testing.T, p *plan.Plan) *cost.Result {
	t.Helper()
	m, err := MachineOf("")
	if err != nil {
		t.Fatal(err)
	}
	e, err := EnergyOf("")
	if err != nil {
		t.Fatal(err)
	}
	r, err := Costs(p, m, e)
	if err != nil {
		t.Fatal(err)
	}
	return r
}

// TestCostNetwork counts by hand: one signal of 128 under two kernels of nine at
// a stride of eight is 2 x 15; dense 30 -> 5.
func TestCostNetwork(t *testing.T) {
	got := costsOf(t, tinyPlan(t, "")).Network.Layers
	want := []cost.Layer{
		{
			Name: "conv1d out=2 width=9 stride=8 pad=0", Kind: "conv1d", Weights: 18, Biases: 2, Inputs: 128, Outputs: 30,
			Work:  cost.Work{Forward: 18 * 15, InputGradient: got[0].Work.InputGradient, WeightGradient: 18 * 15},
			Terms: cost.Work{Forward: 9, InputGradient: 18, WeightGradient: 15}, InAxis: 1, OutAxis: 2,
		},
		{Name: "relu", Kind: "relu", Inputs: 30, Outputs: 30},
		{
			Name: "dense 5", Kind: "dense", Weights: 150, Biases: 5, Inputs: 30, Outputs: 5,
			Work:  cost.Work{Forward: 150, InputGradient: 150, WeightGradient: 150},
			Terms: cost.Work{Forward: 30, InputGradient: 5, WeightGradient: 1}, InAxis: 30, OutAxis: 5,
		},
	}
	if diff := cmp.Diff(want, got); diff != "" {
		t.Error(diff)
	}
}

// TestCostGroups: two groups of three channels each, four kernels.
func TestCostGroups(t *testing.T) {
	const old = `layers = ["conv1d out=2 width=9 stride=8", "relu", "dense 5"]`
	l := costsOf(t, tinyPlan(t, "", old, `layers = ["conv1d out=6 width=9 stride=8", "conv1d out=4 width=3 groups=2", "dense 5"]`)).Network.Layers[1]
	if l.Groups != 2 || l.InAxis != 3 || l.OutAxis != 2 || l.Weights != 4*3*3 || l.Terms.Forward != 9 || l.Work.Forward != 9*4*13 {
		t.Errorf("%+v", l)
	}
}

// TestCostOfEveryLayer: the model takes whatever layers the trainer has.
func TestCostOfEveryLayer(t *testing.T) {
	const old = `layers = ["conv1d out=2 width=9 stride=8", "relu", "dense 5"]`
	p := tinyPlan(t, "", old, `layers = ["conv1d out=4 width=9 stride=4", "batchnorm", "leakyrelu", "residual begin", "conv1d out=4 width=3 pad=1", "layernorm", "gelu", "residual end",
	    "maxpool size=2", "avgpool size=2", "dropout 0.1", "tanh", "sigmoid", "attention", "recurrent units=4 output=all", "globalavgpool", "dense 5"]`)
	r := costsOf(t, p)
	for i, l := range r.Network.Layers {
		if want := uint64(parameters(&p.Network.Layers[i])); l.Weights+l.Biases != want {
			t.Errorf("%s: %d weights and %d biases, want %d parameters", l.Name, l.Weights, l.Biases, want)
		}
	}
	if a := r.Arms[0]; a.Once.Step.Total.Against.Bits > 0.6 || a.Once.Step.Total.Against.Bits < 0.45 {
		t.Errorf("everything stored in bf16 moves %g of FP32's bits", a.Once.Step.Total.Against.Bits)
	}
}

// TestCostOfSeveralProducts counts a recurrent layer by hand: at 32 times, three units
// over one input and three states; its lowest gradients are those of 31 states.
func TestCostOfSeveralProducts(t *testing.T) {
	const old = `layers = ["conv1d out=2 width=9 stride=8", "relu", "dense 5"]`
	p := tinyPlan(t, "", old, `layers = ["avgpool size=4", "recurrent units=3", "dense 5"]`)
	r := costsOf(t, p)
	want := cost.Layer{
		Name: "recurrent units=3 cell=elman output=last", Kind: "recurrent", Weights: 12, Biases: 3, Inputs: 32, Outputs: 3,
		Work:  cost.Work{Forward: 12 * 32, InputGradient: 3*32 + 9*31, WeightGradient: 12 * 32},
		Terms: cost.Work{Forward: 4, InputGradient: 3, WeightGradient: 32}, InAxis: 1, OutAxis: 3,
		Inner: cost.Inner{Values: 3*32 - 3, Gradients: 3*32 + 3*31, Taken: 4 * 32, Slopes: 3 * 32, Work: 9 * 31, Terms: 3},
	}
	if diff := cmp.Diff(want, r.Network.Layers[1]); diff != "" {
		t.Error(diff)
	}
	if a := r.Arms[0]; a.Once.Step.Total.Against.Bits > 0.6 || a.Once.Step.Total.Against.Bits < 0.45 {
		t.Errorf("everything stored in bf16 moves %g of FP32's bits", a.Once.Step.Total.Against.Bits)
	}
	got := map[string]uint64{}
	for _, v := range volumes(p) {
		if v.Layer == 1 {
			got[v.Point] = v.Values / uint64(p.Task.Train*p.Training.Epochs)
		}
	}
	for point, n := range map[string]uint64{"forward.activation": 96, "forward.sum": 12 * 32, "input_gradient.sum": 9 * 31, "input_gradient.result": 189, "weight_gradient.sum": 12 * 32} {
		if got[point] != n {
			t.Errorf("%s: %d values of an example, want %d", point, got[point], n)
		}
	}
}

// parameters are the trained values of a layer.
func parameters(s *trainer.Spec) int {
	n := trainer.Network{Layers: []trainer.Spec{*s}}
	return n.Parameters()
}

// TestCostArm holds every point that a layer has to where the plan set it.
func TestCostArm(t *testing.T) {
	p := tinyPlan(t, `
[[arm]]
name = "x"
everything = "fp16"
input = "E4M3"
loss.gradient = "E5M2"
forward.weight = "E6M9"
forward.activation = { format = "bf16", rounding = "stochastic", random_bits = 7 }
forward.operand = { format = "E5M4", rounding = "stochastic", random_bits = 5 }
forward.product = "exact"
forward.sum = { format = "fp32", order = "chunk(4)", outer = "fp64" }
input_gradient.weight = "E4M2"
input_gradient.gradient = "E5M1"
input_gradient.product = { format = "E5M9", rounding = "stochastic", random_bits = 3 }
input_gradient.sum = { format = "E5M8", order = "lanes(4)", through = "binary32" }
input_gradient.result = "E5M7"
weight_gradient.activation = "E4M1"
weight_gradient.gradient = "E3M1"
weight_gradient.sum = { format = "E6M8", order = "wide" }
weight_gradient.result = "E6M7"
update.state = "E7M7"
update.step = "E7M8"
update.master = { format = "E8M9", rounding = "stochastic", random_bits = 20 }
loss_scale = { kind = "fixed", value = 8 }
`)
	a := costArm(p, &p.Arms[len(p.Arms)-1])
	f := func(name string, random ...int) cost.Point {
		format, ok := cost.FormatNamed(name)
		if !ok {
			t.Fatal(name)
		}
		point := cost.Point{Format: format}
		for _, r := range random {
			point.RandomBits = r
		}
		return point
	}
	at := func(p cost.Point) *cost.Point { return &p }
	dense := cost.Assignment{
		Weight: f("E6M9"), Activation: f("bf16", 7), Operand: at(f("E5M4", 5)),
		Forward: cost.Sums{Sum: f("fp32"), Outer: at(f("fp64")), Order: cost.Chunk, K: 4},
		InputGradient: cost.Backward{
			First: at(f("E4M2")), Gradient: at(f("E5M1")),
			Sums:   cost.Sums{Product: at(f("E5M9", 3)), Sum: f("E5M8"), Order: cost.Lanes, K: 4, Through32: true},
			Result: f("E5M7"),
		},
		WeightGradient: cost.Backward{
			First: at(f("E4M1")), Gradient: at(f("E3M1")),
			Sums:   cost.Sums{Product: at(f("fp16")), Sum: f("E6M8"), Order: cost.Wide},
			Result: f("E6M7"),
		},
		States: []cost.Point{f("E7M7")}, Step: f("E7M8"), Master: f("E8M9", 20),
	}
	// everything = "fp16" sets outer sums as fp16; where the sum has a key of its
	// own without outer, they stay so.
	dense.InputGradient.Sums.Outer, dense.WeightGradient.Sums.Outer = a.Layers[2].InputGradient.Sums.Outer, a.Layers[2].WeightGradient.Sums.Outer
	if diff := cmp.Diff(dense, a.Layers[2]); diff != "" {
		t.Error("dense:", diff)
	}
	conv := dense
	conv.InputGradient = cost.Backward{} // nothing below it to train
	if diff := cmp.Diff(conv, a.Layers[0]); diff != "" {
		t.Error("conv1d:", diff)
	}
	if diff := cmp.Diff(cost.Assignment{Activation: f("bf16", 7)}, a.Layers[1]); diff != "" {
		t.Error("relu:", diff)
	}
	if diff := cmp.Diff(cost.Arm{Name: "x", Slug: "x", Input: f("E4M3"), Loss: f("E5M2"), LossScaled: true}, cost.Arm{
		Name: a.Name, Slug: a.Slug, Input: a.Input, Loss: a.Loss, LossScaled: a.LossScaled,
	}); diff != "" {
		t.Error(diff)
	}
}

// TestBits counts by hand: batch 16; conv 128 -> 2 x 15 with 20 parameters,
// ReLU, dense 30 -> 5 with 155.
func TestBits(t *testing.T) {
	p := tinyPlan(t, "[[arm]]\nname = \"x\"\nforward.activation = \"E4M3\"\nforward.weight = \"bf16\"\n")
	const params, batch = 20 + 155, 16
	const (
		bits8  = batch * (30 + 30 + 5)             // the inputs of ReLU and dense, the logits
		bits16 = params                            // working copies, apart from the masters
		bits32 = batch*128 + 3*params + 2*batch*30 // input; gradient, state, master; gradients on both sides of ReLU
	)
	want := float64(8*bits8+16*bits16+32*bits32) / float64(bits8+bits16+bits32)
	s := describe(newLayout(p))
	got := s.Arms
	if len(got) != 5 || got[0].Bits != 32 || got[1].Bits != 16 || math.Abs(got[4].Bits-want) > 1e-12 {
		t.Errorf("%+v bits a value, want 32, 16, ... and %v", got, want)
	}
	if x := costsOf(t, p).Arms[3]; x.Slug != "x" || x.Memory.Training.Bits != 8*bits8+16*bits16+32*bits32 {
		t.Errorf("%s: %d bits", x.Slug, x.Memory.Training.Bits)
	}
}

// TestCostsOfOwnTraining: an arm with a batch of its own is set beside FP32 with
// that batch, and stays in its place.
func TestCostsOfOwnTraining(t *testing.T) {
	r := costsOf(t, tinyPlan(t, "[[arm]]\nname = \"small\"\nstorage = \"bf16\"\ntraining.batch = 4\n[[arm]]\nname = \"last\"\nstorage = \"fp16\"\n"))
	var order []string
	for _, a := range r.Arms {
		order = append(order, a.Slug)
	}
	if got := strings.Join(order, " "); got != "bf16-nearest bf16-stochastic fp32-again small last" {
		t.Fatalf("arms %s", got)
	}
	warned := false
	for _, w := range r.Warnings {
		warned = warned || strings.HasPrefix(w, "small trains with sgd with momentum and a batch of 4")
	}
	if small, whole := r.Arms[3].Once.Step, r.Arms[0].Once.Step; !warned || small.Total.Bits >= whole.Total.Bits {
		t.Errorf("warnings %q, %d bits a step with a batch of 4, %d with 16", r.Warnings, small.Total.Bits, whole.Total.Bits)
	}
}

const machineFile = `[machine]
name = "bench"
date = "2026-01"
source = "measured by me"
bandwidth = 1e9
cache = 1024
elementwise = 5e8
random_bits = 1e9
absent = "width"

[[machine.rate]]
operands = "fp32"
multiply_adds = 1e9

[[machine.rate]]
operands = "tens"
sum = "fp32"
multiply_adds = 2e9
source = "a guess"

[[machine.format]]
name = "tens"
bits = 10
exponent = 5
fraction = 4
`

const energyFile = `[energy]
name = "mine"
date = "2026"
source = "measured by me"
process = "7 nm"
memory_per_64_bits = 100
random_bit = 0.5
uses_per_read = 2
notes = ["a doubt"]
[[energy.operation]]
format = "fp32"
multiply = 4
add = 1
[[energy.cache]]
bytes = 1024
per_64_bits = 2.5
`

func writeFile(t *testing.T, text string) string {
	t.Helper()
	file := filepath.Join(t.TempDir(), "table.toml")
	if err := os.WriteFile(file, []byte(text), 0o600); err != nil {
		t.Fatal(err)
	}
	return file
}

func TestTablesFromFiles(t *testing.T) {
	m, err := MachineOf(writeFile(t, machineFile))
	if err != nil {
		t.Fatal(err)
	}
	if diff := cmp.Diff(cost.Machine{
		Name: "bench", Date: "2026-01", Source: "measured by me", Bandwidth: 1e9, Cache: 1024, Elementwise: 5e8, RandomBits: 1e9, Absent: "width",
		Rates:   []cost.Rate{{Operands: "fp32", MultiplyAdds: 1e9}, {Operands: "tens", Sum: "fp32", MultiplyAdds: 2e9, Source: "a guess"}},
		Formats: []cost.Format{cost.Plain("tens", 5, 4)},
	}, m); diff != "" {
		t.Error(diff)
	}
	e, err := EnergyOf(writeFile(t, energyFile))
	if err != nil {
		t.Fatal(err)
	}
	if diff := cmp.Diff(cost.EnergyTable{
		Name: "mine", Date: "2026", Source: "measured by me", Process: "7 nm", Memory: 100, Random: 0.5, Reuse: 2, Notes: []string{"a doubt"},
		Operations: []cost.OperationRow{{Format: "fp32", Multiply: 4, Add: 1}},
		Caches:     []cost.CacheRow{{Bytes: 1024, Per64Bits: 2.5}}, Formats: []cost.Format{},
	}, e); diff != "" {
		t.Error(diff)
	}
	if r, err := Costs(tinyPlan(t, ""), m, e); err != nil || r.Machine.Name != "bench" || r.Energy.Name != "mine" {
		t.Errorf("%v", err)
	}
}

// TestFaultyTables: what the model finds wrong is told with file, line and key.
func TestFaultyTables(t *testing.T) {
	for _, c := range []struct{ old, new, want string }{
		{`multiply_adds = 2e9`, `multiply_adds = -2e9`, ":18: machine.rate[2].multiply_adds: -2e+09 is not a finite number above zero; give "},
		{`operands = "tens"`, `operands = "twelves"`, `:16: machine.rate[2].operands: "twelves" is no known format; use fp16`},
		{`bandwidth = 1e9`, ``, ":1: machine.bandwidth: 0 is not a finite number above zero; give "},
		{`bandwidth = 1e9`, `bandwith = 1e9`, `:5: machine.bandwith: unknown key; did you mean "bandwidth"?`},
		{`cache = 1024`, `cache = "big"`, `:6: machine.cache: wrong type: "big" is a text, want a whole number`},
		{`date = "2026-01"`, `date = "now"`, `:3: machine.date: "now" is no date of the figures; write `},
		{`[machine]`, `[machines]`, `:1: machines: unknown key; did you mean "machine"?`},
		{`fraction = 4`, `fraction = 99999`, `:25: machine.format[1].fraction: 99999 is out of range`},
	} {
		file := writeFile(t, strings.Replace(machineFile, c.old, c.new, 1))
		_, err := MachineOf(file)
		if err == nil || !strings.Contains(err.Error(), file+c.want) {
			t.Errorf("%q: %v, want %s", c.new, err, c.want)
		}
		var one *plan.PlanError
		if !errors.As(err, &one) {
			t.Errorf("%q: %T", c.new, err)
		}
	}
	file := writeFile(t, strings.Replace(energyFile, "add = 1", "add = -1", 1))
	if _, err := EnergyOf(file); err == nil || !strings.Contains(err.Error(), file+":13: energy.operation[1].add: -1 is not") {
		t.Errorf("%v", err)
	}
	if _, err := EnergyOf("nowhere.toml"); !errors.Is(err, os.ErrNotExist) {
		t.Errorf("%v", err)
	}
}

// TestShippedTables: the tables that ship to start from are valid.
func TestShippedTables(t *testing.T) {
	m, err := MachineOf("plans/tables/machine.toml")
	if err != nil {
		t.Fatal(err)
	}
	e, err := EnergyOf("plans/tables/energy.toml")
	if err != nil {
		t.Fatal(err)
	}
	if _, err := Costs(tinyPlan(t, ""), m, e); err != nil {
		t.Error(err)
	}
}

// TestCostsOfOptimizers: every kind of the trainer has a cost, compensation too.
func TestCostsOfOptimizers(t *testing.T) {
	const old = `optimizer = { kind = "sgd", momentum = 0.9 }`
	for _, kind := range trainer.OptimizerNames() {
		momentum := ""
		if kind == "nesterov" {
			momentum = ", momentum = 0.9"
		}
		plain := costsOf(t, tinyPlan(t, "", old, `optimizer = { kind = "`+kind+`"`+momentum+` }`)).Arms[0].Memory.Training
		kept := costsOf(t, tinyPlan(t, "", old, `optimizer = { kind = "`+kind+`"`+momentum+`, compensated = true }`)).Arms[0].Memory.Training
		if kept.State != plain.State+175*16 {
			t.Errorf("%s: %d bits of states, %d with compensation, want 175 bf16 numbers more", kind, plain.State, kept.State)
		}
	}
}
