package cost

import (
	"fmt"
	"slices"
)

// Input is what Estimate needs: a network, how it is trained and used, the arms,
// and the tables.
type Input struct {
	Network        Network     `json:"network"`
	Optimizer      Optimizer   `json:"optimizer"`
	Batch          int         `json:"batch"`           // examples of a training step
	InferenceBatch int         `json:"inference_batch"` // 0 is 1
	Arms           []Arm       `json:"arms"`
	Machine        Machine     `json:"machine"`
	Energy         EnergyTable `json:"energy"`
}

// Estimate works out the costs of every arm, and of the same training with
// everything in FP32 beside which they are set. It errs when a shape, an arm or
// a table makes no sense; FieldErrors takes the error apart.
func Estimate(in *Input) (*Result, error) {
	if err := in.check(); err != nil {
		return nil, err
	}
	e := &estimator{in: in, batch: uint64(in.Batch), inference: uint64(max(in.InferenceBatch, 1))}
	r := &Result{
		Machine: in.Machine, Energy: in.Energy, Network: in.Network, Optimizer: in.Optimizer,
		Batch: e.batch, InferenceBatch: e.inference,
	}
	fp32 := Uniform(&in.Network, &in.Optimizer, "fp32", FP32)
	r.Reference = e.bill(&fp32)
	r.Reference.against(&r.Reference)
	for i := range in.Arms {
		r.Arms = append(r.Arms, e.bill(&in.Arms[i]))
		r.Arms[i].against(&r.Reference)
	}
	r.Assumptions = e.assumptions()
	r.Cautions = cautions()
	r.Warnings = e.warnings(&r.Reference)
	r.Answer = answer(r)
	return r, nil
}

// check finds what is wrong with the whole input; the tables' fields are headed
// "machine" and "energy".
func (in *Input) check() error {
	var e fieldErrors
	if in.Batch < 1 || in.Batch > 1<<24 {
		e.add("batch", fmt.Sprintf("%d examples a step", in.Batch), "use 1 to 2^24")
	}
	if in.InferenceBatch < 0 || in.InferenceBatch > 1<<24 {
		e.add("inference_batch", fmt.Sprintf("%d examples an inference", in.InferenceBatch), "use 1 to 2^24")
	}
	in.Network.check(uint64(max(in.Batch, in.InferenceBatch, 1)), &e)
	in.Optimizer.check(&e)
	for i := range in.Arms {
		in.Arms[i].check(fmt.Sprintf("arms[%d]", i+1), &in.Network, &in.Optimizer, &e)
	}
	for _, table := range []struct {
		name string
		err  error
	}{{"machine", in.Machine.Validate()}, {"energy", in.Energy.Validate()}} {
		for _, f := range FieldErrors(table.err) {
			e.add(table.name+"."+f.Field, f.Reason, f.Remedy)
		}
	}
	return e.err()
}

func (b *Bill) against(ref *Bill) {
	b.Once.Step.against(&ref.Once.Step)
	b.Once.Inference.against(&ref.Once.Inference)
	b.Tiled.Step.against(&ref.Tiled.Step)
	b.Tiled.Inference.against(&ref.Tiled.Inference)
}

// estimator works out bills.
type estimator struct {
	in               *Input
	batch, inference uint64
}

func (e *estimator) bill(arm *Arm) Bill {
	b := bind(&e.in.Network, &e.in.Optimizer, arm)
	return Bill{
		Name: arm.Name, Slug: arm.Slug,
		Memory: b.memory(e.batch, e.inference),
		Once:   e.account(b, Once),
		Tiled:  e.account(b, Tiled),
	}
}

func (e *estimator) account(b *bound, reuse Reuse) Account {
	m, t := &e.in.Machine, &e.in.Energy
	a := Account{
		Reuse: reuse,
		TrafficLabel: Label{
			Model: "each tensor moves once a phase", Source: "counted from shapes and formats",
		},
		TimeLabel:   Label{Model: "roofline of peak rates, phases one after another", Source: tableName(m.Name, m.Source, m.Date)},
		EnergyLabel: Label{Model: "energy by operation and moved bit, " + t.Process, Source: tableName(t.Name, t.Source, t.Date)},
	}
	cache := uint64(0)
	if reuse == Tiled {
		cache = 8 * m.Cache
		a.TrafficLabel.Model = fmt.Sprintf("products in blocks through a cache of %d bytes", m.Cache)
		a.TrafficLabel.Source += "; cache of " + m.Name
	}
	p := &pricer{machine: m, energy: t, time: &a.TimeLabel, power: &a.EnergyLabel}
	a.Step = p.activity(b, Phases(), e.batch, cache)
	a.Inference = p.activity(b, []Phase{Forward}, e.inference, cache)
	return a
}

func tableName(name, source, date string) string {
	return fmt.Sprintf("%s: %s (%s)", name, source, date)
}

// rule marks a label as extrapolated by a rule.
func (l *Label) rule(rule string) {
	l.Extrapolated = true
	if !slices.Contains(l.Rules, rule) {
		l.Rules = append(l.Rules, rule)
	}
}
