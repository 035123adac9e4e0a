package plan

import (
	"math"
	"strings"

	"ulpine/trainer"
)

// metric is a figure a claim can be about.
type metric struct {
	name   string
	better string // "higher" or "lower"
	data   string // the examples it is measured on
}

// metrics are the figures that runs record; a test of the package that joins
// plans and results holds both lists together.
var metrics = []metric{
	{"test accuracy", "higher", "test"},
	{"test loss", "lower", "test"},
	{"validation accuracy", "higher", "validation"},
	{"validation loss", "lower", "validation"},
	{"test RMSE", "lower", "test"},
	{"training accuracy", "higher", "training"},
	{"training loss", "lower", "training"},
}

// Metrics are the names a claim may have.
func Metrics() []string {
	names := make([]string, len(metrics))
	for i, m := range metrics {
		names[i] = m.name
	}
	return names
}

const defaultConfidence = 0.95

// readClaim reads [claim].
func (r *reader) readClaim(root *node) (c Claim) {
	c = Claim{Metric: metrics[0].name, Confidence: defaultConfidence}
	n := r.required(root, "claim", "[claim] with margin = 0.01")
	if n == nil {
		return c
	}
	r.known(n, "metric", "margin", "confidence")
	c.Metric = r.word(n, "metric", c.Metric, Metrics()...)
	if n.table["margin"] == nil {
		r.fail(n.errorf("write margin = 0.01, the loss of the metric that you accept", "margin is missing"))
	}
	c.Margin = r.margin(n, math.NaN())
	c.Confidence = r.number(n, "confidence", defaultConfidence)
	if !(c.Confidence > 0.5 && c.Confidence < 1) {
		r.fail(n.table["confidence"].errorf("write a number between 0.5 and 1, as 0.95", "a confidence of %g is out of range", c.Confidence))
	}
	return c
}

// margin reads a margin, which must be positive: no interval lies above zero
// loss by chance alone, so "no loss at all" can never be shown.
func (r *reader) margin(n *node, fallback float64) float64 {
	at := n.table["margin"]
	if at == nil {
		return fallback
	}
	before := len(r.errs)
	m := r.number(n, "margin", 1)
	if len(r.errs) == before && !(m > 0) {
		r.fail(at.errorf("write a positive margin, as 0.01", "a margin of %g is not positive", m))
	}
	return m
}

// readReplicates reads [replicates].
func (r *reader) readReplicates(root *node) Replicates {
	reps := Replicates{Count: 1, FirstSeed: 1}
	n := r.required(root, "replicates", "[replicates] with count = 10")
	if n == nil {
		return reps
	}
	r.known(n, "count", "first_seed")
	if n.table["count"] == nil {
		r.fail(n.errorf("write count = 10", "count is missing"))
	}
	reps.Count = int(r.whole(n, "count", 1, 1, maxReplicates))
	reps.FirstSeed = uint64(r.whole(n, "first_seed", 1, 0, math.MaxInt64-maxReplicates))
	return reps
}

// maxReplicates bounds the number of replicates.
const maxReplicates = 100_000

// required returns a table that a plan must have, or records that it is missing.
func (r *reader) required(root *node, key, example string) *node {
	if root.table[key] == nil {
		r.fail(&PlanError{File: root.file, Key: key, Reason: "the table is missing", Remedy: "write " + example})
		return nil
	}
	return r.table(root, key, example)
}

// readContrasts reads the [[contrast]] tables.
func (r *reader) readContrasts(root *node, arms []Arm, margin float64) []Contrast {
	var all []Contrast
	lines := map[[2]string]*node{}
	for _, n := range r.tables(root, "contrast") {
		r.known(n, "arm", "against", "margin")
		c := Contrast{
			Arm: r.armSlug(n, "arm", arms), Against: r.armSlug(n, "against", arms), Margin: r.margin(n, margin),
		}
		pair := [2]string{c.Arm, c.Against}
		switch twin := lines[pair]; {
		case c.Arm == "" || c.Against == "":
		case c.Arm == c.Against:
			r.fail(n.table["against"].errorf("name another arm", "an arm is compared with itself"))
		case twin != nil:
			r.fail(n.errorf("keep one of them", "the same contrast as in %s line %d", twin.file, twin.line))
		}
		lines[pair] = n
		all = append(all, c)
	}
	return all
}

// armSlug reads the name or the slug of an arm.
func (r *reader) armSlug(n *node, key string, arms []Arm) string {
	at := n.table[key]
	if at == nil {
		r.fail(n.errorf("write "+key+` = "name of an arm"`, "%s is missing", key))
		return ""
	}
	text := r.text(n, key, "")
	names := make([]string, len(arms))
	for i, a := range arms {
		if a.Name == text || a.Slug == text {
			return a.Slug
		}
		names[i] = a.Name
	}
	if at.value != nil && text != "" || strings.TrimSpace(text) == "" {
		r.fail(at.errorf(suggest(text, names), "no arm is called %q", text))
	}
	return ""
}

// checkMetric holds the claim to what the training evaluates and the data has.
func (r *reader) checkMetric(root *node, c Claim, t trainer.Training, task Task) {
	for _, m := range metrics {
		if m.name != c.Metric {
			continue
		}
		when, count := trainer.EveryEpoch, 1
		switch m.data {
		case "test":
			when, count = t.EvaluateTest, task.Test
		case "validation":
			when, count = t.EvaluateValidation, task.Validation
		}
		at := root.table["claim"]
		if at == nil || task.Source == nil {
			return
		}
		if at.table["metric"] != nil {
			at = at.table["metric"]
		}
		regression := len(task.TargetNames) > 0
		switch {
		case regression && strings.HasSuffix(m.name, "accuracy"):
			r.fail(at.errorf(`write metric = "test RMSE"`, "%s is one of classes, but the data of %s has targets of values", m.name, task.Data))
			return
		case !regression && strings.HasSuffix(m.name, "RMSE"):
			r.fail(at.errorf(`write metric = "test accuracy"`, "%s is one of targets, but the data of %s has classes", m.name, task.Data))
			return
		}
		if count == 0 {
			r.fail(at.errorf("give the task "+m.data+" data or claim another metric", "the task has no %s data", m.data))
		} else if when == trainer.Never {
			r.fail(at.errorf(`write training.evaluate = "last epoch"`, "the %s data is never evaluated", m.data))
		}
	}
}
