package trainer

import "ulpine/quant"

// Memory is what a training holds at once, in bytes, as computed from shapes.
type Memory struct {
	Parameters  uint64 // masters, working copies, gradients, optimizer states, a step
	Activations uint64 // values and gradients between layers, the batch at hand
	Layers      uint64 // results before they are stored, operands, framed inputs
	Panels      uint64 // packed operands and random words of products
	Twin        uint64 // the network in binary64 that diagnostics compare gradients with
	Curves      uint64 // losses of all steps, initial and final parameters
	Data        uint64 // examples of all sets, which runs of a replicate share
}

// Own is what one run holds for itself: all but the data.
func (m Memory) Own() uint64 {
	return m.Parameters + m.Activations + m.Layers + m.Panels + m.Twin + m.Curves
}

// MemoryOf estimates the memory of a training with an arm. Panels depend on the
// kernels of the machine; those of its usual ones are counted.
func MemoryOf(n Network, arm *Arm, t Training, d Diagnostics, sizes Sizes) Memory {
	batch := max(1, min(t.Batch, sizes.Train))
	c := memoryCount{
		net: &n, arm: arm, element: 4, batch: uint64(batch),
		capacity: uint64(max(batch, min(evaluationBatch, max(sizes.Train, sizes.Validation, sizes.Test)))),
	}
	if double, _ := n.containers(arm); double {
		c.element = 8
	}
	m := c.engine(t.Optimizer)
	if d.Gradient > 0 {
		exact := Everything(quant.Point{Format: quant.Binary64}, len(n.Layers), 0)
		c.arm, c.element = &exact, 8
		m.Twin = c.engine(Optimizer{Kind: sgdKind.name}).Own()
	}
	all := uint64(n.parameterValues())
	m.Curves = 8*uint64(stepCount(t.Epochs, sizes.Train, batch)) + 2*8*all
	examples := uint64(sizes.Train + sizes.Validation + sizes.Test)
	m.Data = examples * 4 * uint64(volume(n.Input)+1)
	return m
}

// parameterValues is the number of values of all parameters, running statistics
// included.
func (n *Network) parameterValues() (count int) {
	for i := range n.Layers {
		for _, p := range n.Layers[i].Params {
			count += volume(p.Shape)
		}
	}
	return count
}

// memoryCount counts an engine.
type memoryCount struct {
	net             *Network
	arm             *Arm
	element         uint64 // bytes of one
	batch, capacity uint64 // examples of a step, and that edges hold
}

// engine is the memory of layers, parameters and products.
func (c *memoryCount) engine(o Optimizer) (m Memory) {
	var largest uint64
	for i := range c.net.Layers {
		for _, p := range c.net.Layers[i].Params {
			values := uint64(volume(p.Shape))
			largest = max(largest, values)
			m.Parameters += c.element * values * uint64(3+len(c.arm.Layers[i].States))
			if c.arm.Layers[i].WeightGradient.Residue != nil {
				m.Parameters += 2 * c.element * values
			}
		}
	}
	m.Parameters += largest * (8 + 2*c.element) // of the update at hand
	if kind, err := findRule(o); err == nil && kind != &sgdKind {
		m.Parameters += largest * (8 + 2*c.element)
	}
	in := uint64(volume(c.net.Input))
	m.Activations = 2*c.element*c.capacity*in + 4*c.batch*in
	for i := range c.net.Layers {
		s := &c.net.Layers[i]
		if !findKind(s.Kind).view {
			m.Activations += 2 * c.element * c.capacity * uint64(volume(s.Out))
		}
		own, panels := c.layer(i)
		m.Layers, m.Panels = m.Layers+own, m.Panels+panels
	}
	return m
}

