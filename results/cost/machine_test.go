package cost

import (
	"errors"
	"fmt"
	"math"
	"strings"
	"testing"
)

// TestBuiltIns: the tables that ship are valid, dated and sourced, and a caller's
// changes do not reach the next one.
func TestBuiltIns(t *testing.T) {
	if MachineNames()[0] != DefaultMachine {
		t.Errorf("the first machine is %s, the default %s", MachineNames()[0], DefaultMachine)
	}
	for _, name := range MachineNames() {
		m, _ := FindMachine(name)
		if err := m.Validate(); err != nil {
			t.Errorf("%s: %v", name, err)
		}
		m.Rates[0].MultiplyAdds = -1
		if again, _ := FindMachine(name); again.Rates[0].MultiplyAdds < 0 {
			t.Errorf("%s: a copy shares its rates", name)
		}
	}
	e := DefaultEnergy()
	if err := e.Validate(); err != nil {
		t.Error(err)
	}
	if _, ok := FindMachine("abacus"); ok {
		t.Error("an unknown machine was found")
	}
}

func TestRate(t *testing.T) {
	m, _ := FindMachine("accelerator-2020")
	wish := m
	wish.Absent = AbsentWidth
	quad := Plain("binary128", 15, 112) // nothing holds it
	if got := m.rate(quad, quad, quad); !near(got.rate, 4.85e12/2) || !strings.Contains(got.extrapolated, "no row holds them") {
		t.Errorf("binary128: %+v", got)
	}
	for _, c := range []struct {
		machine   *Machine
		a, b, sum string
		want      float64
		exact     bool
	}{
		{&m, "fp32", "fp32", "fp32", 9.75e12, true},
		{&m, "E8M23", "binary32", "fp32", 9.75e12, true}, // by build, not by name
		{&m, "bf16", "bf16", "fp32", 156e12, true},
		{&m, "bf16", "bf16", "bf16", 156e12, false},
		{&m, "fp16", "fp16", "fp16", 156e12, true},
		{&m, "fp16", "bf16", "fp32", 78e12, false}, // only 1-8-10 holds both
		{&m, "bf16", "bf16", "fp64", 4.85e12, false},
		{&m, "E6M9", "E6M9", "fp32", 78e12, false},
		{&m, "E8M11", "E8M11", "fp32", 9.75e12, false},
		{&m, "e4m3", "e5m2", "fp32", 156e12, false},
		{&m, "mxfp8", "mxfp8", "fp32", 156e12, false},
		{&m, "int8", "int8", "int32", 312e12, true},
		{&m, "int4", "int8", "int32", 312e12, false},
		{&m, "int8", "int8", "fp32", 156e12, false},
		{&wish, "e4m3", "e4m3", "fp32", 312e12, false},
		{&wish, "bf16", "bf16", "fp32", 156e12, true},
		{&wish, "fp16", "bf16", "fp32", 78e12 * 19 / 16, false},
	} {
		got := c.machine.rate(formatOf(t, c.a), formatOf(t, c.b), formatOf(t, c.sum))
		if !near(got.rate, c.want) || (got.extrapolated == "") != c.exact {
			t.Errorf("%s x %s into %s: %g (%q), want %g, exact %v", c.a, c.b, c.sum, got.rate, got.extrapolated, c.want, c.exact)
		}
	}
}

// TestExactSumsAreMarked: no machine's table has exact sums.
func TestExactSumsAreMarked(t *testing.T) {
	n := twoLayers()
	arm := uniform(t, &n, "fp32")
	arm.Layers[0].Forward.Order = Wide
	r := estimate(t, n, DefaultMachine, arm)
	a := &r.Arms[0].Once
	if !a.TimeLabel.Extrapolated || !strings.Contains(a.TimeLabel.Rules[0], "exact sums") || !a.EnergyLabel.Extrapolated {
		t.Errorf("labels %+v, %+v", a.TimeLabel, a.EnergyLabel)
	}
}

