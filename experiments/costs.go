package experiments

import (
	"fmt"
	"slices"
	"strings"

	"ulpine/experiments/plan"
	"ulpine/results/cost"
	"ulpine/trainer"
)

// Costs works out what every arm of a plan but the baseline would cost on a
// machine, beside the same training in FP32. Nothing is trained, no data drawn.
// An arm that overrides batch or optimizer is set beside an FP32 training of the
// same batch and optimizer, which a warning says. It errs when a table makes no
// sense (cost.FieldErrors takes that apart) or an optimizer's costs are unknown.
func Costs(p *plan.Plan, machine cost.Machine, energy cost.EnergyTable) (*cost.Result, error) {
	return estimate(p, p.Arms[1:], machine, energy)
}

// estimate is Costs for some arms of a plan.
func estimate(p *plan.Plan, arms []plan.Arm, machine cost.Machine, energy cost.EnergyTable) (*cost.Result, error) {
	network := costNetwork(&p.Network)
	shared, err := costInput(p, &p.Training, network, machine, energy)
	if err != nil {
		return nil, err
	}
	var own []int // arms of another batch or optimizer, or of stages
	for i := range arms {
		if !sameStep(&arms[i].Training, &p.Training) || len(arms[i].Arithmetic.Stages) > 0 {
			own = append(own, i)
			continue
		}
		shared.Arms = append(shared.Arms, costArm(p, &arms[i]))
	}
	r, err := cost.Estimate(shared)
	if err != nil {
		return nil, err
	}
	for _, at := range own { // ascending, so that each lands in its place of the plan
		a := &arms[at]
		in, err := costInput(p, &a.Training, network, machine, energy)
		if err != nil {
			return nil, fmt.Errorf("arm %q: %w", a.Name, err)
		}
		stages, weights := costStages(p, a)
		in.Arms = stages
		one, err := cost.Estimate(in)
		if err != nil {
			return nil, err
		}
		bill := one.Arms[0]
		if len(stages) > 1 {
			bill = one.Mean(weights)
			r.Warnings = append(r.Warnings, a.Name+" changes its arithmetic on the way: its figures are means over its steps, its memory is the most that a stage takes, an inference that of the last stage; the answer leaves it out")
		}
		r.Arms = slices.Insert(r.Arms, at, bill)
		if sameStep(&a.Training, &p.Training) {
			continue
		}
		r.Warnings = append(r.Warnings, fmt.Sprintf(
			"%s trains with %s and a batch of %d, not with the plan's: it is set beside FP32 with the same, and the answer leaves it out",
			a.Name, in.Optimizer.Name, in.Batch))
	}
	return r, nil
}

// costStages are an arm's stages as arms of their own, with their numbers of steps.
func costStages(p *plan.Plan, a *plan.Arm) (arms []cost.Arm, steps []float64) {
	t := a.Training
	t.Epochs = 1
	each := max(1, trainer.Describe(p.Network, nil, t, trainer.Sizes{Train: p.Task.Train}).Steps)
	stage := *a
	first := 1
	for _, s := range a.Arithmetic.Stages {
		arms, steps = append(arms, costArm(p, &stage)), append(steps, float64(s.First(each)-first))
		stage.Arithmetic, first = s.Arm, s.First(each)
	}
	return append(arms, costArm(p, &stage)), append(steps, float64(each*a.Training.Epochs+1-first))
}

// sameStep reports whether a training step has the same shapes and operations.
func sameStep(a, b *trainer.Training) bool {
	x, xerr := costOptimizer(a.Optimizer)
	y, yerr := costOptimizer(b.Optimizer)
	return a.Batch == b.Batch && xerr == nil && yerr == nil && x.Name == y.Name
}

// costInput is everything the model needs but the arms.
func costInput(p *plan.Plan, t *trainer.Training, n cost.Network, m cost.Machine, e cost.EnergyTable) (*cost.Input, error) {
	optimizer, err := costOptimizer(t.Optimizer)
	if err != nil {
		return nil, err
	}
	batch := t.Batch
	if p.Task.Train > 0 {
		batch = min(batch, p.Task.Train)
	}
	return &cost.Input{Network: n, Optimizer: optimizer, Batch: max(1, batch), Machine: m, Energy: e}, nil
}

// costOptimizer is an optimizer's number of states and operations.
func costOptimizer(o trainer.Optimizer) (cost.Optimizer, error) {
	switch o.Kind {
	case "sgd":
		if o.Momentum == 0 {
			return cost.SGD, nil
		}
		return cost.Momentum, nil
	case "nesterov":
		return cost.Nesterov, nil
	case "adam":
		return cost.Adam, nil
	case "adamw":
		return cost.AdamW, nil
	}
	return cost.Optimizer{}, fmt.Errorf("the cost model does not know the optimizer %q; it knows sgd, nesterov, adam, adamw", o.Kind)
}

// costNetwork is a network as the cost model sees it.
func costNetwork(n *trainer.Network) cost.Network {
	layers := make([]cost.Layer, len(n.Layers))
	for i := range n.Layers {
		layers[i] = costLayer(&n.Layers[i])
	}
	return cost.Network{Layers: layers}
}

