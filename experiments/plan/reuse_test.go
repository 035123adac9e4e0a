package plan

import (
	"context"
	"math"
	"testing"

	"ulpine/datasets"
	"ulpine/trainer"
)

// trained runs one replicate of an arm of the plan.
func trained(t *testing.T, p *Plan, arm trainer.Arm) trainer.Outcome {
	t.Helper()
	d, err := p.Task.Source.Load(7)
	if err != nil {
		t.Fatal(err)
	}
	set := func(s datasets.Set) trainer.Set { return trainer.Set{Inputs: s.Inputs, Labels: s.Labels} }
	out, err := trainer.Run(context.Background(), trainer.Job{
		Network: p.Network, Arm: arm, Training: p.Training, Seed: 7,
		Train: set(d.Train), Validation: set(d.Validation), Test: set(d.Test),
	}, nil)
	if err != nil {
		t.Fatal(err)
	}
	return out
}

// Resolving an operand to a reused one changes no bit of a training: the same
// arm with every operand left as its shorthand sets it loses the same at every
// step and ends with the same weights.
func TestReusedOperandsChangeNoBit(t *testing.T) {
	for _, settings := range []string{
		`storage = "bf16"`,
		`everything = { format = "bf16", rounding = "stochastic" }`,
		`storage = { format = "E5M2", rounding = "stochastic", random_bits = 8 }`,
		"storage = { format = \"fp16\", subnormals = false, overflow = \"saturate\" }\nloss_scale = { kind = \"fixed\", value = 65536 }",
		"storage = \"fp16\"\nupdate.master = \"fp32\"",
		"storage = { format = \"E4M3\", rounding = \"toward-zero\" }\nupdate.master = \"fp32\"\nforward.weight = \"E5M2\"",
	} {
		p, a := loadArm(t, settings)
		written := a.Arithmetic
		written.Layers = nil
		restored := 0
		for i, l := range a.Arithmetic.Layers {
			full := assigned(a.assignment.layers[i]).layer(len(l.States))
			if l.InputGradient.First == nil && full.InputGradient.First != nil {
				restored++
			}
			written.Layers = append(written.Layers, full)
		}
		if restored == 0 && a.at(2, "input_gradient.gradient") != same {
			t.Fatalf("%s: nothing was reused, the test says nothing", settings)
		}
		got, want := trained(t, p, a.Arithmetic), trained(t, p, written)
		for i := range want.Steps {
			if math.Float64bits(got.Steps[i]) != math.Float64bits(want.Steps[i]) {
				t.Fatalf("%s: loss of step %d is %v, want %v", settings, i+1, got.Steps[i], want.Steps[i])
			}
		}
		for i, q := range want.Final {
			for j, v := range q.Values {
				if math.Float64bits(got.Final[i].Values[j]) != math.Float64bits(v) {
					t.Fatalf("%s: %s[%d] is %v, want %v", settings, q.Name, j, got.Final[i].Values[j], v)
				}
			}
		}
	}
}
