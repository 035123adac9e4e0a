package main

import (
	"errors"

	"github.com/spf13/cobra"

	"ulpine/results"
	"ulpine/results/report"
)

func newVerdicts() *cobra.Command {
	cmd := &cobra.Command{
		Use:   "verdicts PLAN",
		Short: "Print the verdicts on a plan from what the store holds",
		Args:  exactly("PLAN"),
	}
	path := storeFlag(cmd)
	asJSON := cmd.Flags().Bool("json", false, "the whole study in numbers as JSON")
	strict := cmd.Flags().Bool("require-within", false, "exit code 3 unless every arm and contrast is within its margin")
	cmd.RunE = func(cmd *cobra.Command, args []string) error {
		p, err := loadPlan(args[0], cmd.ErrOrStderr())
		if err != nil {
			return err
		}
		study, err := studyOf(p, *path)
		if err != nil {
			return err
		}
		if *asJSON {
			err = report.JSON(cmd.OutOrStdout(), study)
		} else {
			err = table(cmd.OutOrStdout(), study)
		}
		if err == nil && *strict && !allWithin(study) {
			return &exitError{exitVerdict, errors.New("not every arm is within its margin")}
		}
		return err
	}
	return cmd
}

func allWithin(s *results.Study) bool {
	for _, family := range [][]results.Comparison{s.Comparisons, s.Contrasts} {
		for i := range family {
			if family[i].Verdict.Kind != results.Within {
				return false
			}
		}
	}
	return true
}
