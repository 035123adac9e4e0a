package plan

import (
	"slices"
	"strings"
	"testing"

	"ulpine/trainer"
)

// changed is basePlan with its optimizer or its learning rate replaced.
func changed(old, now string) string { return strings.Replace(basePlan, old, now, 1) }

const (
	oldOptimizer = `optimizer = { kind = "sgd", momentum = 0.9 }`
	oldRate      = `learning_rate = 0.02`
)

func TestOptimizers(t *testing.T) {
	for _, c := range []struct {
		text string
		want trainer.Optimizer
		said string
	}{
		{`optimizer = "sgd"`, trainer.Optimizer{Kind: "sgd"}, "sgd momentum 0,"},
		{`optimizer = { kind = "nesterov", momentum = 0.5 }`, trainer.Optimizer{Kind: "nesterov", Momentum: 0.5}, "nesterov momentum 0.5,"},
		{`optimizer = "adam"`, trainer.Optimizer{Kind: "adam", Beta1: 0.9, Beta2: 0.999, Epsilon: 1e-8}, "adam beta1 0.9 beta2 0.999 epsilon 1e-08,"},
		{
			`optimizer = { kind = "adam", beta1 = 0.5, beta2 = 0.75, epsilon = 1e-3, epsilon_inside = true }`,
			trainer.Optimizer{Kind: "adam", Beta1: 0.5, Beta2: 0.75, Epsilon: 1e-3, EpsilonInside: true},
			"adam beta1 0.5 beta2 0.75 epsilon 0.001 inside the root,",
		},
		{
			`optimizer = { kind = "adamw", weight_decay = 0.01, compensated = true }`,
			trainer.Optimizer{Kind: "adamw", Beta1: 0.9, Beta2: 0.999, Epsilon: 1e-8, WeightDecay: 0.01, Decoupled: true, Compensated: true},
			"adamw beta1 0.9 beta2 0.999 epsilon 1e-08 weight decay 0.01 decoupled compensated,",
		},
		{
			`optimizer = { kind = "sgd", momentum = 0.9, weight_decay = 0.5, clip_norm = 2 }`,
			trainer.Optimizer{Kind: "sgd", Momentum: 0.9, WeightDecay: 0.5, ClipNorm: 2},
			"sgd momentum 0.9 weight decay 0.5 clipped at norm 2,",
		},
	} {
		p := load(t, changed(oldOptimizer, c.text))
		if p.Training.Optimizer != c.want {
			t.Errorf("%s: %+v, want %+v", c.text, p.Training.Optimizer, c.want)
		}
		states, err := c.want.States()
		if err != nil {
			t.Fatal(err)
		}
		if got := len(p.Arms[1].Arithmetic.Layers[0].States); got != states {
			t.Errorf("%s: %d states, want %d", c.text, got, states)
		}
		if !strings.Contains(p.Arms[1].Canonical, c.said) {
			t.Errorf("%s: the canonical text lacks %q:\n%s", c.text, c.said, p.Arms[1].Canonical)
		}
	}
}

// Every kind of the trainer can be asked for, so that a new one is not forgotten here.
func TestEveryOptimizerCanBeAskedFor(t *testing.T) {
	for _, kind := range trainer.OptimizerNames() {
		load(t, changed(oldOptimizer, `optimizer = { kind = "`+kind+`"`+map[string]string{"nesterov": ", momentum = 0.9"}[kind]+` }`))
	}
}

// Defaults written out are the same run as defaults left out.
func TestWrittenOutDefaultsHaveTheSameText(t *testing.T) {
	short := load(t, changed(oldOptimizer, `optimizer = "adam"`))
	long := load(t, changed(oldOptimizer, `optimizer = { kind = "adam", beta1 = 0.9, beta2 = 0.999, epsilon = 1e-8 }`))
	if short.Arms[1].Canonical != long.Arms[1].Canonical {
		t.Error("the canonical texts differ")
	}
}

func TestSchedules(t *testing.T) {
	for _, c := range []struct {
		text string
		want trainer.Schedule
		said string
	}{
		{`learning_rate = { start = 0.5, cosine = true }`, trainer.Schedule{Start: 0.5, Multiply: 1, Cosine: true}, "learning rate 0.5 along a cosine to 0,"},
		{`learning_rate = { start = 0.5, cosine = true, end = 0.25, warm_up = 7 }`, trainer.Schedule{Start: 0.5, Multiply: 1, Cosine: true, End: 0.25, WarmUp: 7}, "learning rate 0.5 along a cosine to 0.25 after a rise over 7 steps,"},
		{`learning_rate = { start = 0.5, multiply = 0.5, at_epochs = [2], warm_up = 29 }`, trainer.Schedule{Start: 0.5, Multiply: 0.5, AtEpochs: []int{2}, WarmUp: 29}, "learning rate 0.5 x0.5 at epochs [2] after a rise over 29 steps,"},
	} {
		p := load(t, changed(oldRate, c.text))
		got := p.Training.LearningRate
		if !slices.Equal(got.AtEpochs, c.want.AtEpochs) {
			t.Errorf("%s: %+v", c.text, got)
		}
		got.AtEpochs, c.want.AtEpochs = nil, nil
		if got.Start != c.want.Start || got.Multiply != c.want.Multiply || got.Cosine != c.want.Cosine || got.End != c.want.End || got.WarmUp != c.want.WarmUp {
			t.Errorf("%s: %+v, want %+v", c.text, got, c.want)
		}
		if !strings.Contains(p.Arms[1].Canonical, c.said) {
			t.Errorf("%s: the canonical text lacks %q", c.text, c.said)
		}
	}
}

