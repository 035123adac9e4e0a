package plan

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"ulpine/trainer"
)

// Tuning says how learning rate and loss scale of every arm are chosen before the
// replicates that are reported: every arm, the baseline included, tries the same
// pairs of values on the same replicates of seeds of their own, and is given the pair
// that does best on validation data.
type Tuning struct {
	LearningRates []float64           // starts of the arm's schedule; empty: as the arm has it
	LossScales    []trainer.LossScale // empty: as the arm has it
	Metric        string              // "validation accuracy"
	Replicates    int
	FirstSeed     uint64
}

// Pair is one pair of values that every arm tries, as indices; -1: not tuned.
type Pair struct{ rate, scale int }

// Pairs are those tried, loss scales varying fastest.
func (t *Tuning) Pairs() (all []Pair) {
	for i := range max(1, len(t.LearningRates)) {
		for k := range max(1, len(t.LossScales)) {
			p := Pair{i, k}
			if len(t.LearningRates) == 0 {
				p.rate = -1
			}
			if len(t.LossScales) == 0 {
				p.scale = -1
			}
			all = append(all, p)
		}
	}
	return all
}

// Edge reports whether a pair has the least or the largest of three or more
// learning rates: one beyond might do better.
func (t *Tuning) Edge(p Pair) bool {
	if len(t.LearningRates) < 3 || p.rate < 0 {
		return false
	}
	x := t.LearningRates[p.rate]
	return x == slices.Min(t.LearningRates) || x == slices.Max(t.LearningRates)
}

// Words are a pair's values as an arm has them.
func (t *Tuning) Words(p Pair, a *Arm) (rate, scale string) {
	tried := t.give(p, *a, nil)
	return DescribeRate(tried.Training.LearningRate), tried.LossScale
}

// RateWords and ScaleWords are the values tried.
func (t *Tuning) RateWords() []string {
	words := make([]string, len(t.LearningRates))
	for i, x := range t.LearningRates {
		words[i] = fmt.Sprintf("%g", float32(x))
	}
	return words
}

// ScaleWords are the loss scales tried.
func (t *Tuning) ScaleWords() []string {
	words := make([]string, len(t.LossScales))
	for i, l := range t.LossScales {
		words[i] = describeLossScale(l)
	}
	return words
}

// String is the tuning in one line: equal lines mean equal tunings.
func (t *Tuning) String() string {
	var parts []string
	if w := t.RateWords(); len(w) > 0 {
		parts = append(parts, "learning rate of "+strings.Join(w, ", "))
	}
	if w := t.ScaleWords(); len(w) > 0 {
		parts = append(parts, "loss scale of "+strings.Join(w, "; "))
	}
	return fmt.Sprintf("%s: best mean %s of %d replicates, seeds %d to %d",
		strings.Join(parts, ", "), t.Metric, t.Replicates, t.FirstSeed, t.FirstSeed+uint64(t.Replicates-1))
}

// give is an arm with a pair's values; without a network its canonical text and its
// summary are left as they were.
func (t *Tuning) give(p Pair, a Arm, network *trainer.Network) Arm {
	if p.rate >= 0 {
		a.Training.LearningRate.Start = t.LearningRates[p.rate]
		if !slices.Contains(a.Overrides, "learning rate") {
			a.Overrides = append(slices.Clone(a.Overrides), "learning rate")
		}
	}
	if p.scale >= 0 {
		a.Arithmetic.LossScale = t.LossScales[p.scale]
		a.LossScale = describeLossScale(a.Arithmetic.LossScale)
		a.scaleStages()
	}
	if network != nil {
		a.Canonical = a.canonical(network)
		a.Summary = summary(a.assignment, &a)
	}
	return a
}

// scaleStages hands an arm's loss scale on to its stages, up to the first that sets
// one of its own.
func (a *Arm) scaleStages() {
	a.Stages, a.Arithmetic.Stages = slices.Clone(a.Stages), slices.Clone(a.Arithmetic.Stages)
	for i := range a.Stages {
		if a.Stages[i].scaled {
			return
		}
		a.Stages[i].LossScale = a.LossScale
		a.Arithmetic.Stages[i].Arm.LossScale = a.Arithmetic.LossScale
	}
}

