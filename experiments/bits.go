package experiments

import (
	"math"

	"ulpine/experiments/plan"
	"ulpine/results"
	"ulpine/results/cost"
)

// setBits sets the bits of each arm, the baseline included: the mean width of a
// value in training memory by the cost model; NaN where that has no answer.
func setBits(p *plan.Plan, s *results.Study) {
	for i := range s.Arms {
		s.Arms[i].Bits = math.NaN()
	}
	machine, _ := cost.FindMachine(cost.DefaultMachine) // memory depends on no machine
	r, err := estimate(p, p.Arms, machine, cost.DefaultEnergy())
	if err != nil {
		return
	}
	for i := range r.Arms {
		s.Arms[i].Bits = r.Arms[i].Memory.Width
	}
}
