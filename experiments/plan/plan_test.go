package plan

import (
	"slices"
	"strings"
	"testing"

	"ulpine/trainer"
)

// vary reads basePlan with parts of it replaced, old and new in turn.
func vary(t *testing.T, oldnew ...string) *Plan {
	t.Helper()
	for i := 0; i < len(oldnew); i += 2 {
		if strings.Count(basePlan, oldnew[i]) != 1 {
			t.Fatalf("%q stands %d times in the plan", oldnew[i], strings.Count(basePlan, oldnew[i]))
		}
	}
	return load(t, strings.NewReplacer(oldnew...).Replace(basePlan))
}

func TestDefaults(t *testing.T) {
	p := vary(t, "first_seed = 100\n", "", `optimizer = { kind = "sgd", momentum = 0.9 }`, "")
	want := trainer.Training{
		Loss: "cross-entropy", Optimizer: trainer.Optimizer{Kind: "sgd"},
		LearningRate: trainer.Schedule{Start: 0.02, Multiply: 1}, Batch: 20, Epochs: 3, Shuffle: true,
		EvaluateTest: trainer.EveryEpoch, EvaluateValidation: trainer.EveryEpoch,
	}
	if got := describeTraining(p.Training); got != describeTraining(want) {
		t.Errorf("training %s, want %s", got, describeTraining(want))
	}
	if p.Replicates != (Replicates{4, 1, 0}) || p.Claim != (Claim{"test accuracy", 0.01, 0.95}) || p.Pretrain != nil {
		t.Errorf("%+v %+v %+v", p.Replicates, p.Claim, p.Pretrain)
	}
	if len(p.Arms[1].Arithmetic.Layers[2].States) != 0 || p.Arms[1].at(2, "update.state") != "" {
		t.Error("SGD without momentum has a state")
	}
	if len(p.Warnings) != 0 || p.Runs() != 8 {
		t.Errorf("warnings %q, %d runs", p.Warnings, p.Runs())
	}
}

func TestTrainingKeys(t *testing.T) {
	p := vary(t, "learning_rate = 0.02", "learning_rate = { start = 0.1, multiply = 0.5, at_epochs = [2, 2, 3] }",
		"epochs = 3", "epochs = 3\nshuffle = false\nloss = \"cross-entropy\"\nevaluate = { test = \"last epoch\", validation = \"never\" }")
	got := describeTraining(p.Training)
	if want := "cross-entropy, sgd momentum 0.9, learning rate 0.1 x0.5 at epochs [2 2 3], batch 20, epochs 3, in the data's order, test data last epoch, validation data never"; got != want {
		t.Errorf("training %q, want %q", got, want)
	}
	p = vary(t, "epochs = 3", "epochs = 3\nevaluate = \"last epoch\"")
	if p.Training.EvaluateTest != trainer.LastEpoch || p.Training.EvaluateValidation != trainer.LastEpoch {
		t.Errorf("%+v", p.Training)
	}
}

func TestLossScales(t *testing.T) {
	for text, want := range map[string]trainer.LossScale{
		`"none"`:                           {},
		`{ kind = "none" }`:                {},
		`{ kind = "fixed", value = 1024 }`: {Kind: trainer.FixedScale, Value: 1024},
		`"dynamic"`:                        {Kind: trainer.DynamicScale, Value: 32768, RaiseAfter: 1000, RaiseBy: 2, CutBy: 0.5},
		`{ kind = "dynamic", value = 8.0, raise_after = 5, raise_by = 4, cut_by = 0.25 }`: {Kind: trainer.DynamicScale, Value: 8, RaiseAfter: 5, RaiseBy: 4, CutBy: 0.25},
	} {
		_, a := loadArm(t, "loss_scale = "+text)
		if got := a.Arithmetic.LossScale; got != want {
			t.Errorf("%s: %+v, want %+v", text, got, want)
		}
	}
}

func TestSlugs(t *testing.T) {
	for name, want := range map[string]string{
		"bf16 nearest": "bf16-nearest", "fp16 nearest, fp16 sums": "fp16-nearest-fp16-sums", "  A--b_C.9! ": "a-b-c-9",
		"größe": "gr-e", "": "", "--": "", "E4M3": "e4m3",
	} {
		if got := Slug(name); got != want {
			t.Errorf("Slug(%q) = %q, want %q", name, got, want)
		}
	}
}