func TestTrainingErrors(t *testing.T) {
	for _, c := range []struct{ old, now, want string }{
		{oldOptimizer, `optimizer = { kind = "adma" }`, `training.optimizer: unknown optimizer "adma"; write one of sgd, nesterov, adam, adamw`},
		{oldOptimizer, `optimizer = { kind = "adam", betta1 = 0.9 }`, `training.optimizer.betta1: unknown key; did you mean "beta1"?`},
		{oldOptimizer, `optimizer = { kind = "sgd", beta1 = 0.9 }`, `training.optimizer: sgd takes no betas`},
		{oldOptimizer, `optimizer = { kind = "adam", epsilon = 0 }`, `training.optimizer.epsilon: epsilon of 0; leave it out`},
		{oldOptimizer, `optimizer = { kind = "adam", weight_decay = -1 }`, `training.optimizer: weight decay is -1; it must be`},
		{oldRate, `learning_rate = { start = 0.1, end = 0.01 }`, `training.learning_rate.end: an end without a cosine; write cosine = true`},
		{oldRate, `learning_rate = { start = 0.1, cosine = true, end = 0.2 }`, `training.learning_rate.end: an end of 0.2 does not lie between 0 and the start, 0.1; `},
		{oldRate, `learning_rate = { start = 0.1, cosine = true, multiply = 0.5, at_epochs = [2] }`, `training.learning_rate.at_epochs: falls at epochs and along a cosine at once; keep one of them`},
		{oldRate, `learning_rate = { start = 0.1, warm_up = 30 }`, `training.learning_rate.warm_up: the training has 30 steps, no more than the warm-up; rise over fewer steps`},
		{oldRate, `learning_rate = { start = 0.1, warm_up = 0 }`, `training.learning_rate.warm_up: 0 is out of range; write at least 1`},
		{`storage = "bf16"`, `learning_rate = { start = 0.1, warm_up = 30 }`, `arm[1].learning_rate.warm_up: the training has 30 steps`},
	} {
		all := failures(t, texts{"plan.toml": changed(c.old, c.now)}, "plan.toml")
		if got := all[0].Error(); len(all) != 1 || !strings.Contains(got, c.want) {
			t.Errorf("%s\ngot  %v\nwant %s", c.now, all, c.want)
		}
	}
}

// What Adam's second moment needs can be asked apart from the first.
func TestStatesOneByOne(t *testing.T) {
	text := changed(oldOptimizer, `optimizer = { kind = "adam", compensated = true }`)
	p := load(t, strings.Replace(text, `storage = "bf16"`, `update.state = ["bf16", { format = "fp16", rounding = "up" }, "fp32"]`, 1))
	states := p.Arms[1].Arithmetic.Layers[0].States
	if len(states) != 3 || states[0].String() == states[1].String() || states[1].Format.String() != "binary16" || states[2].Format.String() != "binary32" {
		t.Errorf("states %v", states)
	}
	if want := "update.state [bf16, fp16 up, fp32]"; p.Arms[1].Summary != want {
		t.Errorf("summary %q, want %q", p.Arms[1].Summary, want)
	}
	for _, c := range []struct{ now, want string }{
		{`update.state = ["bf16", "fp32"]`, "arm[1].update.state: 2 formats for the 3 state tensors of the optimizer; write 3, or one for all"},
		{`update.state = []`, `arm[1].update.state: no format; write update.state = `},
		{`update.state = ["bf61", "fp32", "fp32"]`, `arm[1].update.state[1]: unknown format "bf61"; did you mean "bf16"?`},
		{`update.step = ["bf16"]`, "arm[1].update.step: wrong type: an array, want a format or a table"},
	} {
		all := failures(t, texts{"plan.toml": strings.Replace(text, `storage = "bf16"`, c.now, 1)}, "plan.toml")
		if len(all) != 1 || !strings.Contains(all[0].Error(), c.want) {
			t.Errorf("%s: %v, want %s", c.now, all, c.want)
		}
	}
}
