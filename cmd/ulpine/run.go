package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"runtime"

	"github.com/spf13/cobra"

	"ulpine/experiments"
	"ulpine/experiments/plan"
	"ulpine/results"
	"ulpine/results/store"
)

func newRun() *cobra.Command {
	cmd := &cobra.Command{
		Use:   "run PLAN",
		Short: "Train every arm of a plan, compare them, and write the report",
		Long: `Train every arm x replicate of a plan that is not in the store yet, print the
verdicts and write a report. The results are the same bits for any number of
workers. Ctrl-C stops within a second and loses only the runs in flight; the same
command goes on where it stopped. --only repeats single rows of somebody's report:
it trains the runs that it names and prints their digests.`,
		Args: exactly("PLAN"),
	}
	path := storeFlag(cmd)
	workers := cmd.Flags().Int("workers", 0, "runs at a time (0: one a core), those without a run help the others; changes no bit")
	dir := cmd.Flags().String("to", "", "`directory` of the report (default ulpine-report/PLAN)")
	quiet := cmd.Flags().Bool("quiet", false, "no progress")
	only := cmd.Flags().StringArray("only", nil, "this run alone, arm/replicate as in bf16-nearest/103; may be repeated")
	noReport := cmd.Flags().Bool("no-report", false, "print the verdicts only")
	cmd.RunE = func(cmd *cobra.Command, args []string) error {
		if *workers < 0 {
			return badInput(fmt.Errorf("--workers %d: give 1 or more, or 0 for one a core", *workers))
		}
		p, err := loadPlan(args[0], cmd.ErrOrStderr())
		if err != nil {
			return err
		}
		s, err := openStore(*path, false)
		if err != nil {
			return err
		}
		if *dir == "" {
			*dir = reportDir(p)
		}
		if *noReport {
			*dir = ""
		}
		err = runPlan(cmd.Context(), cmd, p, s, runOptions{*workers, *dir, *quiet, *only})
		return errors.Join(err, s.Close())
	}
	return cmd
}

type runOptions struct {
	workers int
	dir     string // of the report; empty: none
	quiet   bool
	only    []string // runs by name; empty: all, and the verdicts
}

// runPlan runs a plan and shows what came out, even when some runs failed.
func runPlan(ctx context.Context, cmd *cobra.Command, p *plan.Plan, s *store.Store, o runOptions) error {
	out, errw := cmd.OutOrStdout(), cmd.ErrOrStderr()
	for _, w := range p.Warnings {
		fmt.Fprintln(errw, "ulpine: warning:", w)
	}
	if !o.quiet && len(o.only) == 0 {
		if err := announce(ctx, errw, p, o.workers); err != nil {
			return err
		}
	}
	progress := newProgress(errw, o.quiet)
	summary, err := experiments.Run(ctx, p, s, experiments.Options{
		Workers: o.workers, Progress: progress, Only: o.only,
	})
	progress.close()
	switch {
	case err == nil:
	case errors.Is(err, experiments.ErrBaseline), errors.Is(err, experiments.ErrRunsFailed):
		err = badInput(err) // the plan's fault; what did run is shown all the same
	case errors.Is(err, experiments.ErrOnly):
		return badInput(err)
	default:
		return err
	}
	study, studyErr := experiments.Study(p, s)
	if studyErr != nil {
		return errors.Join(err, studyErr)
	}
	if len(o.only) > 0 {
		printRows(out, study, o.only)
		return err
	}
	if tableErr := table(out, study); tableErr != nil {
		return errors.Join(err, tableErr)
	}
	printSummary(out, summary, s.Path())
	if o.dir != "" {
		return errors.Join(err, writeReport(out, o.dir, study))
	}
	return err
}

// announce says before the first run how many there are, about how long they
// would take if none were stored, and how much memory.
func announce(ctx context.Context, w io.Writer, p *plan.Plan, workers int) error {
	rate, err := measureRate(ctx, p)
	if ctx.Err() != nil {
		return err
	}
	if err != nil {
		rate = 0 // an arm that fails is told with its runs
	}
	if workers == 0 {
		workers = runtime.GOMAXPROCS(0)
	}
	_, err = fmt.Fprintf(w, "%s\n%s\n", plan.WorkText(p, plan.ResolveOptions{Rate: rate, Workers: workers}), plan.MemoryText(p, workers))
	return err
}

func printSummary(w io.Writer, s experiments.Summary, path string) {
	before := ""
	if s.Before > 0 {
		before = fmt.Sprintf(", %d were stored before", s.Before)
	}
	fmt.Fprintf(w, "\n%d of %d runs done in %s%s; all are in %s\nstore digest %s\n",
		s.Done, s.Runs, took(s.Wall), before, path, s.StoreDigest)
}

// printRows tells what came of single runs, in the words and digits of the report.
func printRows(w io.Writer, study *results.Study, names []string) {
	for _, name := range names {
		for i := range study.Runs {
			r := &study.Runs[i]
			if r.Name() != name {
				continue
			}
			fmt.Fprintf(w, "%s  %s\n  key    %s\n  digest %s\n", name, r.State, r.Key, r.Digest)
			if r.Diverged != "" {
				fmt.Fprintf(w, "  diverged in step %d: %s\n", r.DivergedStep, r.Diverged)
			}
		}
	}
}