func TestContrasts(t *testing.T) {
	p := vary(t, "[claim]", "[[contrast]]\narm = \"bf16\"\nagainst = \"baseline\"\n[[contrast]]\narm = \"baseline\"\nagainst = \"bf16\"\nmargin = 0.002\n[claim]")
	want := []Contrast{{"bf16", "baseline", 0.01}, {"baseline", "bf16", 0.002}}
	if !slices.Equal(p.Contrasts, want) {
		t.Errorf("%+v, want %+v", p.Contrasts, want)
	}
}

func TestPretrain(t *testing.T) {
	p := vary(t, "[claim]", "[pretrain]\ntask = { variant = \"remounted\", train = 300 }\ntraining.epochs = 9\ntraining.learning_rate = 0.5\n[claim]")
	pre := p.Pretrain
	if pre == nil {
		t.Fatal("no pretraining")
	}
	if pre.Task.Train != 300 || pre.Task.Test != 100 || pre.Training.Epochs != 9 || pre.Training.LearningRate.Start != 0.5 || pre.Training.Batch != 20 {
		t.Errorf("%+v", pre)
	}
	if !strings.Contains(pre.Task.Canonical, "remounted") || strings.Contains(p.Task.Canonical, "remounted") {
		t.Errorf("tasks %q, %q", pre.Task.Canonical, p.Task.Canonical)
	}
	if p.Training.Epochs != 3 || p.Runs() != 12 || !strings.Contains(p.TaskCanonical(), pre.Canonical) {
		t.Errorf("epochs %d, runs %d", p.Training.Epochs, p.Runs())
	}
	// Its optimizer keeps states of its own.
	momentum := vary(t, "[claim]", "[pretrain]\ntraining.optimizer = \"sgd\"\n[claim]", `everything = "fp32"`, "everything = \"fp64\"\nloss_scale = { kind = \"fixed\", value = 2 }").Pretrain
	if l := momentum.Arithmetic.Layers[2]; len(l.States) != 0 || l.Master.Format.String() != "binary64" || momentum.Arithmetic.LossScale.Value != 2 || len(pre.Arithmetic.Layers[2].States) != 1 {
		t.Errorf("arithmetic of the pretraining: %+v", momentum.Arithmetic)
	}
	// The pretraining follows the baseline's arithmetic.
	other := vary(t, "[claim]", "[pretrain]\ntask = { variant = \"remounted\", train = 300 }\ntraining.epochs = 9\ntraining.learning_rate = 0.5\n[claim]",
		`everything = "fp32"`, `everything = "fp64"`)
	if other.Pretrain.Canonical == pre.Canonical {
		t.Error("the baseline's arithmetic is not part of the pretraining")
	}
	text := strings.Replace(basePlan, "[claim]", "[pretrain]\ntraining.batch = 201\n[claim]", 1)
	if all := failures(t, texts{"p": text}, "p"); all[0].Key != "pretrain.training.batch" || all[0].Line != 19 {
		t.Errorf("%v", all)
	}
	text = strings.Replace(basePlan, "[claim]", "[pretrain]\ntask.varient = \"x\"\n[claim]", 1)
	if all := failures(t, texts{"p": text}, "p"); len(all) != 1 || all[0].Key != "pretrain.task.varient" || all[0].Remedy != `did you mean "variant"?` {
		t.Errorf("%v", all)
	}
}

func TestOverrides(t *testing.T) {
	p, a := loadArm(t, "training = { epochs = 5, batch = 10, optimizer = \"sgd\" }", "learning_rate = 0.5")
	if a.Training.Epochs != 5 || a.Training.Batch != 10 || a.Training.LearningRate.Start != 0.5 || a.Training.Optimizer.Momentum != 0 {
		t.Errorf("%+v", a.Training)
	}
	if got := strings.Join(a.Overrides, "|"); got != "learning rate|optimizer|batch|epochs" {
		t.Errorf("overrides %q", got)
	}
	if p.Baseline().Training.Epochs != 3 || len(a.Arithmetic.Layers[0].States) != 0 {
		t.Error("the override leaks, or the optimizer's state does")
	}
	if !strings.Contains(a.Canonical, "epochs 5") || len(p.Warnings) != 0 {
		t.Errorf("%q\n%s", p.Warnings, a.Canonical)
	}
}

