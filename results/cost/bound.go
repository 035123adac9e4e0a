package cost

// bound is an arm on its network: what format each tensor between layers is
// stored in. Edge i is the input of layer i, edge len(layers) the network's
// output.
type bound struct {
	net  *Network
	opt  *Optimizer
	arm  *Arm
	acts []Format // by edge
	// asInput: the edge holds the network's input as it is, channel by channel.
	asInput []bool
	grads   []Format
	// The rows along which shared-scale blocks of an edge's tensor run: for
	// activations what the next product above reduces, for gradients what the
	// next product below does; 0: the whole tensor.
	actAxis, gradAxis []uint64
}

func bind(n *Network, o *Optimizer, arm *Arm) *bound {
	count := len(n.Layers)
	b := &bound{
		net: n, opt: o, arm: arm,
		acts: make([]Format, count+1), grads: make([]Format, count+1),
		actAxis: make([]uint64, count+1), gradAxis: make([]uint64, count+1),
	}
	b.acts[0] = arm.Input.Format
	b.asInput = make([]bool, count+1)
	b.asInput[0] = len(arm.Channels) > 0
	for i := range n.Layers {
		b.asInput[i+1] = b.asInput[i] && arm.Layers[i].Activation.Format.IsZero()
		b.acts[i+1] = orElse(arm.Layers[i].Activation.Format, b.acts[i])
		b.gradAxis[i+1] = axisOr(n.Layers[i].OutAxis, b.gradAxis[i])
	}
	b.grads[count] = arm.Loss.Format
	for i := count - 1; i >= 0; i-- {
		// A gradient that passes a layer without arithmetic is not rounded again.
		b.grads[i] = orElse(arm.Layers[i].InputGradient.Result.Format, b.grads[i+1])
		b.actAxis[i] = axisOr(n.Layers[i].InAxis, b.actAxis[i+1])
	}
	return b
}

func orElse(f, otherwise Format) Format {
	if f.IsZero() {
		return otherwise
	}
	return f
}

func axisOr(axis, otherwise uint64) uint64 {
	if axis == 0 {
		return otherwise
	}
	return axis
}

// forwardSums are the sums of a layer's forward phase; a layer that adds without
// a sum point of its own (a pool) adds in the format of its output.
func (b *bound) forwardSums(i int) Sums {
	s := b.arm.Layers[i].Forward
	s.Sum.Format = orElse(s.Sum.Format, b.acts[i+1])
	return s
}

// forwardOperands are the formats that enter the multipliers of the forward phase.
func (b *bound) forwardOperands(i int) (weight, activation Format) {
	a := &b.arm.Layers[i]
	return a.Weight.Format, converted(a.Operand, b.acts[i])
}

// inputOperands are the formats that enter the multipliers of the input gradient.
func (b *bound) inputOperands(i int) (weight, gradient Format) {
	a := &b.arm.Layers[i]
	return converted(a.InputGradient.First, a.Weight.Format), converted(a.InputGradient.Gradient, b.grads[i+1])
}

// weightOperands are the formats that enter the multipliers of the weight gradient:
// an activation that is not rounded for it has the format of the forward product.
func (b *bound) weightOperands(i int) (activation, gradient Format) {
	a := &b.arm.Layers[i]
	_, forward := b.forwardOperands(i)
	return converted(a.WeightGradient.First, forward), converted(a.WeightGradient.Gradient, b.grads[i+1])
}

// again is the point at which a gradient product rounds an operand anew that the
// forward product had: its own, or the forward one where shared scales run along
// another axis now; nil: it takes the forward operand as it is.
func again(own, forward *Point) *Point {
	if own == nil && forward != nil && forward.Format.Block > 0 {
		return forward
	}
	return own
}

func converted(p *Point, stored Format) Format {
	if p == nil {
		return stored
	}
	return p.Format
}

// storedWeights is the tensor that the input gradient reads: the working copy,
// or the master copy if the operand is rounded anew, as blocks along the other
// axis are.
func (b *bound) storedWeights(i int) (Class, Format) {
	a := &b.arm.Layers[i]
	if again(a.InputGradient.First, &a.Weight) != nil && a.separateMaster() {
		return Master, a.Master.Format
	}
	return Weights, a.Weight.Format
}
