package cost

// memory is what the arm keeps in memory in training and on an endpoint.
func (b *bound) memory(batch, inferenceBatch uint64) Memory {
	var m Memory
	for i := range b.net.Layers {
		if b.kept(i) {
			m.keep(i-1, b.input(i, batch))
		}
		m.keep(i, b.inner(i, batch, 1))
		b.keepParameters(i, &m)
	}
	last := len(b.net.Layers) - 1
	m.keep(last, b.output(last, batch)) // the loss needs the logits
	for _, f := range b.gradientPair(batch) {
		m.keep(f.layer, f.flow)
	}
	m.Training = sumUp(m.Tensors)
	if m.Training.Values > 0 {
		m.Width = float64(m.Training.Bits) / float64(m.Training.Values)
	}
	m.Endpoint = b.endpoint(inferenceBatch)
	return m
}

// kept reports whether a backward phase needs the input of layer i.
func (b *bound) kept(i int) bool {
	l := &b.net.Layers[i]
	return !l.view() && (l.parameters() > 0 || l.remembers() && b.net.propagates(i))
}

// keepParameters adds the tensors of a layer that are as large as its parameters.
func (b *bound) keepParameters(i int, m *Memory) {
	l, a := &b.net.Layers[i], &b.arm.Layers[i]
	if l.parameters() == 0 {
		return
	}
	keep := func(class Class, f Format) {
		for _, p := range parameters(l, class, f) {
			m.keep(i, p)
		}
	}
	keep(Weights, a.Weight.Format)
	if a.separateMaster() {
		keep(Master, a.Master.Format)
	}
	for _, s := range a.States {
		keep(State, s.Format)
	}
	if a.Compensation != nil {
		keep(State, a.Compensation.Format)
	}
	keep(Gradients, a.WeightGradient.Result.Format)
	if r := a.WeightGradient.Residue; r != nil {
		keep(State, r.Format)
	}
}

// placed is a flow at a layer.
type placed struct {
	layer int
	flow  flow
}

// gradientPair are the largest gradients above and below one layer: the two
// that live at once while the backward phases walk down.
func (b *bound) gradientPair(batch uint64) (pair []placed) {
	most := uint64(0)
	for i := range b.net.Layers {
		above, below := b.gradientOut(i, batch), b.gradientIn(i, batch)
		now := []placed{{i, above}}
		size := above.bits()
		if b.net.propagates(i) && !b.net.Layers[i].view() {
			now = append(now, placed{i - 1, below})
			size += below.bits()
		}
		if size > most {
			most, pair = size, now
		}
	}
	return pair
}

// endpoint is the memory of an inference: all working weights, and the largest
// input and output of one layer.
func (b *bound) endpoint(batch uint64) Footprint {
	var weights, best Memory
	for i := range b.net.Layers {
		l := &b.net.Layers[i]
		for _, p := range parameters(l, Weights, b.arm.Layers[i].Weight.Format) {
			weights.keep(i, p)
		}
		var pair Memory
		pair.keep(i-1, b.input(i, batch))
		if !l.view() {
			pair.keep(i, b.output(i, batch))
		}
		if sumUp(pair.Tensors).Bits > sumUp(best.Tensors).Bits {
			best = pair
		}
	}
	return sumUp(append(weights.Tensors, best.Tensors...))
}

// keep adds a tensor, unless it is empty.
func (m *Memory) keep(layer int, f flow) {
	if f.values == 0 {
		return
	}
	t := Tensor{
		Layer: layer, Class: f.class, Format: f.format.Name, Width: f.format.BitsPerValue(),
		Values: f.values, Bits: f.size(),
	}
	if len(f.channels) > 0 {
		t.Format, t.Width = "by channel", float64(t.Bits)/float64(t.Values)
	}
	m.Tensors = append(m.Tensors, t)
}

func sumUp(tensors []Tensor) (f Footprint) {
	for _, t := range tensors {
		*f.at(t.Class) += t.Bits
		f.Values += t.Values
		f.Bits += t.Bits
	}
	return f
}
