package plan

import (
	"fmt"
	"math"
	"strings"

	"ulpine/trainer"
)

// metric is a figure a claim can be about.
type metric struct {
	name  string
	data  string // the examples it is measured on
	share bool   // a share of one
	of    string // "classes", "targets", or of both: ""
	key   string // of the claim that completes it: "class", "false_alarm_rate", or ""
}

// metrics are the figures that runs record; a test of the package that joins
// plans and results holds both lists together.
var metrics = []metric{
	{"test accuracy", "test", true, "classes", ""},
	{"test loss", "test", false, "", ""},
	{"validation accuracy", "validation", true, "classes", ""},
	{"validation loss", "validation", false, "", ""},
	{"test RMSE", "test", false, "targets", ""},
	{"validation RMSE", "validation", false, "targets", ""},
	{"training accuracy", "training", true, "classes", ""},
	{"training loss", "training", false, "", ""},
	{"training RMSE", "training", false, "targets", ""},
	{"test recall", "test", true, "classes", classKey},
	{"validation recall", "validation", true, "classes", classKey},
	{"test missed-fault rate", "test", true, "classes", rateKey},
	{"validation missed-fault rate", "validation", true, "classes", rateKey},
}

// Metrics are the names a claim may have that take neither a further key nor a target.
func Metrics() (names []string) {
	for _, m := range metrics {
		if m.key == "" {
			names = append(names, m.name)
		}
	}
	return names
}

const defaultConfidence = 0.95

// readClaim reads [claim].
func (r *reader) readClaim(root *node, task *Task) (c Claim) {
	c = Claim{Metric: metrics[0].name, Confidence: defaultConfidence}
	n := r.required(root, "claim", "[claim] with margin = 0.01")
	if n == nil {
		return c
	}
	r.known(n, "metric", classKey, rateKey, "margin", "confidence")
	c.Metric = r.metric(n, c.Metric, task)
	m, _ := findMetric(c.Metric) // a count of epochs to a target is no metric of the list
	r.share = m.share
	if n.table["margin"] == nil {
		r.fail(n.lacks("margin", "write margin = 0.01, the loss of the metric that you accept", "margin is missing"))
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
	if len(r.errs) == before && m >= 1 && r.share {
		r.fail(at.errorf(marginRemedy(m), "a margin of %g is %g percentage points: every arm would be within it", m, 100*m))
	}
	return m
}

// marginRemedy takes a margin of one or more for percentage points.
func marginRemedy(points float64) string {
	if points >= 100 {
		return "write the margin as a fraction below 1: 0.01 is one percentage point"
	}
	return fmt.Sprintf("write a fraction below 1: margin = %g for %g percentage points", points/100, points)
}

// readReplicates reads [replicates].
func (r *reader) readReplicates(root *node) Replicates {
	reps := Replicates{Count: 1, FirstSeed: 1}
	n := r.required(root, "replicates", "[replicates] with count = 10")
	if n == nil {
		return reps
	}
	r.known(n, "count", "up_to", "look_every", "first_seed")
	if n.table["up_to"] != nil || n.table["look_every"] != nil {
		reps.Count, reps.LookEvery = r.readLooks(n)
	} else if n.table["count"] == nil {
		r.fail(n.lacks("count", "write count = 10", "count is missing"))
	}
	if reps.LookEvery == 0 {
		reps.Count = int(r.whole(n, "count", 1, 1, maxReplicates))
	}
	reps.FirstSeed = uint64(r.whole(n, "first_seed", 1, 0, math.MaxInt64-maxReplicates))
	return reps
}

// readLooks reads how many replicates there may be and after how many to look, as
// up_to = 40, look_every = 5. The last look is at up_to.
func (r *reader) readLooks(n *node) (upTo, every int) {
	for _, twin := range [][2]string{{"up_to", "40"}, {"look_every", "5"}} {
		if n.table[twin[0]] == nil {
			r.fail(n.lacks(twin[0], "write "+twin[0]+" = "+twin[1], twin[0]+" is missing: looks take up_to and look_every both"))
			return 1, 1
		}
	}
	if both := n.table["count"]; both != nil {
		r.fail(both.errorf("keep up_to, the most replicates, and leave count out", "count and up_to exclude each other"))
	}
	upTo = int(r.whole(n, "up_to", 3, 3, maxReplicates))
	every = int(r.whole(n, "look_every", 2, 2, maxReplicates)) // one pair has no interval
	switch at := n.table["look_every"]; {
	case every >= upTo:
		r.fail(at.errorf("write fewer than up_to, or count alone", "looking every %d of at most %d replicates is no look before the last", every, upTo))
	case (upTo-1)/every >= maxLooks:
		r.fail(at.errorf(fmt.Sprintf("write at least %d", (upTo-1)/maxLooks+1), "more than %d looks", maxLooks))
	}
	return upTo, every
}

// maxLooks bounds the number of looks: each makes the levels of all longer to
// compute, and none of so many has anything left to spend.
const maxLooks = 40

// maxReplicates bounds the number of replicates.
const maxReplicates = 100_000

// required returns a table that a plan must have, or records that it is missing:
// at the first line, as no line is the place of what is not there.
func (r *reader) required(root *node, key, example string) *node {
	if root.table[key] == nil {
		e := root.lacks(key, "write "+example, "the table is missing")
		e.Key = e.absent
		r.fail(e)
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
		r.fail(n.lacks(key, "write "+key+` = "name of an arm"`, key+" is missing"))
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

// checkMetric holds the claim to what the training evaluates and the data has. A
// count of epochs can be told only if there is a score for each.
func (r *reader) checkMetric(root *node, c Claim, t trainer.Training, task Task) {
	name, _, counts := splitTarget(c.Metric)
	m, known := findMetric(name)
	at := root.table["claim"]
	if !known || at == nil || task.Source == nil {
		return
	}
	if at.table["metric"] != nil {
		at = at.table["metric"]
	}
	when, count := trainer.EveryEpoch, 1
	switch m.data {
	case "test":
		when, count = t.EvaluateTest, task.Test
	case "validation":
		when, count = t.EvaluateValidation, task.Validation
	}
	switch regression := len(task.TargetNames) > 0; {
	case regression && m.of == "classes":
		r.fail(at.errorf(`write metric = "test RMSE"`, "%s is one of classes, but the data of %s has targets of values", m.name, task.Data))
	case !regression && m.of == "targets":
		r.fail(at.errorf(`write metric = "test accuracy"`, "%s is one of targets, but the data of %s has classes", m.name, task.Data))
	case count == 0:
		r.fail(at.errorf("give the task "+m.data+" data or claim another metric", "the task has no %s data", m.data))
	case when == trainer.Never:
		r.fail(at.errorf(`write training.evaluate = "last epoch"`, "the %s data is never evaluated", m.data))
	case counts && when != trainer.EveryEpoch:
		r.fail(at.errorf(`write training.evaluate = "every epoch"`,
			"epochs to a target are counted, but the %s data is evaluated only at the %s", m.data, when))
	}
}
