package experiments

import (
	"context"
	"testing"

	"ulpine/results/cost"
)

// stagedArm is an arm of eight-bit storage that ends in binary32, with sensors and
// residues of their own.
const stagedArm = `
[[arm]]
name = "staged"
storage = "E4M3"
weight_gradient.residue = "bf16"
input = { range = [-4, 4], bits = 8 }
[[arm.stage]]
from_epoch = 2
everything = "fp32"

[[arm]]
name = "low"
storage = "E4M3"
weight_gradient.residue = "bf16"
input = { range = [-4, 4], bits = 8 }
`

// TestCostsOfStages: half of the steps at one width, half at the other.
func TestCostsOfStages(t *testing.T) {
	p := tinyPlan(t, stagedArm)
	machine, _ := cost.FindMachine(cost.DefaultMachine)
	r, err := Costs(p, machine, cost.DefaultEnergy())
	if err != nil {
		t.Fatal(err)
	}
	widths := map[string]float64{}
	for i := range r.Arms {
		if r.Arms[i].Slug != p.Arms[i+1].Slug {
			t.Fatalf("bill %d is %s's, not %s's", i, r.Arms[i].Slug, p.Arms[i+1].Slug)
		}
		widths[r.Arms[i].Slug] = float64(r.Arms[i].Once.Step.Total.Bits)
	}
	stages, steps := costStages(p, &p.Arms[len(p.Arms)-2])
	if len(stages) != 2 || steps[0] <= 0 || steps[0] != steps[1] {
		t.Fatalf("%d stages of %v steps", len(stages), steps)
	}
	if !(widths["low"] > 0 && widths["staged"] > widths["low"]) {
		t.Errorf("bits a step: %v", widths)
	}
}

// TestStagesOnAnyNumberOfWorkers: the same store digest from one worker and from three.
func TestStagesOnAnyNumberOfWorkers(t *testing.T) {
	var digests []string
	for _, workers := range []int{1, 3} {
		p := tinyPlan(t, stagedArm)
		sum, err := Run(context.Background(), p, openStore(t), Options{Workers: workers})
		if err != nil {
			t.Fatal(err)
		}
		digests = append(digests, sum.StoreDigest.String())
	}
	if digests[0] != digests[1] {
		t.Errorf("store digests %v", digests)
	}
	if a := tinyPlan(t, stagedArm).Arms; a[len(a)-1].Canonical == a[len(a)-2].Canonical {
		t.Error("a stage is in no key")
	}
}
