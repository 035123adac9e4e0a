package main

import (
	"encoding/json"
	"fmt"
	"io"
	"math"
	"text/tabwriter"
	"time"

	"github.com/spf13/cobra"

	"ulpine/results/store"
)

func newList() *cobra.Command {
	cmd := &cobra.Command{
		Use:   "list",
		Short: "List the runs in a store",
		Long: `List every run that was started: how it is called (arm/replicate), its state
(stored, in flight, broken off, failed), its figures and its digest. The digest
is a SHA-256 of the losses, the range counters and the final weights: two runs
agree bit by bit exactly when their digests do.`,
		Args: exactly(),
	}
	path, word := storeFlag(cmd), studyFlag(cmd)
	asJSON := cmd.Flags().Bool("json", false, "one JSON object a run")
	cmd.RunE = func(cmd *cobra.Command, _ []string) error {
		s, err := openStore(*path, true)
		if err != nil {
			return err
		}
		defer s.Close()
		study, err := chosenStudy(s, *word)
		if err != nil {
			return err
		}
		entries, err := s.List(store.Filter{Study: study})
		if err != nil {
			return err
		}
		scores, err := newScores(s)
		if err != nil {
			return err
		}
		if *asJSON {
			return listJSON(cmd.OutOrStdout(), entries, scores)
		}
		if err := listText(cmd.OutOrStdout(), entries, scores); err != nil {
			return err
		}
		digest, err := s.Digest()
		if err != nil {
			return err
		}
		fmt.Fprintf(cmd.OutOrStdout(), "\nstore digest %s\n", digest)
		return nil
	}
	return cmd
}

func listText(w io.Writer, entries []store.Entry, scores *scores) error {
	if len(entries) == 0 {
		_, err := fmt.Fprintln(w, "no runs")
		return err
	}
	t := tabwriter.NewWriter(w, 0, 0, 2, ' ', 0)
	title := "\x00"
	for i := range entries {
		e := &entries[i]
		if e.Title != title {
			title = e.Title
			t.Flush()
			fmt.Fprintf(w, "%s%s\n", blankLine(i), studyTitle(title))
			fmt.Fprintf(t, "run\tstate\tsteps\ttraining loss\t%s\ttook\tdigest\n", scores.metric(e.Study).Name)
		}
		score, err := scores.of(e)
		if err != nil {
			return err
		}
		fmt.Fprintf(t, "%s\t%s\t%d\t%s\t%s\t%s\t%s\n", e.Name(), stateAndEnd(e), e.Steps,
			number(e.Last.TrainLoss, e.Epochs, "%.4f"), number(score, e.Epochs, "%.4f"),
			took(e.Wall), shortDigest(e))
	}
	return t.Flush()
}

func blankLine(i int) string {
	if i == 0 {
		return ""
	}
	return "\n"
}

func studyTitle(title string) string {
	if title == "" {
		return "(runs that no plan here names)"
	}
	return title
}

// stateAndEnd adds what befell a stored run.
func stateAndEnd(e *store.Entry) string {
	switch words := stateWords(e); {
	case e.Diverged != "":
		return fmt.Sprintf("%s, diverged at step %d", words, e.DivergedStep)
	case e.Stalled:
		return words + ", stalled"
	default:
		return words
	}
}

// number prints x, or "-" where there is none.
func number(x float64, epochs int, format string) string {
	if epochs == 0 || math.IsNaN(x) {
		return "-"
	}
	return fmt.Sprintf(format, x)
}

func took(d time.Duration) string {
	if d == 0 {
		return "-"
	}
	return d.Round(10 * time.Millisecond).String()
}

func shortDigest(e *store.Entry) string {
	if e.Digest.IsZero() {
		return "-"
	}
	return e.Digest.Short()
}

// listJSON writes one object a line. Numbers that are not there, and those that
// are not finite, are null: JSON has no word for them.
func listJSON(w io.Writer, entries []store.Entry, scores *scores) error {
	enc := json.NewEncoder(w)
	for i := range entries {
		e := &entries[i]
		object := map[string]any{
			"run": e.Name(), "arm": e.Arm, "replicate": e.Replicate, "state": e.State,
			"study": e.Title, "key": e.Key, "steps": e.Steps, "epochs": e.Epochs,
			"stalled": e.Stalled, "code_version": e.CodeVersion, "host": e.Host,
			"wall_seconds": e.Wall.Seconds(), "digest": nil, "training_loss": nil,
			"test_loss": nil, "test_accuracy": nil, "metric": scores.metric(e.Study).Name, "score": nil,
		}
		if !e.Digest.IsZero() {
			object["digest"] = e.Digest
		}
		if e.Cause != "" {
			object["cause"] = e.Cause
		}
		if e.Diverged != "" {
			object["diverged"], object["diverged_step"] = e.Diverged, e.DivergedStep
		}
		if e.Epochs > 0 {
			object["training_loss"] = finite(e.Last.TrainLoss)
			object["test_loss"] = finite(e.Last.TestLoss)
			object["test_accuracy"] = finite(e.Last.TestMetric)
			score, err := scores.of(e)
			if err != nil {
				return err
			}
			object["score"] = finite(score)
		}
		if err := enc.Encode(object); err != nil {
			return err
		}
	}
	return nil
}

// finite is x, or nil where JSON cannot write it.
func finite(x float64) any {
	if math.IsNaN(x) || math.IsInf(x, 0) {
		return nil
	}
	return x
}
