package main

import (
	"fmt"
	"runtime"

	"github.com/spf13/cobra"

	"ulpine/experiments/plan"
)

func newResolve() *cobra.Command {
	cmd := &cobra.Command{
		Use:   "resolve PLAN",
		Short: "Spell a plan out: every rounding point, shape, sum and run",
		Long: `Check a plan and print it with nothing left to a default: the rounding points of
each layer and arm, the shapes, the length of every sum, the number of runs, and
an estimate of the time, for which steps of the arms, of sixteen if there are more,
are timed on invented numbers for a twentieth of a second each.`,
		Args: exactly("PLAN"),
	}
	full := cmd.Flags().Bool("full", false, "a line for each point of each layer")
	workers := cmd.Flags().Int("workers", 0, "runs at a time, for the estimate (0: one a core)")
	cmd.RunE = func(cmd *cobra.Command, args []string) error {
		p, err := loadPlan(args[0], cmd.ErrOrStderr())
		if err != nil {
			return err
		}
		for _, w := range p.Warnings {
			fmt.Fprintln(cmd.ErrOrStderr(), "ulpine: warning:", w)
		}
		if *workers <= 0 {
			*workers = runtime.GOMAXPROCS(0)
		}
		rate, err := measureRate(cmd.Context(), p)
		if err != nil {
			return err
		}
		_, err = fmt.Fprint(cmd.OutOrStdout(), plan.ResolveText(p, plan.ResolveOptions{
			Full: *full, Rate: rate, Workers: *workers,
		}))
		return err
	}
	return cmd
}
