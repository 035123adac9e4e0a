package experiments

import (
	"ulpine/experiments/plan"
	"ulpine/results/cost"
)

// MachineOf returns the machine of a name: a built-in one, or that of a file. An
// empty name is the default machine. What is wrong with a file is a
// *plan.PlanError or plan.Errors.
func MachineOf(name string) (cost.Machine, error) {
	if name == "" {
		name = cost.DefaultMachine
	}
	if m, ok := cost.FindMachine(name); ok {
		return m, nil
	}
	t, err := plan.LoadMachine(name)
	if err != nil {
		return cost.Machine{}, err
	}
	m := cost.Machine{
		Name: t.Name, Date: t.Date, Source: t.Source, Bandwidth: t.Bandwidth, Cache: t.Cache,
		Formats: costFormats(t.Formats), Elementwise: t.Elementwise, RandomBits: t.RandomBits, Absent: t.Absent,
	}
	for _, r := range t.Rates {
		m.Rates = append(m.Rates, cost.Rate(r))
	}
	return m, placed(&t.CostTable, m.Validate())
}

// EnergyOf returns the energy table of a file; an empty name is the default
// table. What is wrong with a file is a *plan.PlanError or plan.Errors.
func EnergyOf(name string) (cost.EnergyTable, error) {
	if name == "" {
		return cost.DefaultEnergy(), nil
	}
	t, err := plan.LoadEnergy(name)
	if err != nil {
		return cost.EnergyTable{}, err
	}
	e := cost.EnergyTable{
		Name: t.Name, Date: t.Date, Source: t.Source, Process: t.Process, Formats: costFormats(t.Formats),
		Memory: t.Memory, Random: t.RandomBit, Reuse: t.UsesPerRead, Notes: t.Notes,
	}
	for _, o := range t.Operations {
		e.Operations = append(e.Operations, cost.OperationRow(o))
	}
	for _, c := range t.Caches {
		e.Caches = append(e.Caches, cost.CacheRow(c))
	}
	return e, placed(&t.CostTable, e.Validate())
}

func costFormats(formats []plan.CostFormat) []cost.Format {
	all := make([]cost.Format, len(formats))
	for i, f := range formats {
		all[i] = cost.Format{
			Name: f.Name, Family: cost.Family(f.Family), Bits: f.Bits, Exponent: f.Exponent, Fraction: f.Fraction,
			Block: f.Block, ScaleBits: f.ScaleBits, TensorBits: f.TensorBits,
		}
	}
	return all
}

// placed gives the model's errors about a table their lines in its file.
func placed(t *plan.CostTable, err error) error {
	if err == nil {
		return nil
	}
	var all plan.Errors
	for _, f := range cost.FieldErrors(err) {
		all = append(all, t.Fault(f.Field, f.Reason, f.Remedy))
	}
	if len(all) == 0 {
		return err
	}
	return all
}