// fields are the fields that an error names.
func fields(t *testing.T, err error) string {
	t.Helper()
	var names []string
	for _, f := range FieldErrors(err) {
		if f.Reason == "" || f.Remedy == "" || !strings.Contains(err.Error(), f.Field+": "+f.Reason+"; "+f.Remedy) {
			t.Errorf("incomplete: %+v in %q", f, err)
		}
		var one *FieldError
		if !errors.As(err, &one) {
			t.Errorf("%v holds no field error", err)
		}
		names = append(names, f.Field)
	}
	return strings.Join(names, " ")
}

func TestInvalidMachines(t *testing.T) {
	for want, spoil := range map[string]func(*Machine){
		"":                      func(*Machine) {},
		"name":                  func(m *Machine) { m.Name = "" },
		"source":                func(m *Machine) { m.Source = "" },
		"date":                  func(m *Machine) { m.Date = "last year" },
		"bandwidth":             func(m *Machine) { m.Bandwidth = math.NaN() },
		"cache":                 func(m *Machine) { m.Cache = 8 },
		"elementwise":           func(m *Machine) { m.Elementwise = -1 },
		"random_bits":           func(m *Machine) { m.RandomBits = math.Inf(1) },
		"absent":                func(m *Machine) { m.Absent = "guess" },
		"rate":                  func(m *Machine) { m.Rates = nil },
		"rate[1].multiply_adds": func(m *Machine) { m.Rates[0].MultiplyAdds = 0 },
		"rate[2].operands":      func(m *Machine) { m.Rates[1].Operands = "fp33" },
		"rate[2].sum":           func(m *Machine) { m.Rates[1].Sum = "fp33" },
		"rate[2]":               func(m *Machine) { m.Rates[1] = m.Rates[0] },
		"format[1].bits":        func(m *Machine) { m.Formats = []Format{{Name: "posit16", Family: Float}} },
		"bandwidth cache":       func(m *Machine) { m.Bandwidth, m.Cache = -1, 0 },
	} {
		m := slow(1)
		m.Rates = append(m.Rates, Rate{Operands: "posit16", Sum: "fp32", MultiplyAdds: 2})
		m.Formats = []Format{{Name: "posit16", Family: Float, Bits: 16, Exponent: 7, Fraction: 11}}
		spoil(&m)
		if got := fields(t, m.Validate()); got != want {
			t.Errorf("errors in %q, want %q", got, want)
		}
	}
	m := slow(1)
	m.Rates[0].Operands = "fp16"
	if got := fields(t, m.Validate()); got != "rate" {
		t.Errorf("a machine without FP32: errors in %q", got)
	}
}

func TestInvalidEnergy(t *testing.T) {
	for want, spoil := range map[string]func(*EnergyTable){
		"":                    func(*EnergyTable) {},
		"name":                func(e *EnergyTable) { e.Name = "" },
		"source":              func(e *EnergyTable) { e.Source = "" },
		"date":                func(e *EnergyTable) { e.Date = "2014-13" },
		"process":             func(e *EnergyTable) { e.Process = "" },
		"operation":           func(e *EnergyTable) { e.Operations = e.Operations[1:2] }, // no multiplication
		"operation[1].format": func(e *EnergyTable) { e.Operations[0].Format = "nibble" },
		"operation[2].format": func(e *EnergyTable) { e.Operations[1].Format = "INT8" },
		"operation[1]":        func(e *EnergyTable) { e.Operations[0] = OperationRow{Format: "int8"} },
		"operation[3].add":    func(e *EnergyTable) { e.Operations[2].Add = -0.1 },
		"cache":               func(e *EnergyTable) { e.Caches = nil },
		"cache[1].bytes":      func(e *EnergyTable) { e.Caches[0].Bytes = 0 },
		"operation[4].format": func(e *EnergyTable) {
			e.Formats = []Format{{Name: "log8", Family: Logarithmic, Bits: 8}}
			e.Operations[3].Format = "log8"
		},
		"cache[2].bytes":       func(e *EnergyTable) { e.Caches[1].Bytes = 1 },
		"cache[1].per_64_bits": func(e *EnergyTable) { e.Caches[0].Per64Bits = math.NaN() },
		"memory_per_64_bits":   func(e *EnergyTable) { e.Memory = -1 },
		"random_bit":           func(e *EnergyTable) { e.Random = math.Inf(1) },
		"uses_per_read":        func(e *EnergyTable) { e.Reuse = 0 },
	} {
		e := DefaultEnergy()
		spoil(&e)
		if got := fields(t, e.Validate()); got != want {
			t.Errorf("errors in %q, want %q", got, want)
		}
	}
}

