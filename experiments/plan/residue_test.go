package plan

import (
	"strings"
	"testing"

	"ulpine/trainer"
)

// A residue is a point that only its own key sets, in all layers or in some.
func TestResidueIsSetByItsOwnKey(t *testing.T) {
	_, plain := loadArm(t, `everything = "bf16"`)
	if strings.Contains(plain.Canonical, "residue") || plain.at(0, "weight_gradient.residue") != "" {
		t.Errorf("a residue that nobody asked for:\n%s", plain.Canonical)
	}
	_, a := loadArm(t, `everything = "bf16"`, `weight_gradient.residue = "fp16"`)
	if got := a.at(2, "weight_gradient.residue"); got != "binary16, nearest-even, overflow infinity" {
		t.Errorf("%q", got)
	}
	if a.Canonical == plain.Canonical || strings.Count(a.Canonical, "weight_gradient.residue: ") != 2 {
		t.Errorf("canonical text:\n%s", a.Canonical)
	}
	if p := a.Arithmetic.Layers[0].WeightGradient.Residue; p == nil || p.Format.String() != "binary16" {
		t.Errorf("%v", p)
	}
	_, a = loadArm(t, `everything = "bf16"`, "[[arm.layer]]", `select = "last"`, `weight_gradient.residue = "fp16"`)
	if a.Arithmetic.Layers[0].WeightGradient.Residue != nil || a.Arithmetic.Layers[2].WeightGradient.Residue == nil {
		t.Error("the residue is not that of the last layer")
	}
	text := strings.Replace(basePlan, `storage = "bf16"`, `weight_gradient.residue = "MXFP8"`, 1)
	if all := failures(t, texts{"p.toml": text}, "p.toml"); len(all) != 1 || all[0].Key != "arm[1].weight_gradient.residue" {
		t.Errorf("%v", all)
	}
	if id := trainer.WeightGradientResidue; !isOptional(id) || isOperand(id) {
		t.Error("the residue is no optional point")
	}
}
