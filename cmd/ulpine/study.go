package main

import (
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strings"

	"golang.org/x/term"

	"ulpine/experiments"
	"ulpine/experiments/plan"
	"ulpine/results"
	"ulpine/results/report"
)

// loadPlan reads a plan; everything wrong with it is the input's fault.
func loadPlan(name string, notices io.Writer) (*plan.Plan, error) {
	p, err := experiments.LoadPlan(name)
	if err != nil {
		return nil, badInput(err)
	}
	for _, n := range p.Notices {
		fmt.Fprintln(notices, "ulpine:", n)
	}
	return p, nil
}

// studyOf builds the study of a plan from a store on disk.
func studyOf(p *plan.Plan, path string) (*results.Study, error) {
	s, err := openStore(path, true)
	if err != nil {
		return nil, err
	}
	defer s.Close()
	study, err := experiments.Study(p, s)
	if err != nil {
		return nil, err
	}
	if t := study.Tuning; t != nil && !t.Done && t.Stored > 0 {
		return nil, badInput(fmt.Errorf("store %s holds %d of the %d runs that tune %s, and none that is reported; go on with: ulpine run %s", path, t.Stored, t.Runs, p.File, p.File))
	}
	if len(study.Runs) == 0 {
		return nil, badInput(fmt.Errorf("store %s holds no run of %s; run the plan first: ulpine run %s", path, p.File, p.File))
	}
	return study, nil
}

// writeReport writes the report of a study and says where.
func writeReport(w io.Writer, dir string, study *results.Study) error {
	if err := report.Write(dir, study); err != nil {
		return fmt.Errorf("report: %w", err)
	}
	_, err := fmt.Fprintf(w, "\nreport: %s\n", filepath.Join(dir, report.PageName))
	return err
}

// reportDir is where the report of a plan goes unless told otherwise.
func reportDir(p *plan.Plan) string {
	name := strings.TrimSuffix(filepath.Base(p.File), filepath.Ext(p.File))
	return filepath.Join("ulpine-report", plan.Slug(name))
}

// screen is what a writer is: its width, and whether a terminal shows it.
func screen(w io.Writer) (width int, terminal bool) {
	f, ok := w.(*os.File)
	if !ok || !term.IsTerminal(int(f.Fd())) {
		return 100, false
	}
	width, _, err := term.GetSize(int(f.Fd()))
	if err != nil || width <= 0 {
		return 100, false
	}
	return width, os.Getenv("TERM") != "dumb"
}

// table prints the verdicts.
func table(w io.Writer, study *results.Study) error {
	width, terminal := screen(w)
	return report.Table(w, study, width, terminal && os.Getenv("NO_COLOR") == "")
}
