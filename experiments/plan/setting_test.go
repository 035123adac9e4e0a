package plan

import (
	"slices"
	"strings"
	"testing"

	"ulpine/quant"
	"ulpine/trainer"
)

// In basePlan layer 0 is a convolution (no input gradient below it), 1 a ReLU,
// 2 dense.
const (
	fp32 = "binary32, nearest-even, overflow infinity"
	bf16 = "bfloat16, nearest-even, overflow infinity"
	fp16 = "binary16, nearest-even, overflow infinity"
	seq  = ", sequential"
	same = "as stored, not rounded again"
)

// expect compares points of layer 2, and of the arm as a whole where a point is
// no layer's.
func expect(t *testing.T, a *Arm, want map[string]string) {
	t.Helper()
	for point, say := range want {
		layer := 2
		if point == "input" || point == "loss.gradient" {
			layer = -1
		}
		if got := a.at(layer, point); got != say {
			t.Errorf("%s: %q, want %q", point, got, say)
		}
	}
}

func TestUnsetPointsEqualTheBaseline(t *testing.T) {
	_, a := loadArm(t)
	expect(t, a, map[string]string{
		"input": fp32, "loss.gradient": fp32, "forward.weight": fp32, "forward.activation": fp32, "forward.product": fp32,
		"forward.sum": fp32 + seq, "forward.outer": "", "input_gradient.weight": same, "input_gradient.gradient": same,
		"input_gradient.product": fp32, "input_gradient.sum": fp32 + seq, "input_gradient.result": fp32,
		"weight_gradient.activation": same, "weight_gradient.gradient": same, "weight_gradient.product": fp32,
		"weight_gradient.sum": fp32 + seq, "weight_gradient.result": fp32,
		"update.state": fp32, "update.step": fp32, "update.master": fp32,
	})
}

// The default baseline is the trainer's baseline, point for point.
func TestBaselineIsBinary32Everywhere(t *testing.T) {
	p, a := loadArm(t, `everything = "fp32"`)
	if a.Canonical != p.Baseline().Canonical {
		t.Errorf("everything = fp32 is not the baseline:\n%s\n%s", a.Canonical, p.Baseline().Canonical)
	}
	other := *p.Baseline()
	other.Arithmetic = trainer.Everything(quant.Point{Format: quant.Binary32}, len(p.Network.Layers), 1)
	if got := other.canonical(&p.Network); got != p.Baseline().Canonical {
		t.Errorf("got\n%s\nwant\n%s", p.Baseline().Canonical, got)
	}
	without := load(t, strings.Replace(basePlan, "[baseline]\neverything = \"fp32\"\n", "", 1))
	if without.Baseline().Canonical != p.Baseline().Canonical || !without.Baseline().Baseline || without.Baseline().Slug != "baseline" {
		t.Errorf("no baseline table:\n%s", without.Baseline().Canonical)
	}
	if !strings.Contains(a.Canonical, "layer 2 forward.product: binary32 nearest-even infinity\n") {
		t.Errorf("the product is not rounded:\n%s", a.Canonical)
	}
}

func TestShorthands(t *testing.T) {
	_, a := loadArm(t, `storage = "bf16"`, `accumulate = { format = "fp16", order = "chunk(8)", outer = "fp32", through = "binary32" }`)
	sum := fp16 + ", chunk(8) through binary32"
	expect(t, a, map[string]string{
		"input": bf16, "loss.gradient": bf16, "forward.weight": bf16, "forward.activation": bf16,
		"forward.product": fp32, "forward.sum": sum, "forward.outer": fp32,
		"input_gradient.weight": same, "input_gradient.gradient": same, "input_gradient.product": fp32,
		"input_gradient.sum": sum, "input_gradient.outer": fp32, "input_gradient.result": bf16,
		"weight_gradient.activation": same, "weight_gradient.gradient": same, "weight_gradient.product": fp32,
		"weight_gradient.sum": sum, "weight_gradient.outer": fp32, "weight_gradient.result": bf16,
		"update.state": bf16, "update.step": bf16, "update.master": bf16,
	})
	_, a = loadArm(t, `everything = "bf16"`)
	expect(t, a, map[string]string{"input": bf16, "forward.product": bf16, "weight_gradient.sum": bf16 + seq, "update.state": bf16, "forward.outer": ""})
	acc := a.Arithmetic.Layers[2].Forward
	if acc.Outer != nil || acc.Product == nil || acc.Sum.Format != quant.Format(quant.BFloat16) {
		t.Errorf("forward sums of everything = bf16: %v", acc)
	}
}

