package main

import (
	"bufio"
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"text/tabwriter"
	"time"

	"github.com/spf13/cobra"

	"ulpine/datasets/npy"
	"ulpine/results"
)

func newShow() *cobra.Command {
	cmd := &cobra.Command{
		Use:   "show RUN",
		Short: "Show one run, or write its weights and its losses to files",
		Long: `Show a run, called arm/replicate (bf16-nearest/103) or by eight or more leading
digits of its key, with its loss curve drawn in the terminal.`,
		Args: exactly("RUN"),
	}
	path, word := storeFlag(cmd), studyFlag(cmd)
	weights := cmd.Flags().String("weights", "", "write initial and final parameters to this NPZ `file`")
	curve := cmd.Flags().String("curve", "", "write the loss of every step to this CSV `file`, exactly (hexadecimal floats)")
	cmd.RunE = func(cmd *cobra.Command, args []string) error {
		s, err := openStore(*path, true)
		if err != nil {
			return err
		}
		defer s.Close()
		study, err := chosenStudy(s, *word)
		if err != nil {
			return err
		}
		entry, err := s.Find(args[0], study)
		if err != nil {
			return badInput(err)
		}
		if entry.State != results.Stored {
			return badInput(fmt.Errorf("run %s is %s: nothing is stored of it; run its plan again", entry.Name(), stateWords(&entry)))
		}
		run, err := s.Get(entry.Key)
		if err != nil {
			return err
		}
		run.Arm, run.Replicate = entry.Arm, entry.Replicate
		out := cmd.OutOrStdout()
		if *weights == "" && *curve == "" {
			scores, err := newScores(s)
			if err != nil {
				return err
			}
			return showRun(out, run, entry.Title, scores.metric(entry.Study))
		}
		if *weights != "" {
			if err := writeFile(*weights, func(w io.Writer) error { return writeWeights(w, run) }); err != nil {
				return err
			}
			fmt.Fprintln(out, "parameters written to", *weights)
		}
		if *curve != "" {
			if err := writeFile(*curve, func(w io.Writer) error { return writeCurve(w, run) }); err != nil {
				return err
			}
			fmt.Fprintln(out, "losses written to", *curve)
		}
		return nil
	}
	return cmd
}

// writeFile writes a file whole or not at all: a temporary one beside it takes
// its name when everything is on disk.
func writeFile(name string, fill func(io.Writer) error) error {
	f, err := os.CreateTemp(filepath.Dir(name), "."+filepath.Base(name)+".*")
	if err != nil {
		return badInput(fmt.Errorf("cannot write %s: %w", name, err))
	}
	defer os.Remove(f.Name()) // no-op after the rename
	w := bufio.NewWriter(f)
	if err := fill(w); err != nil {
		f.Close()
		return err
	}
	if err := w.Flush(); err != nil {
		f.Close()
		return err
	}
	if err := f.Chmod(0o644); err != nil {
		f.Close()
		return err
	}
	if err := f.Close(); err != nil {
		return err
	}
	return os.Rename(f.Name(), name)
}

// writeWeights writes the arrays initial/NAME and final/NAME.
func writeWeights(w io.Writer, r *results.Run) error {
	var arrays []npy.Named
	for _, part := range []struct {
		name    string
		tensors []results.Tensor
	}{{"initial", r.Initial}, {"final", r.Final}} {
		for _, t := range part.tensors {
			arrays = append(arrays, npy.Named{
				Name:  part.name + "/" + t.Name,
				Array: &npy.Array{Shape: t.Shape, Wide: t.Wide, Values: t.Values},
			})
		}
	}
	return npy.WriteNPZ(w, arrays)
}

// writeCurve writes step, loss in hexadecimal (exact) and in decimal.
func writeCurve(w io.Writer, r *results.Run) error {
	if _, err := fmt.Fprintln(w, "step,loss_hex,loss"); err != nil {
		return err
	}
	for i, loss := range r.Steps {
		_, err := fmt.Fprintf(w, "%d,%s,%s\n", i+1,
			strconv.FormatFloat(loss, 'x', -1, 64), strconv.FormatFloat(loss, 'g', -1, 64))
		if err != nil {
			return err
		}
	}
	return nil
}

