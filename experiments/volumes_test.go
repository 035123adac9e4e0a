package experiments

import (
	"math"
	"testing"

	"ulpine/results"
)

// TestVolumes counts by hand: 2 epochs of 24 examples in batches of 8 are 6
// steps; the convolution makes 2 x 15 values of 128 with 18 weights and 2 biases,
// the dense layer 5 of 30 with 150 and 5.
func TestVolumes(t *testing.T) {
	p := tinyPlan(t, "")
	p.Task.Train, p.Training.Epochs, p.Training.Batch = 24, 2, 8
	type place struct {
		layer int
		point string
	}
	got := map[place]uint64{}
	for _, v := range volumes(p) {
		got[place{v.Layer, v.Point}] = v.Values
	}
	const examples, steps = 48, 6
	for at, want := range map[place]uint64{
		{-1, "input"}: examples * 128, {-1, "loss.gradient"}: examples * 5,
		{0, "forward.weight"}: steps * 20, {0, "forward.activation"}: examples * 30, {0, "forward.sum"}: examples * 18 * 15,
		{0, "weight_gradient.activation"}: examples * 128, {0, "weight_gradient.result"}: steps * 20, {0, "update.master"}: steps * 20,
		{1, "forward.activation"}: examples * 30,
		{2, "forward.product"}:    examples * 150, {2, "input_gradient.weight"}: steps * 150, {2, "input_gradient.result"}: examples * 30,
		{2, "weight_gradient.gradient"}: examples * 5, {2, "update.step"}: steps * 155,
	} {
		if got[at] != want {
			t.Errorf("%v: %d values, want %d", at, got[at], want)
		}
	}
	if _, there := got[place{0, "input_gradient.result"}]; there {
		t.Error("the first layer has no input gradient")
	}
	p.Task.Train, p.Training.Batch = 25, 8
	for _, v := range volumes(p) { // a short last batch is a step
		if v.Layer == 0 && v.Point == "forward.weight" && v.Values != 8*20 {
			t.Errorf("%d weights in 8 steps", v.Values)
		}
	}
	p.Task.Train = 0
	if v := volumes(p); v != nil {
		t.Errorf("without a number of examples: %v", v)
	}
}

// TestRanges holds formats to their definitions: 448 = 1.75 x 2^8 and 2^-9 (OCP
// 8-bit specification 1.0), 65504 and 2^-24 (IEEE 754 binary16).
func TestRanges(t *testing.T) {
	p := tinyPlan(t, "[[arm]]\nname = \"a\"\nstorage = \"E4M3\"\naccumulate = \"fp16\"\n")
	want := map[string]results.Range{
		"E4M3":     {Format: "E4M3", Least: -9, Normal: -6, Largest: 8},
		"binary16": {Format: "binary16", Least: -24, Normal: -14, Largest: 15},
		"binary32": {Format: "binary32", Least: -149, Normal: -126, Largest: 127},
	}
	for _, r := range ranges(p) {
		if w, ok := want[r.Format]; ok && r != w {
			t.Errorf("%+v, want %+v", r, w)
		}
		delete(want, r.Format)
	}
	for name := range want {
		t.Errorf("no range of %s", name)
	}
}

// TestAddCosts: the record holds the model's figures, and no others.
func TestAddCosts(t *testing.T) {
	p := tinyPlan(t, "[[arm]]\nname = \"half\"\neverything = \"bf16\"\n")
	r := costsOf(t, p)
	var s results.Study
	if err := AddCosts(&s, p, r.Machine, r.Energy); err != nil {
		t.Fatal(err)
	}
	c := s.Costs
	if len(c.Bills) != len(r.Arms) || c.Batch != r.Batch || c.Answer != r.Answer || len(c.Assumptions) != len(r.Assumptions) {
		t.Fatalf("%+v", c)
	}
	for i, b := range c.Bills {
		from := &r.Arms[i]
		step := &from.Tiled.Step.Total
		if b.Arm != from.Slug || b.TrainingBits != from.Memory.Training.Bits || b.Step.Bits != from.Once.Step.Total.Bits ||
			b.StepTiled.Bits != step.Bits || b.StepTiled.Seconds != step.Time.Seconds || b.StepTiled.Speedup != step.Against.Speedup ||
			b.Inference.Picojoules != from.Once.Inference.Total.Energy.Total {
			t.Errorf("%s: %+v", b.Arm, b)
		}
		if sum := b.Step.Weights + b.Step.Activations + b.Step.Gradients + b.Step.State + b.Step.Master; sum != b.Step.Bits {
			t.Errorf("%s: classes hold %d bits of %d", b.Arm, sum, b.Step.Bits)
		}
	}
	last := &c.Bills[len(c.Bills)-1]
	if math.Abs(last.Step.BitShare-0.5) > 1e-12 {
		t.Errorf("everything in 16 bits moves %v of FP32's bits", last.Step.BitShare)
	}
}

// TestStudyHasFacts: a study holds what its report needs beside the runs.
func TestStudyHasFacts(t *testing.T) {
	s, err := Study(tinyPlan(t, ""), openStore(t))
	if err != nil {
		t.Fatal(err)
	}
	if s.Costs == nil || len(s.Costs.Bills) != len(s.Arms)-1 || len(s.Volumes) == 0 || len(s.Ranges) < 2 {
		t.Errorf("costs %v, %d volumes, %d ranges", s.Costs, len(s.Volumes), len(s.Ranges))
	}
}
