package plan

import (
	"strings"
	"testing"

	"ulpine/trainer"
)

const tuningTable = `[tuning]
learning_rate = [0.01, 0.05]
loss_scale = ["none", { kind = "fixed", value = 64 }, "dynamic"]
replicates = 2
`

// TestTuning: trials are arms x pairs on seeds of their own; the tuned plan has the
// pair of each arm, and the plan's own keys stay as they were.
func TestTuning(t *testing.T) {
	plain := load(t, basePlan+"[controls]\n")
	p := load(t, basePlan+"[controls]\n"+tuningTable)
	if p.Arms[0].Canonical != plain.Arms[0].Canonical || p.Arms[1].Canonical != plain.Arms[1].Canonical || p.TaskCanonical() != plain.TaskCanonical() {
		t.Error("a tuning changes what the plan spells out")
	}
	if p.Canonical() == plain.Canonical() {
		t.Error("a tuning asks no other question")
	}
	trials := p.TuningPlan()
	if len(trials.Arms) != 12 || trials.Runs() != 24 || p.Runs() != plain.Runs()+24 || p.Work().Tuning != 24 || p.Work().MACs <= plain.Work().MACs {
		t.Errorf("%d trials, %d runs, %d in all; %+v", len(trials.Arms), trials.Runs(), p.Runs(), p.Work())
	}
	if r := trials.Replicates; r.FirstSeed != 100_100 || r.Count != 2 || r.LookEvery != 0 {
		t.Errorf("%+v", r)
	}
	last := trials.Arms[11]
	if last.Slug != "bf16-trial-6" || last.Training.LearningRate.Start != 0.05 || last.Arithmetic.LossScale.Kind != trainer.DynamicScale ||
		last.Training.EvaluateTest != trainer.Never || last.Training.EvaluateValidation != trainer.LastEpoch {
		t.Errorf("%+v", last)
	}
	tuned := p.Tuned([]int{4, 0})
	base, arm := tuned.Arms[0], tuned.Arms[1]
	if base.Training.LearningRate.Start != 0.05 || base.LossScale != "fixed 64" || arm.Training.LearningRate.Start != 0.01 || arm.LossScale != "none" {
		t.Errorf("%+v\n%+v", base, arm)
	}
	for _, c := range tuned.Controls {
		if c.LossScale != "fixed 64" || c.Training.LearningRate.Start != 0.05 || !strings.Contains(c.Canonical, "fixed 64") {
			t.Errorf("%+v", c)
		}
	}
	spelt := load(t, strings.NewReplacer("learning_rate = 0.02", "learning_rate = 0.05", "[baseline]\n", "[baseline]\nloss_scale = { kind = \"fixed\", value = 64 }\n",
		"storage = \"bf16\"\n", "storage = \"bf16\"\nlearning_rate = 0.01\nloss_scale = \"none\"\n").Replace(basePlan))
	for i := range spelt.Arms {
		if spelt.Arms[i].Canonical != tuned.Arms[i].Canonical {
			t.Errorf("tuned\n%s\nspelt out\n%s", tuned.Arms[i].Canonical, spelt.Arms[i].Canonical)
		}
	}
	text := ResolveText(p, ResolveOptions{})
	for _, want := range []string{
		"learning rate of 0.01, 0.05, loss scale of none; fixed 64; dynamic from 32768",
		"best mean validation accuracy of 2 replicates, seeds 100100 to 100101",
		"after 24 of tuning: 2 arms x 6 trials x 2 replicates",
	} {
		if !strings.Contains(text, want) {
			t.Errorf("no %q in\n%s", want, text)
		}
	}
}

// A schedule keeps its shape.
func TestTuningKeepsSchedule(t *testing.T) {
	p := load(t, strings.Replace(basePlan, "learning_rate = 0.02", "learning_rate = { start = 0.02, multiply = 0.5, at_epochs = [2] }", 1)+tuningTable)
	if s := p.Tuned([]int{0, 5}).Arms[1].Training.LearningRate; s.Start != 0.05 || s.Multiply != 0.5 || len(s.AtEpochs) != 1 {
		t.Errorf("%+v", s)
	}
}

