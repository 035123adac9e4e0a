package main

import (
	"errors"
	"strings"

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
		if err == nil && *strict {
			err = requireWithin(study)
		}
		return err
	}
	return cmd
}

// requireWithin errs, with exit code 3, unless there are comparisons and every one
// is within its margin; it names those that are not, and the claim if it was changed.
func requireWithin(s *results.Study) error {
	if s.MarginChanged != "" {
		return &exitError{exitVerdict, errors.New("the claim was changed after the first run, so no verdict counts as within the margin that was fixed: " + s.MarginChanged)}
	}
	var open []string
	for i := range s.Comparisons {
		if c := &s.Comparisons[i]; c.Verdict.Kind != results.Within {
			open = append(open, c.Arm)
		}
	}
	for i := range s.Contrasts {
		if c := &s.Contrasts[i]; c.Verdict.Kind != results.Within {
			open = append(open, c.Arm+" against "+c.Against)
		}
	}
	switch {
	case len(s.Comparisons)+len(s.Contrasts) == 0:
		return &exitError{exitVerdict, errors.New("no arm was compared, so none is within the margin")}
	case len(open) > 0:
		return &exitError{exitVerdict, errors.New("not within the margin: " + strings.Join(open, ", "))}
	}
	return nil
}
