package plan

import (
	"fmt"

	"ulpine/trainer"
)

// Diagnostics say how often the runs of a plan are looked at closer while they
// train; the zero value is never. Looking changes no bit, so it is in no key of a run.
type Diagnostics trainer.Diagnostics

// The words of diagnostics.
const (
	sampledWord       = "sampled" // some values in some steps
	noDiagnosticsWord = "none"
)

// Sampled is what a plan gets that says nothing: looks that cost under a tenth of
// the time of training.
var Sampled = Diagnostics(trainer.DefaultDiagnostics)

// diagnosticsKeys are the keys of training.diagnostics as a table.
var diagnosticsKeys = []string{"every", "gradient", "values", "sums"}

// readDiagnostics reads training.diagnostics of the plan: a word, or a table for
// whoever will pay for more. What the table leaves out is as in "sampled", but that
// gradients are compared in every epoch, short ones too.
func (r *reader) readDiagnostics(root *node) Diagnostics {
	n := root.table["training"]
	if n == nil || n.table == nil || n.table["diagnostics"] == nil {
		return Sampled
	}
	at := n.table["diagnostics"]
	if at.table == nil {
		if r.word(n, "diagnostics", sampledWord, sampledWord, noDiagnosticsWord) == noDiagnosticsWord {
			return Diagnostics{}
		}
		return Sampled
	}
	r.known(at, diagnosticsKeys...)
	d := Sampled
	d.Pause = 0
	for _, k := range []struct {
		key  string
		to   *int
		most int64
	}{{"every", &d.Every, maxCount}, {"gradient", &d.Gradient, maxCount}, {"values", &d.Values, 1 << 20}, {"sums", &d.Sums, 1 << 20}} {
		*k.to = int(r.whole(at, k.key, int64(*k.to), 1, k.most))
	}
	return d
}

// String spells diagnostics out.
func (d Diagnostics) String() string {
	if d == (Diagnostics{}) {
		return noDiagnosticsWord
	}
	word := ""
	if d == Sampled {
		word = sampledWord + ": "
	}
	short := "every epoch's end"
	if d.Pause > 0 {
		short = fmt.Sprintf("an epoch's end more than %d steps later", d.Pause)
	}
	return fmt.Sprintf("%severy %d steps, and at the end of an epoch without such a step, up to %d values of each tensor and %d sums of each product; every %d steps, or at %s, the gradients of binary64",
		word, d.Every, d.Values, d.Sums, d.Gradient, short)
}
