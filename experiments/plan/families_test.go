package plan

import (
	"strings"
	"testing"
)

// Whatever family a word names, it can be a setting.
func TestFamilies(t *testing.T) {
	for word, want := range map[string]Shape{
		"Q2.14":  {Family: "integer", Bits: 16},
		"posit8": {Family: "float", Bits: 8},
		"LNS4.3": {Family: "logarithmic", Bits: 8},
		"steps":  {Family: "float", Bits: 2, Fraction: 2},
		"E5M2":   {Family: "float", Bits: 8, Exponent: 5, Fraction: 2},
	} {
		text := strings.Replace(basePlan, `storage = "bf16"`, `forward.weight = "`+word+`"`, 1) + "[format.steps]\nvalues = [-1, 0, 0.5, 1]\n"
		f := load(t, text).Arms[1].Arithmetic.Layers[0].Weight.Format
		got := ShapeOf(f)
		if got.Family != want.Family || got.Bits != want.Bits || want.Family == "float" && got.Fraction == 0 {
			t.Errorf("%s is %s: %+v, want %+v", word, f, got, want)
		}
	}
	_, a := loadArm(t, `accumulate = { format = "bf16", order = "compensated" }`)
	if got := a.at(0, "forward.sum"); got != bf16+", compensated" {
		t.Errorf("forward.sum %q", got)
	}
}

// A list of values is part of the canonical text, its name not alone.
func TestOwnValues(t *testing.T) {
	plan := func(values string) string {
		return strings.Replace(basePlan, `storage = "bf16"`, `forward.weight = "steps"`, 1) + "[format.steps]\n" + values + "\n"
	}
	if load(t, plan("values = [-1, 0, 1]")).Arms[1].Canonical == load(t, plan("values = [-1, 0, 2]")).Arms[1].Canonical {
		t.Error("two lists of values have one canonical text")
	}
	for values, want := range map[string]string{
		"values = [1, 0]":                          "format.steps.values: ",
		"values = 3":                               "format.steps.values: wrong type: 3 is a whole number, want an array of numbers",
		"values = [0, \"x\"]":                      "format.steps.values[2]: wrong type",
		"values = [0, 1]\nbias = 3":                "format.steps.bias: unknown key",
		"values = [0, 1, 2]\nwidth = 3":            "format.steps.width: ",
		"values = [0, 1]\noverflow = \"infinity\"": "format.steps.values: ",
	} {
		all := failures(t, texts{"plan.toml": plan(values)}, "plan.toml")
		if !strings.Contains(all[0].Error(), want) {
			t.Errorf("%s: %v, want %s", values, all, want)
		}
	}
}

// Cheap random sources belong to stochastic rounding.
func TestRandomSources(t *testing.T) {
	_, a := loadArm(t, `update.master = { format = "bf16", rounding = "stochastic", random_bits = 8, share = 4, register = 8, variant = "equal" }`)
	if got := a.at(0, "update.master"); got != "bfloat16, stochastic r=8 equal share=4 register=8, overflow infinity" {
		t.Errorf("update.master %q", got)
	}
	for setting, want := range map[string]string{
		`{ format = "bf16", share = 4 }`:                                               "share without stochastic rounding",
		`{ format = "bf16", rounding = "stochastic", register = 3 }`:                   "3 is out of range",
		`{ format = "bf16", rounding = "stochastic", random_bits = 12, register = 8 }`: "12 random bits from a register of 8",
	} {
		all := failures(t, texts{"plan.toml": strings.Replace(basePlan, `storage = "bf16"`, "update.master = "+setting, 1)}, "plan.toml")
		if !strings.Contains(all[0].Error(), want) {
			t.Errorf("%s: %v, want %s", setting, all, want)
		}
	}
}

// Shared scales: at operands of products only, and taken anew for each of them.
func TestSharedScales(t *testing.T) {
	for setting, want := range map[string]string{
		`storage = "MXFP8"`:                                 "MXFP8(E4M3) shares scales among values, which only operands of products can: set forward.weight, forward.operand, ",
		`update.master = { format = "INT8" }`:               "INT8 shares scales",
		`forward.operand = "INT8(per=channel)"`:             "a row of a left-hand operand",
		`accumulate = { format = "fp32", outer = "MXFP4" }`: "MXFP4 shares scales",
	} {
		all := failures(t, texts{"plan.toml": strings.Replace(basePlan, `storage = "bf16"`, setting, 1)}, "plan.toml")
		if e := all[0]; len(all) != 1 || e.Remedy == "" || !strings.Contains(e.Reason+": "+e.Remedy, want) {
			t.Errorf("%s: %v, want %s", setting, all, want)
		}
	}
	_, a := loadArm(t, "forward.weight = \"INT8(per=channel)\"\nforward.operand = \"MXFP4\"")
	if l := a.Arithmetic.Layers[0]; l.Operand == nil || l.InputGradient.First != nil || l.WeightGradient.First != nil {
		t.Errorf("operands %+v", l)
	}
	for point, want := range map[string]string{"forward.operand": "MXFP4, ", "weight_gradient.activation": "MXFP4, nearest-even", "forward.weight": "INT8(per=channel), nearest-even"} {
		if got := a.at(0, point); !strings.HasPrefix(got, want) {
			t.Errorf("%s: %q, want %s", point, got, want)
		}
	}
	// What is stored already is no operand of its own; a stored one beside blocks is.
	_, a = loadArm(t, "forward.operand = \"fp32\"")
	if a.Arithmetic.Layers[0].Operand != nil {
		t.Error("an operand that changes no value is kept")
	}
	_, a = loadArm(t, "forward.operand = \"MXFP4\"\nweight_gradient.activation = \"fp32\"")
	if a.Arithmetic.Layers[0].WeightGradient.First == nil {
		t.Error("the stored activation is lost")
	}
}
