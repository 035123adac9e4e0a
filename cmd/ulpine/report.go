package main

import "github.com/spf13/cobra"

func newReport() *cobra.Command {
	cmd := &cobra.Command{
		Use:   "report PLAN",
		Short: "Write the report on a plan from what the store holds",
		Long: `Write the report: one HTML page that needs nothing else, its figures as SVG and
PNG files, and its numbers as CSV and JSON.`,
		Args: exactly("PLAN"),
	}
	path := storeFlag(cmd)
	dir := cmd.Flags().String("to", "", "`directory` of the report (default ulpine-report/PLAN)")
	cmd.RunE = func(cmd *cobra.Command, args []string) error {
		p, err := loadPlan(args[0], cmd.ErrOrStderr())
		if err != nil {
			return err
		}
		study, err := studyOf(p, *path)
		if err != nil {
			return err
		}
		if *dir == "" {
			*dir = reportDir(p)
		}
		return writeReport(cmd.OutOrStdout(), *dir, study)
	}
	return cmd
}
