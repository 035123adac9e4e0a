package plan

import (
	"strings"
	"testing"
)

// fp16 in the words of a resolved point.
const fp16Point = "binary16, nearest-even, overflow infinity"

// The network of basePlan is conv1d, relu, dense; layers are counted from 0 here
// and from 1 in plans.
func TestLayerOverrides(t *testing.T) {
	for _, c := range []struct {
		settings string
		want     map[int]string // layer -> forward.weight
	}{
		{"storage = \"bf16\"\n[[arm.layer]]\nselect = \"first\"\nstorage = \"fp16\"", map[int]string{0: fp16Point, 2: bf16}},
		{"storage = \"bf16\"\n[[arm.layer]]\nselect = \"last\"\nstorage = \"fp16\"", map[int]string{0: bf16, 2: fp16Point}},
		{"storage = \"bf16\"\n[[arm.layer]]\nselect = \"conv1d\"\nforward.weight = \"fp16\"", map[int]string{0: fp16Point, 2: bf16}},
		{"storage = \"bf16\"\n[[arm.layer]]\nselect = 3\neverything = \"fp16\"", map[int]string{0: bf16, 2: fp16Point}},
		{"storage = \"bf16\"\n[[arm.layer]]\nselect = \"dense  5\"\neverything = \"fp16\"", map[int]string{0: bf16, 2: fp16Point}},
		{"storage = \"bf16\"\n[[arm.layer]]\nselect = \"conv1d out=4 width=8 stride=8 pad=0\"\neverything = \"fp16\"", map[int]string{0: fp16Point, 2: bf16}},
		{"[[arm.layer]]\nselect = [\"first\", 3]\nforward.weight = \"fp16\"", map[int]string{0: fp16Point, 2: fp16Point}},
		// A layer's own setting beats one for all layers, however many points it names,
		// and a number beats an end, which beats a name, which beats a kind.
		{"forward.weight = \"bf16\"\n[[arm.layer]]\nselect = \"first\"\neverything = \"fp16\"", map[int]string{0: fp16Point, 2: bf16}},
		{"[[arm.layer]]\nselect = 1\neverything = \"fp16\"\n[[arm.layer]]\nselect = \"first\"\nforward.weight = \"bf16\"", map[int]string{0: fp16Point, 2: fp32}},
		{"[[arm.layer]]\nselect = \"last\"\nforward.weight = \"fp16\"\n[[arm.layer]]\nselect = \"dense 5\"\nforward.weight = \"bf16\"", map[int]string{0: fp32, 2: fp16Point}},
		{"[[arm.layer]]\nselect = \"dense\"\nforward.weight = \"bf16\"\n[[arm.layer]]\nselect = \"dense 5\"\nforward.weight = \"fp16\"", map[int]string{0: fp32, 2: fp16Point}},
		// Within one table the specific key wins as everywhere.
		{"[[arm.layer]]\nselect = \"last\"\nforward.weight = \"fp16\"\nstorage = \"bf16\"", map[int]string{0: fp32, 2: fp16Point}},
	} {
		p, a := loadArm(t, c.settings)
		for layer, want := range c.want {
			if got := a.at(layer, "forward.weight"); got != want {
				t.Errorf("%s\nlayer %d: %q, want %q", c.settings, layer, got, want)
			}
		}
		if a.Canonical == p.Baseline().Canonical || !strings.Contains(a.Summary, "layer ") {
			t.Errorf("%s: canonical text or summary %q does not tell the override", c.settings, a.Summary)
		}
	}
}

// An override that says what holds anyway gives the same bits, and so the same text.
func TestIdleOverrideHasTheSameCanonicalText(t *testing.T) {
	_, plain := loadArm(t, `storage = "bf16"`)
	_, idle := loadArm(t, "storage = \"bf16\"\n[[arm.layer]]\nselect = \"first\"\nforward.weight = \"bf16\"")
	if plain.Canonical != idle.Canonical {
		t.Error("the canonical texts differ")
	}
}

// Sums of one layer: order and outer sums go with it, those of others stay.
func TestLayerSums(t *testing.T) {
	_, a := loadArm(t, "accumulate = \"bf16\"\n[[arm.layer]]\nselect = \"last\"\naccumulate = { format = \"fp16\", order = \"chunk(4)\", outer = \"fp32\" }\nforward.product = \"exact\"")
	for point, want := range map[string]string{
		"forward.sum": fp16Point + ", chunk(4)", "forward.outer": fp32, "forward.product": "exact, not rounded", "weight_gradient.sum": fp16Point + ", chunk(4)",
	} {
		if got := a.at(2, point); got != want {
			t.Errorf("last layer, %s: %q, want %q", point, got, want)
		}
	}
	if got := a.at(0, "forward.sum"); got != bf16+seq {
		t.Errorf("first layer: %q", got)
	}
}