// TestInvalidInput: shapes and arms that make no sense are refused by name, all
// at once, and never by a panic.
func TestInvalidInput(t *testing.T) {
	for want, spoil := range map[string]func(*Input){
		"":                         func(*Input) {},
		"batch":                    func(in *Input) { in.Batch = 0 },
		"inference_batch":          func(in *Input) { in.InferenceBatch = -1 },
		"network.layers[2].inputs": func(in *Input) { in.Network.Layers[1].Inputs = 99 },
		"network.layers[3]":        func(in *Input) { in.Network.Layers[2].Weights = 1 << 60 },
		"network.layers[1].terms":  func(in *Input) { in.Network.Layers[0].Terms.Forward = 0 },
		"network.layers[3] network.layers[3].inputs":                         func(in *Input) { in.Network.Layers[2].Inputs = 0 },
		"optimizer.divisions":                                                func(in *Input) { in.Optimizer.Divisions = -1 },
		"optimizer.states arms[1].layers[1].states arms[1].layers[3].states": func(in *Input) { in.Optimizer.States = nil },
		"arms[1].name":                                 func(in *Input) { in.Arms[0].Name = "" },
		"arms[1].layers":                               func(in *Input) { in.Arms[0].Layers = in.Arms[0].Layers[:2] },
		"arms[1].input":                                func(in *Input) { in.Arms[0].Input = Point{} },
		"arms[1].layers[1].forward.product":            func(in *Input) { in.Arms[0].Layers[0].Forward.Product = &Point{} },
		"arms[1].loss":                                 func(in *Input) { in.Arms[0].Loss = Point{} },
		"arms[1].layers[1].master":                     func(in *Input) { in.Arms[0].Layers[0].Master = Point{} },
		"arms[1].layers[1].weight.random_bits":         func(in *Input) { in.Arms[0].Layers[0].Weight.RandomBits = 99 },
		"arms[1].layers[1].forward.order":              func(in *Input) { in.Arms[0].Layers[0].Forward.Order = "random" },
		"arms[1].layers[1].forward.k":                  func(in *Input) { in.Arms[0].Layers[0].Forward.Order = Chunk },
		"arms[1].layers[3].input_gradient.result":      func(in *Input) { in.Arms[0].Layers[2].InputGradient.Result = Point{} },
		"arms[1].layers[3].weight_gradient.sums.outer": func(in *Input) { in.Arms[0].Layers[2].WeightGradient.Sums.Outer = &Point{} },
		"arms[1].layers[3].compensation.format.bits":   func(in *Input) { in.Arms[0].Layers[2].Compensation = &Point{Format: Format{Name: "x", Family: Float}} },
		"machine.bandwidth energy.uses_per_read":       func(in *Input) { in.Machine.Bandwidth, in.Energy.Reuse = 0, 0 },
	} {
		n := twoLayers()
		in := Input{
			Network: n, Optimizer: Momentum, Batch: 32, Machine: slow(1e9), Energy: DefaultEnergy(),
			Arms: []Arm{uniform(t, &n, "bf16")},
		}
		spoil(&in)
		_, err := Estimate(&in)
		if got := fields(t, err); got != want {
			t.Errorf("errors in %q, want %q", got, want)
		}
		if (err == nil) != (want == "") {
			t.Errorf("%q: error %v", want, err)
		}
	}
	if _, err := Estimate(&Input{}); err == nil {
		t.Error("nothing at all was accepted")
	}
	if FieldErrors(fmt.Errorf("something else")) != nil {
		t.Error("an error without fields has some")
	}
}
