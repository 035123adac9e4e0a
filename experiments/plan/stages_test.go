package plan

import (
	"strings"
	"testing"
)

// lowThenHigh are the settings of an arm with two stages.
var lowThenHigh = []string{
	`storage = "E4M3"`, `update.master = "bf16"`, `loss_scale = "dynamic"`,
	"[[arm.stage]]", "from_step = 11", `forward.weight = "bf16"`,
	"[[arm.stage]]", "from_epoch = 3", `everything = "fp32"`, `loss_scale = "none"`,
	"[[arm.stage.layer]]", `select = "first"`, `update.master = "fp16"`,
}

// Stages start from what held before and beat it; the rest stays.
func TestStagesChangeWhatTheySet(t *testing.T) {
	p, a := loadArm(t, lowThenHigh...)
	stages := a.Arithmetic.Stages
	if len(stages) != 2 || stages[0].Step != 11 || stages[1].Epoch != 3 {
		t.Fatalf("%+v", a.Stages)
	}
	for _, c := range []struct{ got, want string }{
		{a.Arithmetic.Layers[0].Weight.Format.String(), "E4M3"},
		{stages[0].Arm.Layers[0].Weight.Format.String(), "bfloat16"},
		{stages[0].Arm.Layers[0].Activation.Format.String(), "E4M3"},
		{stages[0].Arm.Layers[0].Master.Format.String(), "bfloat16"},
		{stages[1].Arm.Layers[2].Master.Format.String(), "binary32"},
		{stages[1].Arm.Layers[0].Master.Format.String(), "binary16"},
		{a.Stages[0].LossScale, a.LossScale},
		{a.Stages[1].LossScale, "none"},
		{a.Stages[1].Start, "epoch 3"},
	} {
		if c.got != c.want {
			t.Errorf("%s, want %s", c.got, c.want)
		}
	}
	if n := strings.Count(a.Canonical, "stage from "); n != 2 || !strings.Contains(a.Canonical, "stage from step 11\ninput: E4M3") {
		t.Errorf("canonical text:\n%s", a.Canonical)
	}
	for _, full := range []bool{false, true} {
		text := ResolveText(p, ResolveOptions{Full: full})
		for _, want := range []string{"from step 11", "from epoch 3", "forward.weight bf16", "layer first: update.master fp16"} {
			if !strings.Contains(text, want) {
				t.Errorf("full %v: %q is not in\n%s", full, want, text)
			}
		}
	}
	if len(p.Warnings) > 0 {
		t.Errorf("%q", p.Warnings)
	}
}

// A stage in a grid is one in each of its arms.
func TestStagesOfAGrid(t *testing.T) {
	text := strings.Replace(basePlan, "[[arm]]\nname = \"bf16\"\nstorage = \"bf16\"\n", `[[grid]]
name = "high from {epoch}"
axis.epoch = [2, 3]
storage = "E4M3"
[[grid.stage]]
from_epoch = "{epoch}"
storage = "fp32"
`, 1)
	p := load(t, text)
	if len(p.Arms) != 3 || p.Arms[1].Arithmetic.Stages[0].Epoch != 2 || p.Arms[2].Arithmetic.Stages[0].Epoch != 3 {
		t.Errorf("%+v", p.Arms)
	}
}

// What is wrong with a stage is told at its key.
func TestStagesThatCannotBe(t *testing.T) {
	for settings, want := range map[string]string{
		`storage = "fp32"`:                                      "arm[1].stage[1]: the stage does not say when it starts",
		"from_epoch = 2":                                        "arm[1].stage[1]: the stage changes nothing",
		"from_epoch = 4\nstorage = \"fp32\"":                    "arm[1].stage[1].from_epoch: starts with number 4, but the arm trains for 3 epochs",
		"from_step = 31\nstorage = \"fp32\"":                    "arm[1].stage[1].from_step: starts with number 31, but the arm trains for 30 steps",
		"from_epoch = 1\nstorage = \"fp32\"":                    "arm[1].stage[1].from_epoch: ",
		"from_epoch = 2\nfrom_step = 3\nstorage = \"fp32\"":     "arm[1].stage[1].from_step: the stage starts with an epoch and with a step",
		"from_epoch = 2\nlearning_rate = 3\nstorage = \"fp32\"": "arm[1].stage[1].learning_rate: unknown key",
		"from_epoch = 2\nstorage = \"fp32\"\n[[arm.stage]]\nfrom_step = 11\nstorage = \"bf16\"": "arm[1].stage[2].from_step: starts with step 11, no later than the stage before it",
	} {
		text := strings.Replace(basePlan, `storage = "bf16"`, "storage = \"bf16\"\n[[arm.stage]]\n"+settings, 1)
		all := failures(t, texts{"p.toml": text}, "p.toml")
		if got := all[0].Key + ": " + all[0].Reason; len(all) != 1 || !strings.HasPrefix(got, want) || all[0].Remedy == "" || all[0].Line == 0 {
			t.Errorf("%s\n%v, want %s", settings, all, want)
		}
	}
}