func TestWarnings(t *testing.T) {
	for name, c := range map[string]struct{ old, new, want string }{
		"loss scale":         {`storage = "bf16"`, `loss_scale = { kind = "fixed", value = 1000 }`, `arm "bf16": a loss scale of 1000 is no power of two: scaling itself rounds`},
		"raise":              {`storage = "bf16"`, `loss_scale = { kind = "dynamic", raise_by = 3 }`, `arm "bf16": a loss scale raised by a factor of 3 is no power of two: scaling itself rounds`},
		"long chunk":         {`storage = "bf16"`, `forward.sum = { format = "fp32", order = "chunk(65)" }`, `arm "bf16": chunk(65) is longer than any sum it applies to (at most 64 terms): it never takes effect`},
		"long chunk in all":  {`storage = "bf16"`, `accumulate = { format = "fp32", order = "chunk(321)" }`, `arm "bf16": chunk(321) is longer than any sum it applies to (at most 320 terms): it never takes effect`},
		"many lanes":         {`storage = "bf16"`, `forward.sum = { format = "fp32", order = "lanes(128)" }`, `arm "bf16": lanes(128) is longer than any sum it applies to (at most 64 terms): it never takes effect`},
		"rate and format":    {`storage = "bf16"`, "storage = \"bf16\"\nlearning_rate = 0.1", `arm "bf16": changes the learning rate and the arithmetic at once: its difference cannot be put down to either`},
		"one replicate":      {"count = 4", "count = 1", "one replicate: no interval can be given, and so no verdict"},
		"baseline not fp32":  {`everything = "fp32"`, `accumulate = "fp64"`, "the baseline is not binary32 throughout: differences are against accumulate fp64"},
		"rate never reached": {"learning_rate = 0.02", "learning_rate = { start = 0.1, multiply = 0.1, at_epochs = [3, 4] }", "training: the learning rate change at epoch 4 is never reached: the last epoch is 3"},
	} {
		t.Run(name, func(t *testing.T) {
			p := vary(t, c.old, c.new)
			if len(p.Warnings) != 1 || p.Warnings[0] != c.want {
				t.Errorf("got %q, want %q", p.Warnings, c.want)
			}
		})
	}
	// A chunk no longer than the longest sum it applies to is no reason to doubt.
	for _, sound := range []string{
		`forward.sum = { format = "fp32", order = "chunk(64)" }`, `accumulate = { format = "fp32", order = "chunk(320)" }`,
		`loss_scale = { kind = "fixed", value = 0.125 }`, "learning_rate = 0.1", "storage = \"bf16\"\nlearning_rate = 0.02",
	} {
		if p := vary(t, `storage = "bf16"`, sound); len(p.Warnings) != 0 {
			t.Errorf("%s: %q", sound, p.Warnings)
		}
	}
}

