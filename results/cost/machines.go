package cost

import "slices"

// DefaultMachine is the machine of a report that names none.
const DefaultMachine = "accelerator-2020"

// machines are the built-in tables: points of reference, not recommendations.
var machines = []Machine{
	{
		Name: "accelerator-2020", Date: "2020-05",
		Source:    "vendor data sheet of the NVIDIA A100 40 GB, dense rates without sparsity, from memory",
		Bandwidth: 1555e9, Cache: 40 << 20, Elementwise: 9.75e12,
		Rates: []Rate{
			{Operands: "fp64", MultiplyAdds: 4.85e12},
			{Operands: "fp32", MultiplyAdds: 9.75e12},
			{Operands: "E8M10", Sum: "fp32", MultiplyAdds: 78e12},
			{Operands: "bf16", Sum: "fp32", MultiplyAdds: 156e12},
			{Operands: "fp16", Sum: "fp32", MultiplyAdds: 156e12},
			{Operands: "fp16", MultiplyAdds: 156e12},
			{Operands: "int8", Sum: "int32", MultiplyAdds: 312e12},
		},
	},
	{
		Name: "cpu-core-2020", Date: "2020-11",
		Source: "one x86-64 core with two 256-bit multiply-add units at 3 GHz, 512 KiB second-level cache, " +
			"two channels of DDR4-3200: arithmetic on public instruction tables, from memory",
		Bandwidth: 51.2e9, Cache: 512 << 10,
		Rates: []Rate{
			{Operands: "fp64", MultiplyAdds: 24e9},
			{Operands: "fp32", MultiplyAdds: 48e9},
			{Operands: "int16", Sum: "int32", MultiplyAdds: 96e9, Source: "pairwise 16-bit multiply-add instruction"},
		},
	},
	{
		Name: "microcontroller-2011", Date: "2011-09",
		Source: "Cortex-M4F class at 168 MHz with single-cycle 32-bit memory: binary32 multiply-add in 3 cycles, " +
			"two 16-bit multiply-adds a cycle; 32 registers of 32 bits as the cache; from memory",
		Bandwidth: 672e6, Cache: 128, Elementwise: 168e6,
		Rates: []Rate{
			{Operands: "fp32", MultiplyAdds: 56e6},
			{Operands: "int16", Sum: "int32", MultiplyAdds: 336e6},
		},
	},
}

// FindMachine returns a built-in machine; the caller may change its copy.
func FindMachine(name string) (Machine, bool) {
	for _, m := range machines {
		if m.Name == name {
			m.Rates = slices.Clone(m.Rates)
			return m, true
		}
	}
	return Machine{}, false
}

// MachineNames are the names that FindMachine knows, the default first.
func MachineNames() []string {
	names := make([]string, len(machines))
	for i := range machines {
		names[i] = machines[i].Name
	}
	return names
}