// TuningPlan is the plan whose runs the tuning needs: an arm for each arm and pair,
// arms outermost, on the seeds of the tuning. The test data is never evaluated in it.
func (p *Plan) TuningPlan() *Plan {
	t, trial := p.Tuning, *p
	trial.Tuning, trial.Controls, trial.Contrasts, trial.Grids, trial.Arms = nil, nil, nil, nil, nil
	trial.Replicates = Replicates{Count: t.Replicates, FirstSeed: t.FirstSeed}
	trial.Claim.Metric = t.Metric
	trial.Diagnostics, trial.Predictions = Diagnostics{}, NoPredictions
	for _, a := range p.Arms {
		a.Training.EvaluateTest, a.Training.EvaluateValidation = trainer.Never, trainer.LastEpoch
		for i, pair := range t.Pairs() {
			tried := t.give(pair, a, &p.Network)
			tried.Baseline = a.Baseline && i == 0
			tried.Name, tried.Slug = fmt.Sprintf("%s, trial %d", a.Name, i+1), trialSlug(a.Slug, i)
			trial.Arms = append(trial.Arms, tried)
		}
	}
	return &trial
}

// trialSlug is how runs of an arm's trial are called.
func trialSlug(arm string, i int) string { return fmt.Sprintf("%s-trial-%d", arm, i+1) }

// Tuned is the plan with the pair given to each arm, by its index in Pairs. Controls
// train as the baseline does.
func (p *Plan) Tuned(chosen []int) *Plan {
	tuned, pairs := *p, p.Tuning.Pairs()
	tuned.Arms = make([]Arm, len(p.Arms))
	for i := range p.Arms {
		tuned.Arms[i] = p.Tuning.give(pairs[chosen[i]], p.Arms[i], &p.Network)
	}
	tuned.Controls = make([]Arm, len(p.Controls))
	for i := range p.Controls {
		tuned.Controls[i] = p.Tuning.give(pairs[chosen[0]], p.Controls[i], &p.Network)
	}
	tuned.Training = tuned.Baseline().Training
	return &tuned
}

// defaultTuningReplicates is few: a trial that needs more to be told from the next
// one is as good as it.
const defaultTuningReplicates = 3

// readTuning reads [tuning], or returns nil. The arms are those of the plan.
func (r *reader) readTuning(root *node, p *Plan) *Tuning {
	n := r.table(root, "tuning", "[tuning] with learning_rate = [0.01, 0.02, 0.05]")
	if n == nil {
		return nil
	}
	before := len(r.errs)
	r.known(n, "learning_rate", "loss_scale", "metric", "replicates", "first_seed")
	t := &Tuning{}
	t.Replicates = int(r.whole(n, "replicates", defaultTuningReplicates, 1, maxReplicates))
	t.FirstSeed = uint64(r.whole(n, "first_seed", int64(p.Replicates.FirstSeed)+maxReplicates, 0, math.MaxInt64-maxReplicates))
	r.readTried(n, t)
	r.tuningMetric(n, t, p)
	if len(r.errs) > before {
		return nil
	}
	r.checkTuning(n, t, p)
	return t
}

// tuningExamples show what values to try look like.
var tuningExamples = map[string]string{
	"learning_rate": "learning_rate = [0.01, 0.02, 0.05]",
	"loss_scale":    `loss_scale = ["none", { kind = "fixed", value = 1024 }]`,
}