// TestTuningReachesStages: a stage goes on with the loss scale that was chosen, up to
// one that has its own; the plan's own arms stay as they are.
func TestTuningReachesStages(t *testing.T) {
	p := load(t, basePlan+"[[arm.stage]]\nfrom_epoch = 2\nstorage = \"fp32\"\n[[arm.stage]]\nfrom_epoch = 3\nloss_scale = { kind = \"fixed\", value = 8 }\n"+tuningTable)
	tuned := p.Tuned([]int{0, 1}).Arms[1]
	got := []string{tuned.LossScale, tuned.Stages[0].LossScale, tuned.Stages[1].LossScale}
	if strings.Join(got, ", ") != "fixed 64, fixed 64, fixed 8" || tuned.Arithmetic.Stages[0].Arm.LossScale.Value != 64 || tuned.Arithmetic.Stages[1].Arm.LossScale.Value != 8 {
		t.Errorf("%q, %+v", got, tuned.Arithmetic.Stages[0].Arm.LossScale)
	}
	if p.Arms[1].Stages[0].LossScale != "none" || p.Arms[1].Arithmetic.Stages[0].Arm.LossScale.Kind != trainer.NoScale {
		t.Error("tuning changed the plan's own arm")
	}
	if strings.Count(tuned.Canonical, "loss scale: fixed 64") != 2 {
		t.Errorf("canonical\n%s", tuned.Canonical)
	}
}

// TestEdge: only of three or more rates can one be at the end.
func TestEdge(t *testing.T) {
	rates := &Tuning{LearningRates: []float64{0.1, 0.01, 0.05}}
	for i, want := range []bool{true, true, false} {
		if rates.Edge(rates.Pairs()[i]) != want {
			t.Errorf("rate %d", i)
		}
	}
	two := &Tuning{LearningRates: []float64{0.1, 0.01}}
	scales := &Tuning{LossScales: make([]trainer.LossScale, 3)}
	if two.Edge(two.Pairs()[0]) || scales.Edge(scales.Pairs()[0]) {
		t.Error("no list of three rates")
	}
}

func TestTuningErrors(t *testing.T) {
	cosine := strings.Replace(basePlan, "learning_rate = 0.02", "learning_rate = { start = 0.1, cosine = true, end = 0.02 }", 1)
	for _, c := range []struct{ text, want string }{
		{basePlan + "[tuning]\n", "tuning: nothing to choose from: a tuning takes two learning rates or loss scales at least; write learning_rate = [0.01, 0.02, 0.05]"},
		{basePlan + "[tuning]\nlearning_rate = [0.1]\n", "nothing to choose from"},
		{basePlan + "[tuning]\nlearning_rate = 0.1\n", "tuning.learning_rate: wrong type: 0.1 is a number with a fraction, want an array of values"},
		{basePlan + "[tuning]\nlearning_rate = [0.1, 0]\n", "a learning rate of 0 is not a positive binary32 number"},
		{basePlan + "[tuning]\nlearning_rate = [0.1, 0.2, 0.1]\n", "the value 0.1 stands twice; keep one of them"},
		{basePlan + "[tuning]\nloss_scale = [\"none\", \"fixd\"]\n", `unknown word "fixd"; did you mean "fixed"?`},
		{basePlan + tuningTable + "metric = \"test accuracy\"\n", "tuning.metric: values chosen on test data would spoil what is claimed of it; write metric = \"validation accuracy\""},
		{basePlan + tuningTable + "metric = \"validation los\"\n", `unknown word "validation los"; did you mean "validation loss"?`},
		{basePlan + tuningTable + "first_seed = 99\n", "tuning.first_seed: the seeds 99 to 100 of the tuning meet those of the reported replicates, 100 to 103; write first_seed = 100100"},
		{strings.Replace(basePlan, "validation = 50\n", "validation = 0\n", 1) + tuningTable, "the task has no validation data to choose by; write validation = 500 in [task]"},
		{strings.Replace(basePlan, "[claim]\n", "[claim]\nmetric = \"validation accuracy\"\n", 1) + tuningTable, "the claim is about validation accuracy, which the tuning chooses by"},
		{strings.Replace(basePlan, `name = "bf16"`, `name = "baseline trial 2"`, 1) + tuningTable, `the arm "baseline trial 2" has the name of a trial of "baseline"`},
		{cosine + tuningTable, `a learning rate that starts at 0.01 and ends at 0.02; write at least the end of the schedule`},
	} {
		all := failures(t, texts{"plan.toml": c.text}, "plan.toml")
		told := false
		for _, e := range all {
			told = told || strings.Contains(e.Error(), c.want)
		}
		if !told || c.text != cosine+tuningTable && len(all) != 1 {
			t.Errorf("%v, want %s", all, c.want)
		}
	}
	if p := load(t, regressionPlan()+tuningTable); p.Tuning.Metric != "validation RMSE" {
		t.Errorf("a regression is tuned by %s", p.Tuning.Metric)
	}
}
