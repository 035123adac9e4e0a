package main

import (
	"fmt"
	"io"
	"math"
	"time"

	"ulpine/experiments"
	"ulpine/results"
)

// progress shows how a plan goes on.
type progress interface {
	experiments.Progress
	close()
}

// newProgress chooses between bars on a terminal and plain lines elsewhere.
func newProgress(w io.Writer, quiet bool) progress {
	switch _, terminal := screen(w); {
	case quiet:
		return &lines{w: io.Discard}
	case terminal:
		return newBars(w)
	default:
		return &lines{w: w, now: time.Now}
	}
}

// summaryEvery is how often plain lines say how far the plan is when no run
// finishes.
const summaryEvery = 30 * time.Second

// lines is progress for a file or a pipe: a line for each run that ends, and
// one at least every half minute.
type lines struct {
	w    io.Writer
	now  func() time.Time
	last time.Time
}

func (l *lines) Started(experiments.Place) {
	if l.now != nil && l.last.IsZero() {
		l.last = l.now()
	}
}

func (l *lines) Step(s experiments.Step) {
	if l.now == nil || l.now().Sub(l.last) < summaryEvery {
		return
	}
	l.last = l.now()
	fmt.Fprintf(l.w, "%s: step %d of %d; %s\n", s.Place, s.Done, s.Total, s.Overall)
}

func (l *lines) Finished(f experiments.Finish) {
	if l.now != nil {
		l.last = l.now()
	}
	fmt.Fprintf(l.w, "%s: %s; %s\n", f.Place, finishWords(f), f.Overall)
}

func (l *lines) Note(text string) { fmt.Fprintln(l.w, text) }

func (l *lines) close() {}

// finishWords is how a run ended: "bf16-nearest/103 stored in 1.2s, metric 0.9312".
func finishWords(f experiments.Finish) string {
	words := fmt.Sprintf("%s %s", results.RunName(f.Arm, f.Replicate), f.State)
	switch {
	case f.State == results.Failed:
		words += fmt.Sprintf(" (%s)", f.Cause)
	case f.Diverged != "":
		words += ", diverged: " + f.Diverged
	case f.State == results.Stored && !math.IsNaN(f.Metric):
		words += fmt.Sprintf(" with %.4f", f.Metric)
	}
	if f.Wall > 0 {
		words += " after " + took(f.Wall)
	}
	return words
}