// costLayer counts for one example, which is what a Spec does too.
func costLayer(s *trainer.Spec) cost.Layer {
	l := cost.Layer{
		Name: s.Name, Kind: s.Kind, Inputs: uint64(volume(s.In)), Outputs: uint64(volume(s.Out)),
		Work:  cost.Work(s.MACs),
		Terms: cost.Work{Forward: uint64(s.Sums.Forward), InputGradient: uint64(s.Sums.InputGradient), WeightGradient: uint64(s.Sums.WeightGradient)},
		Inner: cost.Inner{
			Values: s.Inner.Values, Gradients: s.Inner.Gradients, Taken: s.Inner.Activations, Slopes: s.Inner.Slopes, Work: s.Inner.BackMACs, Terms: uint64(s.Inner.Back),
		},
	}
	for _, p := range s.Params {
		if p.Statistic {
			continue // a running mean, neither trained nor large
		}
		if p.FanIn > 0 { // enters products
			l.Weights += uint64(volume(p.Shape))
		} else {
			l.Biases += uint64(volume(p.Shape))
		}
	}
	if len(s.Params) > 0 { // shared scales run along the axis that is summed over
		l.InAxis, l.OutAxis = uint64(s.In[0]), uint64(s.Out[0])
		if len(s.Out) == 1 && l.Inner == (cost.Inner{}) { // dense: it reads its input row-major
			l.InAxis = l.Inputs
		}
		if shape := s.Params[0].Shape; len(shape) > 2 && shape[1] > 0 && s.In[0] > shape[1] { // kernels over a part of the channels
			l.Groups = uint64(s.In[0] / shape[1])
			l.InAxis, l.OutAxis = l.InAxis/l.Groups, l.OutAxis/l.Groups
		}
	}
	return l
}

// costArm is an arm as the cost model sees it: only the points that its network
// computes with are filled in.
func costArm(p *plan.Plan, a *plan.Arm) cost.Arm {
	arm := cost.Arm{
		Name: a.Name, Slug: a.Slug, Input: costPoint(a.Arithmetic.Input), Loss: costPoint(a.Arithmetic.LossGradient),
		Layers:     make([]cost.Assignment, len(p.Network.Layers)),
		LossScaled: a.Arithmetic.LossScale.Kind != trainer.NoScale,
	}
	for _, c := range a.Arithmetic.Channels {
		arm.Channels = append(arm.Channels, costPoint(c))
		if widest := &arm.Channels[len(arm.Channels)-1]; len(arm.Channels) == 1 || widest.Format.Bits > arm.Input.Format.Bits {
			arm.Input = *widest
		}
	}
	for i := range arm.Layers {
		from := &a.Arithmetic.Layers[i]
		for _, id := range p.Network.PointsOf(i) {
			fill(&arm.Layers[i], from, id)
		}
		if to := &arm.Layers[i]; a.Training.Optimizer.Compensated && len(to.States) > 0 {
			last := len(to.States) - 1 // what the model charges apart from the states
			to.Compensation, to.States = &to.States[last], to.States[:last]
		}
	}
	return arm
}

// fill copies one point of a layer. The sum of a phase brings its product, its
// outer sum and its order along.
func fill(to *cost.Assignment, from *trainer.Arithmetic, id trainer.PointID) {
	switch id {
	case trainer.ForwardWeight:
		to.Weight = costPoint(from.Weight)
	case trainer.ForwardActivation:
		to.Activation = costPoint(from.Activation)
	case trainer.ForwardOperand:
		to.Operand = costPointer(from.Operand)
	case trainer.ForwardSum:
		to.Forward = costSums(&from.Forward)
	case trainer.InputGradientWeight:
		to.InputGradient.First = costPointer(from.InputGradient.First)
	case trainer.InputGradientGradient:
		to.InputGradient.Gradient = costPointer(from.InputGradient.Gradient)
	case trainer.InputGradientSum:
		to.InputGradient.Sums = costSums(&from.InputGradient.Sums)
	case trainer.InputGradientResult:
		to.InputGradient.Result = costPoint(from.InputGradient.Result)
	case trainer.WeightGradientActivation:
		to.WeightGradient.First = costPointer(from.WeightGradient.First)
	case trainer.WeightGradientGradient:
		to.WeightGradient.Gradient = costPointer(from.WeightGradient.Gradient)
	case trainer.WeightGradientSum:
		to.WeightGradient.Sums = costSums(&from.WeightGradient.Sums)
	case trainer.WeightGradientResult:
		to.WeightGradient.Result = costPoint(from.WeightGradient.Result)
	case trainer.WeightGradientResidue:
		to.WeightGradient.Residue = costPointer(from.WeightGradient.Residue)
	case trainer.UpdateState:
		for _, s := range from.States {
			to.States = append(to.States, costPoint(s))
		}
	case trainer.UpdateStep:
		to.Step = costPoint(from.Step)
	case trainer.UpdateMaster:
		to.Master = costPoint(from.Master)
	}
}

// costSums is an accumulation; the model's words of orders are a plan's, but for
// aligned groups, which it counts as chunks: an addition a term and one a group.
func costSums(a *plan.Accumulate) cost.Sums {
	word, _, _ := strings.Cut(a.Order.String(), "(")
	if word == "aligned" {
		word = string(cost.Chunk)
	}
	return cost.Sums{
		Product: costPointer(a.Product), Sum: costPoint(a.Sum), Outer: costPointer(a.Outer),
		Order: cost.Order(word), K: a.Order.K, Through32: a.Through32,
	}
}

func costPointer(p *plan.Point) *cost.Point {
	if p == nil {
		return nil
	}
	c := costPoint(*p)
	return &c
}

// costPoint is a format's bits and what a rounding to it draws.
func costPoint(p plan.Point) cost.Point {
	return cost.Point{Format: costFormat(p.Format), RandomBits: plan.RandomBits(p)}
}

// costFormat is a format by its bit counts.
func costFormat(f plan.Format) cost.Format {
	s := plan.ShapeOf(f)
	return cost.Format{
		Name: plan.ShortName(f), Family: cost.Family(s.Family), Bits: s.Bits, Exponent: s.Exponent, Fraction: s.Fraction,
		Block: s.Block, ScaleBits: s.ScaleBits, TensorBits: s.TensorBits,
	}
}
