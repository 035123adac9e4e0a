package cost

import (
	"math/big"
	"testing"
)

// TestHalvedWidth: halving every width gives exactly twice as many values in the
// same bandwidth, in exact rationals, for pairs of formats of every family.
func TestHalvedWidth(t *testing.T) {
	two := big.NewRat(2, 1)
	odd := Plain("", 5, 11).WithBlocks("17 bits and 1/3", 24, 8) // 17 1/3
	half := odd
	half.Bits, half.Block, half.ScaleBits = 0, 3, 26 // 26/3
	for _, name := range MachineNames() {
		m, _ := FindMachine(name)
		for _, c := range []struct{ wide, narrow Format }{
			{FP32, formatOf(t, "fp16")},
			{FP32, formatOf(t, "bf16")},
			{formatOf(t, "fp64"), FP32},
			{formatOf(t, "bf16"), formatOf(t, "e4m3")},
			{formatOf(t, "int16"), formatOf(t, "int8")},
			{Plain("", 8, 7).WithBlocks("w", 16, 8), Plain("", 4, 3).WithBlocks("n", 32, 8)}, // 16.5 and 8.25
			{odd, half},
		} {
			got := new(big.Rat).Quo(m.ValuesPerSecond(c.narrow), m.ValuesPerSecond(c.wide))
			if got.Cmp(two) != 0 {
				t.Errorf("%s: %s over %s gives %v times the values a second, want exactly 2", name, c.narrow.Name, c.wide.Name, got)
			}
			bits := new(big.Rat).Mul(m.ValuesPerSecond(c.narrow), c.narrow.Width())
			if want := new(big.Rat).SetFloat64(8 * m.Bandwidth); bits.Cmp(want) != 0 {
				t.Errorf("%s: values a second times their width is %v bits, the bandwidth %v", name, bits, want)
			}
		}
	}
}

// slow is a machine whose arithmetic has one rate for every format, so that
// only its memory gains from narrow ones.
func slow(rate float64) Machine {
	return Machine{
		Name: "one rate", Date: "2026-01", Source: "made up for a test", Bandwidth: 1e9, Cache: 4096,
		Rates: []Rate{{Operands: "fp32", MultiplyAdds: rate}}, Elementwise: rate,
	}
}

// TestHalvedNetwork: a network with every width halved moves exactly half of the
// bits in every phase, layer and class, under both reuse models where blocks do
// not get better; it is exactly twice as fast where only memory binds, less than
// twice where arithmetic binds some of it, and not at all faster where
// arithmetic binds everything.
func TestHalvedNetwork(t *testing.T) {
	for name, n := range map[string]Network{"dense": twoLayers(), "convolutions": convolutions()} {
		in := Input{
			Network: n, Optimizer: Momentum, Batch: 32, Energy: DefaultEnergy(),
			Arms: []Arm{uniform(t, &n, "fp16"), uniform(t, &n, "bf16")},
		}
		run := func(rate float64) *Result {
			in.Machine = slow(rate)
			r, err := Estimate(&in)
			if err != nil {
				t.Fatal(err)
			}
			for i := range r.Arms {
				halved(t, name+" "+r.Arms[i].Name, &r.Arms[i], &r.Reference)
			}
			return r
		}
		speedup := func(rate float64, binds Side) float64 {
			total := &run(rate).Arms[0].Once.Step.Total
			if binds != "" && total.Time.Binds != binds {
				t.Errorf("%s: %s binds at a rate of %g, want %s", name, total.Time.Binds, rate, binds)
			}
			return total.Against.Speedup
		}
		if s := speedup(1e15, Bandwidth); s != 2 {
			t.Errorf("%s: speed-up %v where memory binds all, want exactly 2", name, s)
		}
		// Layers that only move gain even here.
		if s := speedup(1e4, Arithmetic); s < 1 || s > 1.0001 {
			t.Errorf("%s: speed-up %v where arithmetic binds all it can, want 1", name, s)
		}
		// The rate at which FP32's arithmetic takes as long as its traffic.
		whole := &run(1).Reference.Once.Step.Total.Time
		if s := speedup(whole.Arithmetic/whole.Memory, ""); s <= 1.05 || s >= 1.95 {
			t.Errorf("%s: speed-up %v where each side binds some, want it between 1 and 2", name, s)
		}
	}
}

func halved(t *testing.T, what string, arm, ref *Bill) {
	t.Helper()
	same := func(where string, narrow, wide *Figures) {
		if narrow.Values != wide.Values || 2*narrow.Bits != wide.Bits {
			t.Errorf("%s, %s: %d values in %d bits against %d in %d", what, where, narrow.Values, narrow.Bits, wide.Values, wide.Bits)
		}
		for _, c := range Classes() {
			if 2*narrow.Traffic.Of(c) != wide.Traffic.Of(c) {
				t.Errorf("%s, %s: %d bits of %s against %d", what, where, narrow.Traffic.Of(c), c, wide.Traffic.Of(c))
			}
		}
		if narrow.Multiplies != wide.Multiplies || narrow.Additions != wide.Additions {
			t.Errorf("%s, %s: the number of operations depends on the width", what, where)
		}
	}
	same("inference", &arm.Once.Inference.Total, &ref.Once.Inference.Total)
	for l := range ref.Once.Step.Layers {
		for p := range ref.Once.Step.Layers[l].Phases {
			same(ref.Once.Step.Layers[l].Name, &arm.Once.Step.Layers[l].Phases[p].Figures, &ref.Once.Step.Layers[l].Phases[p].Figures)
		}
	}
	if 2*arm.Memory.Training.Bits != ref.Memory.Training.Bits || 2*arm.Memory.Endpoint.Bits != ref.Memory.Endpoint.Bits {
		t.Errorf("%s: memory is not halved", what)
	}
	// A narrower format lets larger blocks into the cache.
	if a, b := arm.Tiled.Step.Total.Bits, ref.Tiled.Step.Total.Bits; 2*a > b {
		t.Errorf("%s, tiled: %d bits are more than half of %d", what, a, b)
	}
}
