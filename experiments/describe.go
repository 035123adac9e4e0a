package experiments

import (
	"fmt"
	"strings"

	"ulpine/experiments/plan"
	"ulpine/results"
	"ulpine/results/store"
)

// describe sets what a study says of its plan alone.
func describe(l *layout) *results.Study {
	p := l.Plan
	s := &results.Study{
		Title: p.Title, Question: p.Question, PlanFile: p.File, PlanText: p.Text,
		Resolved: plan.ResolveText(p, plan.ResolveOptions{Full: true}),
		Data:     p.Task.Description, Network: networkLine(p), Training: trainingLine(p),
		LongestSum: p.Work().LongestSum, Classes: p.Task.ClassNames,
		Regression: len(p.Task.TargetNames) > 0,
		Metric:     p.Claim.Metric, Margin: p.Claim.Margin, Confidence: p.Claim.Confidence,
		Claim: l.claim, Planned: p.Replicates.Count,
	}
	for i := range p.Arms {
		s.Arms = append(s.Arms, describeArm(&p.Arms[i]))
	}
	s.Warnings = append(s.Warnings, p.Warnings...)
	s.Warnings = append(s.Warnings, p.Task.Warnings...)
	if p.Pretrain != nil && p.Pretrain.Task.Canonical != p.Task.Canonical {
		s.Warnings = append(s.Warnings, p.Pretrain.Task.Warnings...)
	}
	setBits(p, s)
	return s
}

func describeArm(a *plan.Arm) results.Arm {
	arm := results.Arm{
		Name: a.Name, Slug: a.Slug, Baseline: a.Baseline, Summary: a.Summary,
		LossScale: a.LossScale, Grid: a.Grid,
	}
	for _, c := range a.Axes {
		arm.Axes = append(arm.Axes, results.Coordinate(c))
	}
	for _, s := range a.Settings {
		arm.Settings = append(arm.Settings, results.Setting(s))
	}
	return arm
}

// networkLine is the network in one line, with its number of parameters.
func networkLine(p *plan.Plan) string {
	words := make([]string, len(p.Network.Layers))
	for i := range p.Network.Layers {
		words[i] = p.Network.Layers[i].Text
	}
	return fmt.Sprintf("%s; %d parameters", strings.Join(words, ", "), p.Network.Parameters())
}

// trainingLine is the training in one line.
func trainingLine(p *plan.Plan) string {
	t := &p.Training
	line := fmt.Sprintf("%s, learning rate %s", plan.DescribeOptimizer(t.Optimizer), plan.DescribeRate(t.LearningRate))
	line += fmt.Sprintf(", batch %d, %s", t.Batch, number(t.Epochs, "epoch"))
	if t.Augment.Any() {
		line += ", examples augmented by " + plan.DescribeAugment(t.Augment)
	}
	if p.Start != nil {
		line += "; starting from " + p.Start.Text()
	}
	if pre := p.Pretrain; pre != nil {
		line += fmt.Sprintf("; after pretraining for %s on %s", number(pre.Training.Epochs, "epoch"), pre.Task.Description)
	}
	return line
}

// rerun are the commands that repeat the study.
func rerun(p *plan.Plan, s *store.Store) []string {
	command := "go run ./cmd/ulpine run " + quoted(p.File)
	if s.Path() != store.DefaultPath {
		command += " --store " + quoted(s.Path())
	}
	row := fmt.Sprintf("go run ./cmd/ulpine run %s --store row.store --only %s", quoted(p.File), results.RunName(p.Baseline().Slug, p.Replicates.FirstSeed))
	return []string{command, row + "  # one row alone: name it arm/replicate, compare the digest"}
}

// quoted puts a path in quotation marks where a shell would take it apart.
func quoted(path string) string {
	if strings.ContainsAny(path, " \t'\"\\$&|;<>()*?[]{}~#`!") {
		return "'" + strings.ReplaceAll(path, "'", `'\''`) + "'"
	}
	return path
}

func volume(shape []int) int {
	n := 1
	for _, d := range shape {
		n *= d
	}
	return n
}

// tested is how far beyond the longest sum that was run anything may be said.
const tested = 4

// cautions are what a reader must never be misled about.
func cautions(p *plan.Plan, s *results.Study) []string {
	all := []string{
		fmt.Sprintf("Small networks tolerate more rounding than large ones, and their sums are shorter. The longest sum here has %s; nothing follows for sums of more than %d.",
			number(s.LongestSum, "term"), tested*s.LongestSum),
		"Every mean is of the pairs stated beside it; an undecided comparison does not mean that two arms are the same.",
	}
	if strings.Contains(p.Task.Description, "invented") {
		all = append(all, "The data are invented: they show how arithmetic behaves on a task of this kind, not how good a classifier of real data would be.")
	}
	return append(all, "This is no approval for a safety-related use. Rare inputs, drift of the data and hardware faults are untested; "+
		"the applicable functional-safety standard and qualified engineers decide.")
}
