package trainer

import "ulpine/quant"

// elmanCell is the simple recurrent cell (J. L. Elman: Finding structure in time,
// Cognitive Science 14, 1990) with the hyperbolic tangent:
//
//	h_t = R[activation](tanh(a)), a the sum of weight [x_t, h_(t-1)], then + bias
//
// a as it leaves the sum and its bias: it is stored nowhere. Back, g being the
// gradient of h_t, and the slope written in the rounded h_t as in a layer of tanh:
//
//	da = R[input_gradient.result](g (1 - h_t^2))
var elmanCell = cellKind{
	name: "elman", gates: 1, names: []string{""}, values: 1, back: 1, later: 1,
	build32: newElman[float32], build64: newElman[float64],
}

type elman[T quant.Element] struct {
	all          []*gate[T] // one
	block        []float64
	state, input []T
	lists        [2][][]T
}

func newElman[T quant.Element](b *bench[T], units int) (cell[T], error) {
	g, err := newGate(b, units, 0, 1)
	if err != nil {
		return nil, err
	}
	return &elman[T]{
		all: []*gate[T]{g}, block: make([]float64, combineLength),
		state: make([]T, b.batch*units), input: make([]T, b.batch*g.inputs),
		lists: [2][][]T{make([][]T, 1), make([][]T, 1)},
	}, nil
}

func (c *elman[T]) gates() []*gate[T] { return c.all }

func (c *elman[T]) step(p *pass, t int, x, before, after []T) {
	g := c.all[0]
	a := g.sum(p, t, x, before)
	bend(g.at(t), p, &tanhCurve, after, a, c.block, p.first*uint64(g.units))
}

func (c *elman[T]) back(p *pass, t int, _, after, gradient []T, below bool) (state, inputs [][]T) {
	g := c.all[0]
	da := g.now.above.gradients(p.samples)
	unbend(g.at(t), p, &tanhCurve, opSlope, da, gradient, after, after, c.block)
	g.gradients(p, t)
	if below {
		c.lists[ofInputs][0] = c.input[:p.samples*g.inputs]
		g.pull(p, t, ofInputs, c.lists[ofInputs][0])
		inputs = c.lists[ofInputs]
	}
	if t > 0 {
		c.lists[ofState][0] = c.state[:p.samples*g.units]
		g.pull(p, t, ofState, c.lists[ofState][0])
		state = c.lists[ofState]
	}
	return state, inputs
}
