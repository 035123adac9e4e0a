package cost

// flow is one tensor's way between memory and arithmetic in one phase of one
// layer: size bits, moved sweeps times.
type flow struct {
	class  Class
	values uint64
	format Format
	axis   uint64
	sweeps uint64
	// channels are the formats of equal parts of the values, where they differ.
	channels []Point
}

func (f *flow) bits() uint64 { return f.sweeps * f.size() }

// size is the bits of the tensor.
func (f *flow) size() uint64 {
	if len(f.channels) == 0 {
		return f.format.Size(f.values, f.axis)
	}
	var bits uint64
	for i := range f.channels {
		bits += f.channels[i].Format.Size(f.values/uint64(len(f.channels)), 0)
	}
	return bits
}

// ofEdge gives a flow the formats of the input's channels if its edge holds the input.
func (b *bound) ofEdge(edge int, f flow) flow {
	if b.asInput[edge] {
		f.channels = b.arm.Channels
	}
	return f
}

// flows are the tensors that a phase of layer i moves for a batch.
func (b *bound) flows(i int, p Phase, batch, cache uint64) []flow {
	l := &b.net.Layers[i]
	if l.view() {
		return nil
	}
	switch {
	case p == Forward:
		return b.forwardFlows(i, batch, cache)
	case p == InputGradient && b.net.backwards(i):
		return b.inputFlows(i, batch, cache)
	case p == WeightGradient && l.parameters() > 0:
		return b.weightFlows(i, batch, cache)
	case p == Update && l.parameters() > 0:
		return b.updateFlows(i)
	}
	return nil
}

// parameters are the flows of a layer's weights and biases in a format.
func parameters(l *Layer, class Class, f Format) []flow {
	return []flow{
		{class, l.Weights, f, axisOr(l.InAxis, l.Terms.Forward), 1, nil},
		{class, l.Biases, f, 0, 1, nil},
	}
}

// input and output are the flows of the activations below and above layer i,
// gradientIn and gradientOut those of their gradients.
func (b *bound) input(i int, batch uint64) flow {
	return b.ofEdge(i, flow{class: Activations, values: batch * b.net.Layers[i].Inputs, format: b.acts[i], axis: b.actAxis[i], sweeps: 1})
}

func (b *bound) output(i int, batch uint64) flow {
	return b.ofEdge(i+1, flow{class: Activations, values: batch * b.net.Layers[i].Outputs, format: b.acts[i+1], axis: b.actAxis[i+1], sweeps: 1})
}

func (b *bound) gradientIn(i int, batch uint64) flow {
	return flow{Gradients, batch * b.net.Layers[i].Inputs, b.grads[i], b.gradAxis[i], 1, nil}
}

func (b *bound) gradientOut(i int, batch uint64) flow {
	return flow{Gradients, batch * b.net.Layers[i].Outputs, b.grads[i+1], b.gradAxis[i+1], 1, nil}
}

// forwardFlows: Y[units, B positions] = W[units, terms] X[terms, B positions].
func (b *bound) forwardFlows(i int, batch, cache uint64) []flow {
	l, a := &b.net.Layers[i], &b.arm.Layers[i]
	x, y := b.input(i, batch), b.output(i, batch)
	if l.parameters() == 0 {
		return []flow{x, y}
	}
	w := parameters(l, Weights, a.Weight.Format)
	partial := flow{Activations, y.values, b.forwardSums(i).Sum.Format, y.axis, 0, nil}
	if units, terms, positions, ok := l.product(); ok {
		tile{
			i: units, j: batch * positions, k: terms, cache: cache,
			left: &w[0], right: &x, partial: &partial,
		}.sweep()
	}
	return append(w, x, y, partial, b.inner(i, batch, 2))
}

// inner are the values between a layer's own products, innerGradients their gradients;
// both written and read, or only read.
func (b *bound) inner(i int, batch, sweeps uint64) flow {
	return flow{Activations, batch * b.net.Layers[i].Inner.Values, b.acts[i+1], 0, sweeps, nil}
}

func (b *bound) innerGradients(i int, batch uint64) flow {
	return flow{Gradients, batch * b.net.Layers[i].Inner.Gradients, b.grads[i], 0, 2, nil}
}

// inputFlows: DX[terms, B positions] = W'[terms, units] DY[units, B positions],
// the patches added up where a convolution's overlap.
func (b *bound) inputFlows(i int, batch, cache uint64) []flow {
	l := &b.net.Layers[i]
	dy, dx := b.gradientOut(i, batch), b.gradientIn(i, batch)
	if l.Weights == 0 {
		all := []flow{dy, dx}
		if l.remembers() {
			all = append(all, b.input(i, batch))
		}
		return all
	}
	class, format := b.storedWeights(i)
	w := parameters(l, class, format)[0]
	partial := flow{Gradients, dx.values, orElse(b.arm.Layers[i].InputGradient.Sums.Sum.Format, dx.format), dx.axis, 0, nil}
	if units, terms, positions, ok := l.product(); ok {
		tile{
			i: terms, j: batch * positions, k: units, cache: cache,
			left: &w, right: &dy, partial: &partial,
		}.sweep()
	}
	all := []flow{w, dy}
	if b.net.propagates(i) {
		all = append(all, dx, partial)
	}
	if l.several() {
		all = append(all, b.inner(i, batch, 1), b.innerGradients(i, batch))
	}
	if l.remembers() {
		all = append(all, b.input(i, batch))
	}
	return all
}

// weightFlows: DW[units, terms] = DY[units, B positions] X'[B positions, terms].
func (b *bound) weightFlows(i int, batch, cache uint64) []flow {
	l, a := &b.net.Layers[i], &b.arm.Layers[i]
	x, dy := b.input(i, batch), b.gradientOut(i, batch)
	dw := parameters(l, Gradients, a.WeightGradient.Result.Format)
	partial := flow{Gradients, l.Weights, a.WeightGradient.Sums.Sum.Format, dw[0].axis, 0, nil}
	if units, terms, positions, ok := l.product(); ok {
		tile{
			i: units, j: terms, k: batch * positions, cache: cache,
			left: &dy, right: &x, partial: &partial,
		}.sweep()
	}
	x.values, dy.values = batch*l.taken(), batch*l.slopes()
	all := append(dw, x, dy, partial)
	if r := a.WeightGradient.Residue; r != nil { // read and written
		all = append(all, parameters(l, State, r.Format)...)
		all = append(all, parameters(l, State, r.Format)...)
	}
	return all
}

// updateFlows: every tensor of the update, element by element.
func (b *bound) updateFlows(i int) []flow {
	l, a := &b.net.Layers[i], &b.arm.Layers[i]
	all := parameters(l, Gradients, a.WeightGradient.Result.Format)
	both := func(class Class, f Format) { // read and written
		all = append(all, parameters(l, class, f)...)
		all = append(all, parameters(l, class, f)...)
	}
	for _, s := range a.States {
		both(State, s.Format)
	}
	if a.Compensation != nil {
		both(State, a.Compensation.Format)
	}
	if !a.separateMaster() {
		both(Weights, a.Weight.Format)
		return all
	}
	both(Master, a.Master.Format)
	return append(all, parameters(l, Weights, a.Weight.Format)...)
}

// lossFlows are the tensors of the loss: the logits in the forward phase, the
// output error in the backward phases.
func (b *bound) lossFlows(p Phase, batch uint64) []flow {
	last := len(b.net.Layers) - 1
	switch p {
	case Forward:
		return []flow{b.output(last, batch)}
	case InputGradient:
		return []flow{b.gradientOut(last, batch)}
	}
	return nil
}
