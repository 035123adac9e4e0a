package experiments

import (
	"fmt"
	"math"

	"ulpine/experiments/plan"
	"ulpine/results"
	"ulpine/results/cost"
)

// bill sets what a study says of its costs, on the default machine and energy
// table, and the bits of each arm: the mean width of a value in training memory.
// Where the model has no answer the study warns, and bits are NaN.
func bill(p *plan.Plan, s *results.Study) {
	machine, _ := cost.FindMachine(cost.DefaultMachine)
	energy := cost.DefaultEnergy()
	r, err := Costs(p, machine, energy)
	if err == nil {
		var base *cost.Result
		if base, err = estimate(p, p.Arms[:1], machine, energy); err == nil {
			r.Arms = append(base.Arms, r.Arms...)
		}
	}
	if err != nil {
		s.Warnings = append(s.Warnings, fmt.Sprintf("no costs and no bits a value: %v", err))
		for i := range s.Arms {
			s.Arms[i].Bits = math.NaN()
		}
		return
	}
	s.Costs = &results.Costs{
		Machine: r.Reference.Once.TimeLabel.Source, Energy: r.Reference.Once.EnergyLabel.Source,
		Answer: r.Answer, Batch: r.Batch, Reference: billOf(&r.Reference),
		Assumptions: r.Assumptions, Cautions: r.Cautions, Warnings: r.Warnings,
	}
	for i := range r.Arms {
		s.Costs.Bills = append(s.Costs.Bills, billOf(&r.Arms[i]))
		s.Arms[i].Bits = r.Arms[i].Memory.Width
	}
}

// billOf is a bill of the model as results record it.
func billOf(b *cost.Bill) results.Bill {
	return results.Bill{
		Arm: b.Slug, TrainingBits: b.Memory.Training.Bits, EndpointBits: b.Memory.Endpoint.Bits,
		Step: charge(&b.Once.Step.Total), StepTiled: charge(&b.Tiled.Step.Total),
		Inference: charge(&b.Once.Inference.Total), InferenceTiled: charge(&b.Tiled.Inference.Total),
	}
}

func charge(f *cost.Figures) results.Charge {
	return results.Charge{
		Bits: f.Bits, Weights: f.Traffic.Weights, Activations: f.Traffic.Activations, Gradients: f.Traffic.Gradients,
		State: f.Traffic.State, Master: f.Traffic.Master, Random: f.Random,
		Seconds: f.Time.Seconds, Binds: string(f.Time.Binds), Picojoules: f.Energy.Total,
		BitShare: f.Against.Bits, Speedup: f.Against.Speedup, EnergyShare: f.Against.Energy,
		TimeExtrapolated: f.Time.Extrapolated, EnergyExtrapolated: f.Energy.Extrapolated,
	}
}