// The baseline may have overrides, which its arms inherit where they set nothing.
func TestBaselineOverrides(t *testing.T) {
	text := strings.Replace(basePlan, "[[arm]]", "[[baseline.layer]]\nselect = \"first\"\nforward.weight = \"bf16\"\n[[arm]]\nname = \"same\"\n[[arm]]", 1)
	p := load(t, strings.Replace(text, `storage = "bf16"`, `storage = "fp16"`, 1))
	if got := p.Baseline().at(0, "forward.weight"); got != bf16 {
		t.Errorf("baseline: %q", got)
	}
	if p.Arms[1].Canonical != p.Baseline().Canonical {
		t.Error("an arm that sets nothing is not as the baseline")
	}
	if got := p.Arms[2].at(0, "forward.weight"); got != fp16Point {
		t.Errorf("an arm's setting for all layers against an inherited one of a layer: %q", got)
	}
	if len(p.Warnings) != 1 || !strings.Contains(p.Warnings[0], "not binary32 throughout") {
		t.Errorf("warnings %q", p.Warnings)
	}
}

func TestLayerErrors(t *testing.T) {
	for _, c := range []struct{ settings, want string }{
		{"select = \"conv2d\"\nstorage = \"fp16\"", `:25: arm[1].layer[1].select: no layer is selected by "conv2d"; did you mean "conv1d"?`},
		{"select = \"bottom\"\nstorage = \"fp16\"", `:25: arm[1].layer[1].select: no layer is selected by "bottom"; write one of conv1d, conv1d out=4 width=8 stride=8 pad=0, dense, dense 5, first, last, relu`},
		{"select = 4\nstorage = \"fp16\"", ":25: arm[1].layer[1].select: there is no layer 4: the network has 3; write 1 to 3"},
		{"select = 0\nstorage = \"fp16\"", ":25: arm[1].layer[1].select: there is no layer 0: the network has 3; write 1 to 3"},
		{"select = 1.5\nstorage = \"fp16\"", ":25: arm[1].layer[1].select: wrong type: 1.5 is a number with a fraction, want a layer's kind, name or number; "},
		{"select = []\nstorage = \"fp16\"", ":25: arm[1].layer[1].select: selects no layer; "},
		{"storage = \"fp16\"", ":24: arm[1].layer[1]: select is missing; "},
		{"select = 1", `:24: arm[1].layer[1]: the layers are selected, but nothing is set; write storage = "fp32"`},
		{"select = 1\ninput = \"fp16\"", ":26: arm[1].layer[1].input: unknown key; write it in the arm itself: input and loss belong to no layer"},
		{"select = 1\nloss.gradient = \"fp16\"", ":26: arm[1].layer[1].loss: unknown key; write it in the arm itself: input and loss belong to no layer"},
		{"select = 1\nname = \"x\"\nstorage = \"bf16\"", ":26: arm[1].layer[1].name: unknown key; "},
		{"select = 1\nmaster = \"fp16\"", `:26: arm[1].layer[1].master: unknown key; write the point in full: update.master`},
		{"select = \"relu\"\nforward.weight = \"fp16\"", ":26: arm[1].layer[1].forward.weight: the layer it is for (relu) does not compute with forward.weight; remove it"},
		{"select = 1\ninput_gradient.result = \"fp16\"", ":26: arm[1].layer[1].input_gradient.result: the layer it is for (1) does not compute with input_gradient.result; "},
		{"select = 1\nstorage = \"fp61\"", `:26: arm[1].layer[1].storage: unknown format "fp61"; did you mean "fp16"?`},
		{"select = 1\nstorage = \"fp16\"\n[[arm.layer]]\nselect = 1\nstorage = \"fp16\"", ":29: arm[1].layer[2].storage: sets forward.weight, as layer 1: storage in plan.toml line 26 does: two equally specific settings on one point; keep one of them"},
		{"select = [\"relu\", \"conv1d\"]\nforward.activation = \"fp16\"\n[[arm.layer]]\nselect = \"relu\"\nforward.activation = \"bf16\"", ":29: arm[1].layer[2].forward.activation: sets forward.activation, as layer relu + conv1d: forward.activation in plan.toml line 26 does"},
	} {
		text := strings.Replace(basePlan, `storage = "bf16"`, "[[arm.layer]]\n"+c.settings, 1)
		all := failures(t, texts{"plan.toml": text}, "plan.toml")
		if !strings.HasPrefix(all[0].Error(), "plan.toml"+c.want) {
			t.Errorf("%s\ngot  %v\nwant plan.toml%s", c.settings, all[0], c.want)
		}
	}
	text := strings.Replace(basePlan, `storage = "bf16"`, "layer = 3", 1)
	if all := failures(t, texts{"plan.toml": text}, "plan.toml"); all[0].Error() != "plan.toml:24: arm[1].layer: wrong type: 3 is a whole number, want an array of tables; write [[layer]] with double brackets" {
		t.Errorf("%v", all)
	}
}
