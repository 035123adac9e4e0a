package trainer

import "ulpine/quant"

// gruCell is the gated recurrent unit as it was published (K. Cho et al.: Learning
// phrase representations using RNN encoder-decoder, arXiv:1406.1078, section 2.3),
// the reset acting on the state before the candidate's sum. h is h_(t-1), and every
// line is rounded once at forward.activation, the functions from sums as they leave
// their bias:
//
//	z = R(sigmoid(update_weight [x_t, h] + update_bias))
//	r = R(sigmoid(reset_weight [x_t, h] + reset_bias))
//	s = R(r h)
//	n = R(tanh(weight [x_t, s] + bias))
//	d = R(h - n)     e = R(z d)     h_t = R(n + e)
//
// Back, g being the gradient of h_t, every line rounded at input_gradient.result:
//
//	u  = R(g d)              gradient of z, then R(u z (1 - z)) of its sum
//	b  = R(g z)              part of the gradient of h
//	m  = R(g - b)            gradient of n, then R(m (1 - n^2)) of its sum, and q of s
//	v  = R(q h)              gradient of r, then R(v r (1 - r)) of its sum
//	c  = R(q r)              part of the gradient of h, not at the first time
//
// The gradients of h join in the order b, c, that of the reset's sum, that of the
// update's; those of x_t in the order update, reset, candidate. The gates count in the
// order update, reset, candidate; elementwise results draw under the update's part.
// At the first time h is +0: s, d, e are formed from it like any.
var gruCell = cellKind{
	name: "gru", gates: 3, names: []string{"update_", "reset_", ""}, values: 7, back: 8, later: 4,
	build32: newGRU[float32], build64: newGRU[float64],
}

// The gates of a gated unit.
const (
	updateGate = iota
	resetGate
	candidate
)

type gru[T quant.Element] struct {
	all   []*gate[T]
	units int
	block []float64
	zero  []T

	// Of all times, [time, sample, unit].
	z, r, n, s, d []T

	scratch      []T // g z, q h and the like, one at a time
	kept         [4][]T
	columns      [3][]T
	state, input [][]T
}

func newGRU[T quant.Element](b *bench[T], units int) (cell[T], error) {
	c := &gru[T]{units: units, block: make([]float64, combineLength)}
	for n := range 3 {
		g, err := newGate(b, units, n, 3)
		if err != nil {
			return nil, err
		}
		c.all = append(c.all, g)
		c.columns[n] = make([]T, b.batch*g.inputs)
	}
	all, one := b.spec.In[1]*b.batch*units, b.batch*units
	for _, tensor := range []*[]T{&c.z, &c.r, &c.n, &c.s, &c.d} {
		*tensor = make([]T, all)
	}
	for i := range c.kept {
		c.kept[i] = make([]T, one)
	}
	c.zero, c.scratch = make([]T, one), make([]T, one)
	c.state, c.input = make([][]T, 4), make([][]T, 3)
	return c, nil
}

func (c *gru[T]) gates() []*gate[T] { return c.all }

// of is a tensor of one time.
func (c *gru[T]) of(p *pass, all []T, t int) []T {
	return all[t*len(c.zero):][:p.samples*c.units]
}

// before is the state before a time, zero before the first.
func (c *gru[T]) before(p *pass, h []T) []T {
	if h == nil {
		return c.zero[:p.samples*c.units]
	}
	return h
}

func (c *gru[T]) step(p *pass, t int, x, before, after []T) {
	h := c.before(p, before)
	z, r, n, s, d := c.of(p, c.z, t), c.of(p, c.r, t), c.of(p, c.n, t), c.of(p, c.s, t), c.of(p, c.d, t)
	first := p.first * uint64(c.units)
	gate := func(k int, f *curve, dst, state []T) {
		g := c.all[k]
		bend(g.at(t), p, f, dst, g.sum(p, t, x, state), c.block, first)
	}
	pl := c.all[updateGate].at(t)
	combine := func(o operation, dst, a, b []T, how arithmetic) {
		combined(pl, p, ForwardActivation, o, dst, a, b, how, &pl.set.Activation, first)
	}
	gate(updateGate, &sigmoidCurve, z, h)
	gate(resetGate, &sigmoidCurve, r, h)
	combine(opKept, s, r, h, product)
	gate(candidate, &tanhCurve, n, s)
	combine(opApart, d, h, n, difference)
	e := c.scratch[:len(d)]
	combine(opShift, e, z, d, product)
	combine(opNewState, after, n, e, sum)
}

func (c *gru[T]) back(p *pass, t int, before, _, gradient []T, below bool) (state, inputs [][]T) {
	h := c.before(p, before)
	z, r, n, d := c.of(p, c.z, t), c.of(p, c.r, t), c.of(p, c.n, t), c.of(p, c.d, t)
	size := len(h)
	share, kept, w := c.kept[0][:size], c.kept[1][:size], c.scratch[:size]
	pl := c.all[updateGate].at(t)
	combine := func(o operation, dst, a, b []T, how arithmetic) {
		combined(pl, p, InputGradientResult, o, dst, a, b, how, &pl.set.InputGradient.Result, 0)
	}
	bent := func(k int, f *curve, dy, y []T) {
		g := c.all[k]
		unbend(g.at(t), p, f, opSlope, g.now.above.gradients(p.samples), dy, y, y, c.block)
		g.gradients(p, t)
	}
	combine(opUpdateBack, w, gradient, d, product)
	bent(updateGate, &sigmoidCurve, w, z)
	combine(opStateShare, share, gradient, z, product)
	combine(opNewBack, w, gradient, share, difference)
	bent(candidate, &tanhCurve, w, n)
	c.all[candidate].pull(p, t, ofState, kept) // the gradient of s
	combine(opResetBack, w, kept, h, product)
	bent(resetGate, &sigmoidCurve, w, r)
	if t > 0 {
		combine(opKeptBack, kept, kept, r, product)
	}
	return c.gathered(p, t, size, below)
}

// gathered collects the gradients of h and x_t.
func (c *gru[T]) gathered(p *pass, t, size int, below bool) (state, inputs [][]T) {
	if t > 0 {
		for k, g := range []int{resetGate, updateGate} {
			c.all[g].pull(p, t, ofState, c.kept[2+k][:size])
		}
		for k := range c.state {
			c.state[k] = c.kept[k][:size]
		}
		state = c.state
	}
	if below {
		for k, g := range c.all {
			c.input[k] = c.columns[k][:p.samples*g.inputs]
			g.pull(p, t, ofInputs, c.input[k])
		}
		inputs = c.input
	}
	return state, inputs
}