// What a canonical text leaves out and what it holds.
func TestCanonical(t *testing.T) {
	base := vary(t)
	for _, same := range [][2]string{
		{`name = "bf16"`, `name = "another name"`},
		{`storage = "bf16"`, `storage = { format = "bfloat16", rounding = "nearest-even", subnormals = true, overflow = "infinity" }`},
		{`storage = "bf16"`, `storage = "bf16" # comment`},
		{`storage = "bf16"`, "storage = \"bf16\"\nweight_gradient.operand = \"bf16\"\nforward.outer = \"fp32\""},
		{`storage = "bf16"`, "everything = \"bf16\"\naccumulate = \"fp32\"\nforward.product = \"fp32\"\ninput_gradient.product = \"fp32\"\nweight_gradient.product = \"fp32\""},
	} {
		p := vary(t, same[0], same[1])
		if p.Arms[1].Canonical != base.Arms[1].Canonical || p.TaskCanonical() != base.TaskCanonical() {
			t.Errorf("%s changes the canonical text:\n%s", same[1], p.Arms[1].Canonical)
		}
	}
	seen := map[string]string{base.Canonical(): "the base"}
	for _, other := range [][2]string{
		{`name = "bf16"`, `name = "another name"`},
		{`storage = "bf16"`, `storage = { format = "bf16", subnormals = false }`},
		{`storage = "bf16"`, `storage = { format = "bf16", overflow = "saturate" }`},
		{`storage = "bf16"`, `storage = { format = "bf16", rounding = "stochastic" }`},
		{`storage = "bf16"`, `storage = { format = "bf16", rounding = "stochastic", variant = "centred" }`},
		{`storage = "bf16"`, `storage = { format = "bf16", rounding = "stochastic", random_bits = 15 }`},
		{`storage = "bf16"`, "storage = \"bf16\"\nforward.product = \"exact\""},
		{`storage = "bf16"`, "storage = \"bf16\"\naccumulate = { format = \"fp32\", through = \"binary32\" }"},
		{`storage = "bf16"`, "storage = \"bf16\"\naccumulate = { format = \"fp32\", order = \"pairwise\" }"},
		{`storage = "bf16"`, "storage = \"bf16\"\nforward.outer = \"fp16\""},
		{`storage = "bf16"`, "storage = \"bf16\"\nlearning_rate = 0.5"},
		{`storage = "bf16"`, "storage = \"bf16\"\nloss_scale = \"dynamic\""},
		{"count = 4", "count = 5"},
		{"first_seed = 100", "first_seed = 101"},
		{"margin = 0.01", "margin = 0.02"},
		{"batch = 20", "batch = 10"},
		{"epochs = 3", "epochs = 3\nshuffle = false"},
		{"epochs = 3", "epochs = 3\nevaluate = \"last epoch\""},
		{"train = 200", "train = 201"},
		{"test = 100", "test = 100\ndata_seed = 7"},
		{`layers = ["conv1d out=4 width=8 stride=8", "relu", "dense 5"]`, `layers = ["conv1d out=4 width=8 stride=8", "dense 5"]`},
	} {
		c := vary(t, other[0], other[1]).Canonical()
		if twin, known := seen[c]; known {
			t.Errorf("%s has the canonical text of %s", other[1], twin)
		}
		seen[c] = other[1]
	}
	if again := vary(t); again.Canonical() != base.Canonical() {
		t.Error("the canonical text is not deterministic")
	}
	if titled := vary(t, `title = "a title"`, `title = "another"`); titled.Canonical() != base.Canonical() {
		t.Error("the title is part of the canonical text")
	}
}

func TestSettingsRows(t *testing.T) {
	_, a := loadArm(t, `storage = "E4M3"`, `forward.product = "exact"`, `accumulate = { format = "bf16", order = "chunk(16)", rounding = "stochastic" }`)
	want := []Setting{
		{-1, "input", "input", "E4M3", 4, 3, 8, "nearest-even", "", "saturate"},
		{-1, "loss", "loss.gradient", "E4M3", 4, 3, 8, "nearest-even", "", "saturate"},
		{0, "conv1d out=4 width=8 stride=8 pad=0", "forward.product", "exact", 0, 0, 0, "exact", "", ""},
		{0, "conv1d out=4 width=8 stride=8 pad=0", "forward.sum", "bfloat16", 8, 7, 16, "stochastic r=16 truncated", "chunk(16)", "infinity"},
		{1, "relu", "forward.activation", "E4M3", 4, 3, 8, "nearest-even", "", "saturate"},
		{2, "dense 5", "weight_gradient.activation", "E4M3", 4, 3, 8, "reused", "", "saturate"},
	}
	for _, w := range want {
		if !slices.Contains(a.Settings, w) {
			t.Errorf("no row %+v in\n%+v", w, a.Settings)
		}
	}
	for _, s := range a.Settings {
		if s.Layer == 0 && strings.HasPrefix(s.Point, "input_gradient") || s.Layer == 1 && s.Point != "forward.activation" {
			t.Errorf("a point that is never computed: %+v", s)
		}
	}
	if want := "storage E4M3, forward.product exact, accumulate bf16 stochastic r=16 truncated chunk(16)"; a.Summary != want {
		t.Errorf("summary %q, want %q", a.Summary, want)
	}
}

// Work adds up what every run multiplies; here by hand: the convolution has 16
// positions x 4 channels x 8 terms, the dense layer 64 x 5.
func TestWork(t *testing.T) {
	p := vary(t, "[claim]", "[pretrain]\ntask.train = 400\n[claim]", "epochs = 3", "epochs = 3\nevaluate = { test = \"every epoch\", validation = \"last epoch\" }")
	const forward = 16*4*8 + 64*5
	const step = 2*16*4*8 + 3*64*5 // no input gradient below the first layer
	const run = 3*200*step + (3*100+1*50)*forward
	const pretrain = 3*400*step + (3*100+1*50)*forward
	w := p.Work()
	if want := (Work{Runs: 12, Pretraining: 4, MACs: 4 * (2*run + pretrain), LongestSum: 20 * 16}); w != want {
		t.Errorf("work %+v, want %+v", w, want)
	}
}
