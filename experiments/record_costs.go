package experiments

import (
	"slices"

	"ulpine/experiments/plan"
	"ulpine/results"
	"ulpine/results/cost"
)

// AddCosts puts what a plan's arms would cost on a machine into a study.
func AddCosts(s *results.Study, p *plan.Plan, machine cost.Machine, energy cost.EnergyTable) error {
	r, err := Costs(p, machine, energy)
	if err != nil {
		return err
	}
	s.Costs = recordCosts(r)
	return nil
}

// recordCosts is the model's answer as a report shows it.
func recordCosts(r *cost.Result) *results.Costs {
	c := &results.Costs{
		Machine: tableLine(r.Machine.Name, r.Machine.Source, r.Machine.Date),
		Energy:  tableLine(r.Energy.Name, r.Energy.Source, r.Energy.Date),
		Answer:  r.Answer, Batch: r.Batch, Reference: recordBill(&r.Reference),
		Assumptions: r.Assumptions, Cautions: r.Cautions, Warnings: r.Warnings,
	}
	c.Rules = appendRules(nil, &r.Reference)
	for i := range r.Arms {
		c.Bills = append(c.Bills, recordBill(&r.Arms[i]))
		c.Rules = appendRules(c.Rules, &r.Arms[i])
	}
	return c
}

// appendRules adds how figures of a bill were extrapolated, each rule once.
func appendRules(rules []string, b *cost.Bill) []string {
	for _, a := range []*cost.Account{&b.Once, &b.Tiled} {
		for _, r := range slices.Concat(a.TimeLabel.Rules, a.EnergyLabel.Rules) {
			if !slices.Contains(rules, r) {
				rules = append(rules, r)
			}
		}
	}
	return rules
}

// tableLine names a table with its source and date.
func tableLine(name, source, date string) string {
	for _, more := range []string{source, date} {
		if more != "" && more != name {
			name += ", " + more
		}
	}
	return name
}

func recordBill(b *cost.Bill) results.Bill {
	return results.Bill{
		Arm: b.Slug, TrainingBits: b.Memory.Training.Bits, EndpointBits: b.Memory.Endpoint.Bits,
		Step: recordCharge(&b.Once.Step.Total), StepTiled: recordCharge(&b.Tiled.Step.Total),
		Inference: recordCharge(&b.Once.Inference.Total), InferenceTiled: recordCharge(&b.Tiled.Inference.Total),
	}
}

func recordCharge(f *cost.Figures) results.Charge {
	return results.Charge{
		Bits: f.Bits, Weights: f.Traffic.Weights, Activations: f.Traffic.Activations, Gradients: f.Traffic.Gradients,
		State: f.Traffic.State, Master: f.Traffic.Master, Random: f.Random,
		Seconds: f.Time.Seconds, Binds: string(f.Time.Binds), Picojoules: f.Energy.Total,
		BitShare: f.Against.Bits, Speedup: f.Against.Speedup, EnergyShare: f.Against.Energy,
		TimeExtrapolated: f.Against.SpeedupExtrapolated, EnergyExtrapolated: f.Against.EnergyExtrapolated,
	}
}