// showRun prints a run with the metric that its plan claims.
func showRun(w io.Writer, r *results.Run, title string, claimed results.Metric) error {
	t := tabwriter.NewWriter(w, 0, 0, 2, ' ', 0)
	fmt.Fprintf(t, "run\t%s\n", r.Name())
	fmt.Fprintf(t, "study\t%s\n", studyTitle(title))
	fmt.Fprintf(t, "key\t%s\n", r.Key)
	fmt.Fprintf(t, "digest\t%s\n", r.Digest)
	fmt.Fprintf(t, "started\t%s, took %s on %s\n", r.Started.Format(time.DateTime), took(r.Wall), r.Host)
	fmt.Fprintf(t, "code\t%s\n", r.CodeVersion)
	fmt.Fprintf(t, "steps\t%d in %d epochs\n", len(r.Steps), len(r.Epochs))
	fmt.Fprintf(t, "%s\t%s\n", claimed.Name, number(claimed.Final(r), 1, "%.4f"))
	if r.Diverged != "" {
		fmt.Fprintf(t, "diverged\tat step %d: %s\n", r.DivergedStep, r.Diverged)
	}
	if r.Stalled {
		fmt.Fprintf(t, "stalled\tthe final training loss is over 95 %% of a constant predictor's\n")
	}
	if err := t.Flush(); err != nil {
		return err
	}
	fmt.Fprintln(w)
	drawCurve(w, r.Steps, 72, 14)
	fmt.Fprintln(w)
	showEpochs(w, r, claimed)
	showCounters(w, r)
	showFindings(w, r.Findings)
	return nil
}

// showEpochs prints the epochs; columns that were never evaluated are left out.
func showEpochs(w io.Writer, r *results.Run, claimed results.Metric) {
	columns := epochColumns(claimed)
	t := tabwriter.NewWriter(w, 0, 0, 2, ' ', tabwriter.AlignRight)
	fmt.Fprint(t, "epoch\t")
	var used []int
	for c := range columns {
		for i := range r.Epochs {
			if !math.IsNaN(columns[c].of(&r.Epochs[i])) {
				used = append(used, c)
				fmt.Fprintf(t, "%s\t", columns[c].name)
				break
			}
		}
	}
	fmt.Fprintln(t)
	for i := range r.Epochs {
		fmt.Fprintf(t, "%d\t", i+1)
		for _, c := range used {
			fmt.Fprintf(t, "%s\t", number(columns[c].of(&r.Epochs[i]), 1, "%.4f"))
		}
		fmt.Fprintln(t)
	}
	t.Flush()
}

// epochColumn is one figure of an epoch; NaN where there is none.
type epochColumn struct {
	name string
	of   func(*results.Epoch) float64
}

// epochColumns are all metrics, the claimed one last where it is none of them.
func epochColumns(claimed results.Metric) (columns []epochColumn) {
	names := []string{
		"training loss", "training accuracy", "training RMSE", "validation loss", "validation accuracy",
		"validation RMSE", "test loss", "test accuracy", "test RMSE",
	}
	if claimed.Target == 0 && !slices.Contains(names, claimed.Name) {
		names = append(names, claimed.Name)
	}
	for _, name := range names {
		m, _ := results.FindMetric(name)
		columns = append(columns, epochColumn{name, func(e *results.Epoch) float64 {
			return m.Final(&results.Run{Epochs: []results.Epoch{*e}})
		}})
	}
	return append(columns, epochColumn{"loss scale", func(e *results.Epoch) float64 {
		if e.LossScale == 1 {
			return math.NaN()
		}
		return e.LossScale
	}})
}

// showCounters prints the rounding points at which something left the range.
func showCounters(w io.Writer, r *results.Run) {
	t := tabwriter.NewWriter(w, 0, 0, 2, ' ', 0)
	any := false
	for _, c := range r.Counters {
		if c.Counts == (results.Counts{}) {
			continue
		}
		if !any {
			fmt.Fprintln(w, "\nresults outside the range of their format:")
			fmt.Fprintln(t, "layer\tpoint\toverflow\tunderflow to zero\tsaturated\tNaN")
			any = true
		}
		fmt.Fprintf(t, "%s\t%s\t%d\t%d\t%d\t%d\n", c.Name, c.Point,
			c.Counts.Overflow, c.Counts.Underflow, c.Counts.Saturated, c.Counts.NaN)
	}
	t.Flush()
	if !any {
		fmt.Fprintln(w, "\nno result left the range of its format")
	}
}