// readTried reads the values that are tried.
func (r *reader) readTried(n *node, t *Tuning) {
	before := len(r.errs)
	for _, key := range []string{"learning_rate", "loss_scale"} {
		at := n.table[key]
		switch {
		case at == nil:
			continue
		case at.list != nil && len(at.list) == 0:
			r.fail(at.errorf("write the values to try, as "+tuningExamples[key]+", or leave "+key+" out", "the array is empty: nothing to try"))
			continue
		case at.list == nil:
			r.wrongType(at, "an array of values", tuningExamples[key])
			continue
		}
		seen := map[string]bool{}
		for _, e := range at.list {
			word, so := "", len(r.errs)
			if key == "learning_rate" {
				x := r.numberAt(e, key, 0.02)
				if !positive32(x) {
					r.fail(e.errorf("write a positive rate, as 0.02", "a learning rate of %g is not a positive binary32 number", x))
				}
				t.LearningRates, word = append(t.LearningRates, x), fmt.Sprint(float32(x))
			} else {
				l := r.readLossScale(e)
				t.LossScales, word = append(t.LossScales, l), describeLossScale(l)
			}
			if seen[word] && len(r.errs) == so {
				r.fail(e.errorf("keep one of them", "the value %s stands twice", word))
			}
			seen[word] = true
		}
	}
	if len(r.errs) > before {
		return
	}
	if pairs := len(t.Pairs()); pairs < 2 {
		r.fail(n.errorf("write "+tuningExamples["learning_rate"], "nothing to choose from: a tuning takes two learning rates or loss scales at least"))
	} else if pairs > maxTrials {
		r.fail(n.errorf("shorten the lists", "%d pairs of values, more than the %d that an arm may try", pairs, maxTrials))
	}
}

// maxTrials bounds the pairs of values that an arm tries, maxTuning those of all arms.
const (
	maxTrials = 100
	maxTuning = 5000
)

// tuningMetric reads by which figure a pair is chosen: one of validation data, never
// of the data that the claim is about.
func (r *reader) tuningMetric(n *node, t *Tuning, p *Plan) {
	words := []string{"validation accuracy", "validation loss"}
	if len(p.Task.TargetNames) > 0 {
		words[0] = "validation RMSE"
	}
	t.Metric = r.text(n, "metric", words[0])
	switch at := n.table["metric"]; {
	case strings.HasPrefix(t.Metric, "test "):
		r.fail(at.errorf("write metric = \""+words[0]+"\"", "values chosen on test data would spoil what is claimed of it"))
	case !slices.Contains(words, t.Metric):
		t.Metric = r.word(n, "metric", words[0], words...)
	}
	if p.Task.Source != nil && p.Task.Validation == 0 {
		r.fail(n.errorf("write validation = 500 in [task]", "the task has no validation data to choose by"))
	}
	if strings.HasPrefix(p.Claim.Metric, "validation ") || strings.Contains(p.Claim.Metric, " validation ") {
		r.fail(n.errorf("claim a metric of test data", "the claim is about %s, which the tuning chooses by", p.Claim.Metric))
	}
}

// checkTuning holds the tuning to the plan: seeds of its own, names that no arm has,
// rates that fit every arm's schedule.
func (r *reader) checkTuning(n *node, t *Tuning, p *Plan) {
	reported := p.Replicates
	if t.FirstSeed < reported.FirstSeed+uint64(reported.Count) && reported.FirstSeed < t.FirstSeed+uint64(t.Replicates) {
		at := n
		if n.table["first_seed"] != nil {
			at = n.table["first_seed"]
		}
		r.fail(at.errorf(fmt.Sprintf("write first_seed = %d, or leave it out", reported.FirstSeed+maxReplicates),
			"the seeds %d to %d of the tuning meet those of the reported replicates, %d to %d",
			t.FirstSeed, t.FirstSeed+uint64(t.Replicates-1), reported.FirstSeed, reported.FirstSeed+uint64(reported.Count-1)))
	}
	if trials := len(p.Arms) * len(t.Pairs()); trials > maxTuning {
		r.fail(n.errorf("shorten the lists or make several plans of it", "%d arms x %d pairs of values are more than %d trials", len(p.Arms), len(t.Pairs()), maxTuning))
		return
	}
	slugs := map[string]string{}
	for i := range p.Arms {
		slugs[p.Arms[i].Slug] = p.Arms[i].Name
	}
	for i := range p.Arms {
		a := &p.Arms[i]
		for k := range t.Pairs() {
			if name, taken := slugs[trialSlug(a.Slug, k)]; taken {
				r.fail(n.errorf("call that arm otherwise", "the arm %q has the name of a trial of %q", name, a.Name))
			}
		}
		for k, x := range t.LearningRates {
			if s := a.Training.LearningRate; s.Cosine && float32(x) < float32(s.End) {
				r.fail(n.table["learning_rate"].list[k].errorf("write at least the end of the schedule", "arm %q: a learning rate that starts at %g and ends at %g", a.Name, x, s.End))
			}
		}
	}
}
