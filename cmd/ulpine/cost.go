package main

import (
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"
	"strings"

	"github.com/spf13/cobra"

	"ulpine/experiments"
	"ulpine/results/cost"
)

func newCost() *cobra.Command {
	cmd := &cobra.Command{
		Use:   "cost PLAN",
		Short: "What every arm would cost on hardware that has its formats; trains nothing",
		Long: `Work out, from shapes and formats alone, the memory, the bytes moved, the time and
the energy of a training step and of an inference for every arm of a plan, beside
the same in FP32. The figures are a model's: each says which, and what its tables
had to be extrapolated for.

Built-in machines: ` + strings.Join(cost.MachineNames(), ", ") + `.`,
		Args: exactly("PLAN"),
	}
	tables := tableFlags(cmd)
	asJSON := cmd.Flags().Bool("json", false, "all figures as JSON")
	detail := cmd.Flags().Bool("detail", false, "traffic by class and phase, figures layer by layer, what was extrapolated")
	cmd.RunE = func(cmd *cobra.Command, args []string) error {
		p, err := loadPlan(args[0], cmd.ErrOrStderr())
		if err != nil {
			return err
		}
		m, e, err := tables.load()
		if err != nil {
			return err
		}
		r, err := experiments.Costs(p, m, e)
		if err != nil {
			return badInput(err)
		}
		if *asJSON {
			return json.NewEncoder(cmd.OutOrStdout()).Encode(r)
		}
		return cost.Table(cmd.OutOrStdout(), r, *detail)
	}
	return cmd
}

// costTables are the tables that costs are worked out from, as flags name them.
type costTables struct{ machine, energy *string }

// tableFlags adds --machine and --energy to a verb.
func tableFlags(cmd *cobra.Command) costTables {
	return costTables{
		machine: cmd.Flags().String("machine", cost.DefaultMachine, "for the costs: a built-in machine, or a TOML `file` with a [machine] table"),
		energy:  cmd.Flags().String("energy", "", "for the costs: a TOML `file` with an [energy] table (default: Horowitz, ISSCC 2014, 45 nm)"),
	}
}

// load reads the tables; what is wrong with them is the input's fault.
func (t costTables) load() (cost.Machine, cost.EnergyTable, error) {
	m, err := experiments.MachineOf(*t.machine)
	if errors.Is(err, fs.ErrNotExist) && !strings.HasSuffix(*t.machine, ".toml") {
		err = fmt.Errorf("--machine %s: no built-in machine and no file; built in are %s", *t.machine, strings.Join(cost.MachineNames(), ", "))
	}
	if err != nil {
		return m, cost.EnergyTable{}, badInput(err)
	}
	e, err := experiments.EnergyOf(*t.energy)
	if err != nil {
		return m, e, badInput(err)
	}
	return m, e, nil
}