func TestMoreSpecificSettingHoldsInAnyOrder(t *testing.T) {
	settings := []string{
		`everything = { format = "fp16", order = "wide", outer = "fp64" }`,
		`storage = "bf16"`,
		`accumulate = "fp32"`,
		`forward.sum = { format = "bf16", order = "pairwise" }`,
		`weight_gradient.outer = "fp16"`,
		`update.master = { format = "fp32", rounding = "toward-zero" }`,
		`input_gradient.product = "exact"`,
	}
	want := map[string]string{
		"input": bf16, "forward.activation": bf16, "forward.product": fp16, "forward.sum": bf16 + ", pairwise",
		"forward.outer":          "", // accumulate says: as the sum
		"input_gradient.product": "exact, not rounded", "input_gradient.sum": fp32 + seq,
		"weight_gradient.sum": fp32 + seq, "weight_gradient.outer": fp16,
		"update.step": bf16, "update.master": "binary32, toward-zero, overflow infinity",
	}
	var canonical string
	for range 2 {
		_, a := loadArm(t, settings...)
		expect(t, a, want)
		if canonical != "" && canonical != a.Canonical {
			t.Error("the order of settings matters")
		}
		canonical = a.Canonical
		slices.Reverse(settings)
	}
}

// A setting replaces the whole point: what it leaves out is the default, not what
// a broader setting says.
func TestSettingReplacesTheWholePoint(t *testing.T) {
	_, a := loadArm(t, `everything = { format = "bf16", rounding = "stochastic", order = "chunk(4)" }`, `forward.sum = "fp16"`, `update.step = "fp16"`)
	expect(t, a, map[string]string{
		"forward.sum": fp16 + seq, "update.step": fp16,
		"input_gradient.sum": "bfloat16, stochastic r=16 truncated, overflow infinity, chunk(4)",
	})
}

func TestStochasticRounding(t *testing.T) {
	_, a := loadArm(t, `storage = { format = "bf16", rounding = "stochastic", random_bits = 32, variant = "centred-even" }`,
		`update.master = { format = "bf16", rounding = "stochastic" }`)
	expect(t, a, map[string]string{
		"input":         "bfloat16, stochastic r=32 centred-even, overflow infinity",
		"update.master": "bfloat16, stochastic r=16 truncated, overflow infinity",
	})
	want := quant.Rounding{Mode: quant.Stochastic, Bits: 16}
	if got := a.Arithmetic.Layers[2].Master.Rounding; got != want {
		t.Errorf("rounding %v, want %v", got, want)
	}
}

func TestOperands(t *testing.T) {
	// An operand of another format than its tensor is set, and stays unset in
	// the other phase.
	_, a := loadArm(t, `storage = "fp32"`, `weight_gradient.operand = "E4M3"`)
	e4m3 := "E4M3, nearest-even, overflow saturate"
	expect(t, a, map[string]string{
		"weight_gradient.activation": e4m3, "weight_gradient.gradient": e4m3,
		"input_gradient.weight": same, "input_gradient.gradient": same,
	})
	// The working copy may be narrower than the weight of the input gradient.
	_, a = loadArm(t, `storage = "bf16"`, `update.master = "fp32"`, `forward.weight = "E4M3"`)
	expect(t, a, map[string]string{"forward.weight": e4m3, "input_gradient.weight": bf16})
	// Unset operands reuse it.
	_, a = loadArm(t, `forward.weight = "E4M3"`)
	expect(t, a, map[string]string{"forward.weight": e4m3, "input_gradient.weight": same})
	// Stochastic rounding of a wider master would draw anew: not the same values.
	_, a = loadArm(t, `everything = { format = "bf16", rounding = "stochastic" }`, `update.master = "fp32"`)
	expect(t, a, map[string]string{"input_gradient.weight": "bfloat16, stochastic r=16 truncated, overflow infinity", "input_gradient.gradient": same})
	// Subnormals and overflow are part of what a tensor holds.
	_, a = loadArm(t, `storage = "fp16"`, `weight_gradient.activation = { format = "fp16", subnormals = false }`,
		`weight_gradient.gradient = { format = "fp16", overflow = "saturate" }`, `input_gradient.gradient = { format = "fp16", rounding = "up" }`)
	expect(t, a, map[string]string{
		"weight_gradient.activation": "binary16(subnormals=flush), nearest-even, overflow infinity",
		"weight_gradient.gradient":   "binary16, nearest-even, overflow saturate",
		"input_gradient.gradient":    same,
	})
}

