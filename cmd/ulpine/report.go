package main

import (
	"fmt"
	"strings"

	"github.com/spf13/cobra"

	"ulpine/experiments"
	"ulpine/results/cost"
	"ulpine/results/report"
)

func newReport() *cobra.Command {
	cmd := &cobra.Command{
		Use:   "report PLAN",
		Short: "Write the report on a plan from what the store holds",
		Long: `Write the report: one HTML page that needs nothing else, the same as Markdown, its
figures as SVG and PNG files, and its numbers as CSV and JSON.

A PNG shows a box for each character that its font, Liberation Sans, lacks; SVG
files and the page use the viewer's fonts.

With --figures, write the figures alone, on a white ground and without a margin,
as a paper wants them. --machine and --energy name the tables that the costs, and
the figures of the score against bytes and energy, are worked out from.

Built-in machines: ` + strings.Join(cost.MachineNames(), ", ") + `.`,
		Args: exactly("PLAN"),
	}
	path := storeFlag(cmd)
	dir := cmd.Flags().String("to", "", "`directory` of the report (default ulpine-report/PLAN)")
	figures := cmd.Flags().String("figures", "", "write only the figures, for a paper, to this `directory`")
	tables := tableFlags(cmd)
	cmd.MarkFlagsMutuallyExclusive("to", "figures")
	cmd.RunE = func(cmd *cobra.Command, args []string) error {
		p, err := loadPlan(args[0], cmd.ErrOrStderr())
		if err != nil {
			return err
		}
		m, e, err := tables.load()
		if err != nil {
			return err
		}
		study, err := studyOf(p, *path)
		if err != nil {
			return err
		}
		if err := experiments.AddCosts(study, p, m, e); err != nil && study.Costs != nil {
			return badInput(err) // with the default tables it worked
		}
		if *figures != "" {
			if err := report.WriteFigures(*figures, study); err != nil {
				return err
			}
			_, err := fmt.Fprintf(cmd.OutOrStdout(), "\nfigures: %s\n", *figures)
			return err
		}
		if *dir == "" {
			*dir = reportDir(p)
		}
		return writeReport(cmd.OutOrStdout(), *dir, study)
	}
	return cmd
}