// layer is what a layer and its products keep besides parameters and edges.
func (c *memoryCount) layer(i int) (own, panels uint64) {
	s, a := &c.net.Layers[i], &c.arm.Layers[i]
	in, out := c.capacity*uint64(volume(s.In)), c.capacity*uint64(volume(s.Out))
	switch {
	case s.Kind == conv1d || s.Kind == conv2d || s.Kind == denseKind.name:
		return c.linear(s, a, c.net.propagates(i))
	case s.Inner != Inner{}: // attention, recurrent
		of := s.Inner
		inner := of.Values + of.Gradients + of.Operands + of.Activations + of.Slopes + of.Pulled
		return c.element * (c.capacity*inner + in + 2*out), 16 * c.multiplier(&a.Forward, uint64(max(s.Sums.Forward, s.Sums.InputGradient)))
	case s.MACs != Work{} && len(s.Params) > 0: // normalisations
		return c.element * 6 * in, 5 * c.multiplier(&a.Forward, blockOfTerms)
	case s.window.size() > 0: // pools
		return 4 * out, c.multiplier(&a.Forward, blockOfTerms)
	}
	return 0, 0
}

// linear is the memory of a dense layer or convolution; see newLinear and bindConv.
func (c *memoryCount) linear(s *Spec, a *Arithmetic, propagates bool) (own, panels uint64) {
	x, y := c.capacity*uint64(volume(s.In)), c.capacity*uint64(volume(s.Out))
	weight := uint64(volume(s.Params[0].Shape))
	values := max(x, y, weight)
	set := func(p *quant.Point, n uint64) {
		if p != nil {
			values += n
		}
	}
	again := a.backwardOperands()
	set(a.Operand, x)
	set(a.InputGradient.Gradient, y)
	set(again.weight, weight)
	set(a.WeightGradient.Gradient, y)
	set(again.activation, x)
	units, positions := uint64(s.Out[0]), uint64(1)
	terms, back := uint64(s.Sums.Forward), uint64(s.Sums.InputGradient)
	if s.Kind == denseKind.name {
		units = uint64(volume(s.Out))
	} else {
		g := &s.window
		positions = uint64(g.outer())
		high, wide := g.reach()
		frame := uint64((g.h + high - 1) * (g.w + wide - 1))
		values += y + weight + c.capacity*units*frame // regrouped, turned kernels, gradient in its frame
		if g.ph+g.pw > 0 {
			values += c.capacity * uint64(g.c*(g.h+2*g.ph)*(g.w+2*g.pw))
		}
		own += 4 * c.capacity * uint64(g.outer()+g.inner()) // places of patches
	}
	own += c.element * values
	panels = c.panel(&a.Forward, units, terms) + c.panel(&a.WeightGradient.Sums, units, c.batch*positions)
	if propagates {
		channels := uint64(volume(s.In))
		if s.Kind != denseKind.name {
			channels = uint64(s.In[0])
		}
		panels += c.panel(&a.InputGradient.Sums, channels, back)
	}
	return own, panels
}

// panel is the memory of a multiplier with its packed left-hand operand, rows x
// terms, and as many random words as the arithmetic draws.
func (c *memoryCount) panel(acc *quant.Accumulate, rows, terms uint64) uint64 {
	bytes := rows * terms * c.element
	if acc.Sum.Rounding.Mode == quant.Stochastic {
		bytes += rows * terms * 4
	}
	if acc.Product != nil && acc.Product.Rounding.Mode == quant.Stochastic {
		bytes += rows * terms * 4
	}
	return bytes + c.multiplier(acc, terms)
}

// Terms and columns of the block that a multiplier packs at a time.
const (
	blockOfTerms   = 512
	blockOfColumns = 64
)

// multiplier is what a multiplier keeps whatever its rows: blocks of columns in the
// lanes that its arithmetic may need, with their random words, and tables (measured).
func (c *memoryCount) multiplier(acc *quant.Accumulate, terms uint64) uint64 {
	const tables = 40 << 10
	block := min(terms, blockOfTerms) * blockOfColumns
	bytes := tables + block*4
	if acc.Sum.Format != quant.Binary32 && c.element == 4 {
		bytes += 2*tables + block*4
	}
	if acc.Sum.Rounding.Mode == quant.Stochastic {
		bytes += tables + block*4
	}
	if k := acc.Order.Kind; k != quant.Sequential && k != quant.Chunk {
		bytes += terms * blockOfColumns * (c.element + 8) // all terms at once
	}
	return bytes
}