// A tensor below may have been stored at one of several points: all must hold.
func TestOperandsLookThroughLayersThatMayPassValuesOn(t *testing.T) {
	network, err := trainer.ParseLayers([]string{"conv1d out=4 width=8 stride=8", "relu", "flatten", "dense 5"}, []int{1, 128})
	if err != nil {
		t.Fatal(err)
	}
	base := binary32Everywhere(len(network.Layers))
	for _, c := range []struct {
		conv, relu, operand string
		reused              bool
	}{
		{"fp16", "fp16", "fp16", true}, {"bf16", "fp16", "fp16", false}, {"fp16", "bf16", "fp16", false}, {"bf16", "bf16", "fp16", false},
	} {
		arm := base.arm(&network, 0)
		point := func(name string) quant.Point {
			f, err := quant.ParseFormat(name)
			if err != nil {
				t.Fatal(err)
			}
			return quant.Point{Format: f}
		}
		operand := point(c.operand)
		arm.Layers[0].Activation, arm.Layers[1].Activation = point(c.conv), point(c.relu)
		arm.Layers[3].WeightGradient.First = &operand
		reuseOperands(&network, &arm, 3)
		if got := arm.Layers[3].WeightGradient.First == nil; got != c.reused {
			t.Errorf("%+v: reused %t", c, got)
		}
	}
}

func TestArmsInheritFromTheBaseline(t *testing.T) {
	text := strings.NewReplacer(
		`everything = "fp32"`, "everything = \"bf16\"\nforward.sum = { format = \"fp32\", order = \"pairwise\", outer = \"fp64\" }\nweight_gradient.operand = \"E5M2\"\nloss_scale = \"dynamic\"",
		`storage = "bf16"`, "update.master = \"fp32\"\nforward.weight = \"fp16\"",
	).Replace(basePlan)
	p := load(t, text)
	a := &p.Arms[1]
	e5m2 := "E5M2, nearest-even, overflow saturate"
	expect(t, a, map[string]string{
		"update.master": fp32, "forward.weight": fp16, "forward.activation": bf16, "forward.sum": fp32 + ", pairwise",
		"forward.outer": "binary64, nearest-even, overflow infinity", "weight_gradient.activation": e5m2, "weight_gradient.gradient": e5m2,
		"input_gradient.weight": same, // only a shorthand of the baseline set it
	})
	if a.LossScale != "dynamic from 32768, x2 after 1000 clean steps, x0.5 on a skip" {
		t.Errorf("loss scale %q", a.LossScale)
	}
	if !slices.ContainsFunc(p.Warnings, func(w string) bool { return strings.HasPrefix(w, "the baseline is not binary32 throughout") }) {
		t.Errorf("no warning about the baseline: %q", p.Warnings)
	}
}

func TestOwnFormats(t *testing.T) {
	tables := `[format.narrow]
exponent = 4
fraction = 3
[format.shifted]
exponent = 5
fraction = 2
bias = 20
subnormals = false
top = "finite"
overflow = "nan"
width = 8
[claim]`
	text := strings.NewReplacer("[claim]", tables, `storage = "bf16"`, "storage = \"Narrow\"\nupdate.master = { format = \"shifted\", bias = 3, rounding = \"up\" }").Replace(basePlan)
	p := load(t, text)
	l := p.Arms[1].Arithmetic.Layers[2]
	if got := l.Weight.Format.Limits().Max; got != 240 {
		t.Errorf("largest value of an IEEE-style 4/3 split %g, want 240", got)
	}
	if got, want := l.Master.String(), "E5M2(bias=3,top=finite,subnormals=flush,overflow=nan) up nan"; got != want {
		t.Errorf("master %q, want %q", got, want)
	}
}

func TestWordsOfFormats(t *testing.T) {
	for word, want := range map[string]string{
		`"fp16"`: "binary16", `"BF16"`: "bfloat16", `"e6m9"`: "E6M9", `"E4M3"`: "E4M3", `"E5M10"`: "binary16",
		`{ format = "fp16", subnormals = false }`:                "binary16(subnormals=flush)",
		`{ format = "fp16", subnormals = true }`:                 "binary16",
		`{ format = "E4M3", top = "ieee" }`:                      "E4M3(top=ieee)",
		`{ format = "E4M3(bias=9)", bias = 8, top = "nan-only"}`: "E4M3(bias=8)",
		`{ format = "E6M9", width = 16 }`:                        "E6M9",
	} {
		_, a := loadArm(t, "forward.weight = "+word)
		if got := a.Arithmetic.Layers[0].Weight.Format.String(); got != want {
			t.Errorf("%s is %s, want %s", word, got, want)
		}
	}
}
