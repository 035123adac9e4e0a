package trainer

import (
	"testing"

	"ulpine/quant"
	"ulpine/quant/elementary"
	"ulpine/quant/random"
)

// The tests of this file recompute attention and recurrent layers result by result, in
// exact reals, from the published orders and addresses of random words: every stored
// tensor, product and partial sum is rounded stochastically.

// block is a tensor [sample, channel, position] of the account.
type block struct {
	channels, length int
	v                []float64
}

func newBlock(samples, channels, length int) block {
	return block{channels, length, make([]float64, samples*channels*length)}
}

func (b *block) index(s, c, t int) int { return (s*b.channels+c)*b.length + t }

func (b *block) at(s, c, t int) float64 { return b.v[b.index(s, c, t)] }

// layerAccount is the oracle of one layer, number 0.
type layerAccount struct {
	oracle
	samples int
}

// part is the oracle under the key of a part.
func (a *layerAccount) part(n int) *oracle {
	o := a.oracle
	if n > 0 {
		o.seed = random.Derive(o.seed, random.Stream(1<<31+n))
	}
	return &o
}

// stores rounds a block at an operation, an element at a time.
func stores(o *oracle, b block, operation int) block {
	out := block{b.channels, b.length, make([]float64, len(b.v))}
	for n, v := range b.v {
		out.v[n] = o.store(quant.Exactly(v), 0, operation, n)
	}
	return out
}

// operandOf rounds an operand at its own point.
func operandOf(o *oracle, b block, operation int) block {
	if o.operand == nil {
		return b
	}
	out := block{b.channels, b.length, make([]float64, len(b.v))}
	for n, v := range b.v {
		out.v[n], _ = o.operand.Round(quant.Exactly(v), o.draws(0, operation).Word(uint64(n)))
	}
	return out
}

// project is a product with a weight at every position.
func (a *layerAccount) project(part int, x block, w, bias []float64) block {
	o := a.part(part)
	units := len(bias)
	x = operandOf(o, x, 46)
	y := newBlock(a.samples, units, x.length)
	for s := range a.samples {
		for u := range units {
			for t := range x.length {
				var list []term
				for c := range x.channels {
					list = append(list, term{c, w[u*x.channels+c], x.at(s, c, t)})
				}
				j := s*x.length + t
				z := o.sum(list, 0, 4, 6, u, j)
				z = o.insideSum(quant.Exactly(z).Add(quant.Exactly(bias[u])), 0, 6, x.channels, u, j)
				y.v[y.index(s, u, t)] = z
			}
		}
	}
	return stores(o, y, 3)
}

// projectBack are the gradients of weight, bias and input.
func (a *layerAccount) projectBack(part int, x, dy block, w []float64) (dw, db []float64, dx block) {
	o := a.part(part)
	again := operandOf(o, x, 46) // the forward operand serves the weight gradient
	for u := range dy.channels {
		for c := range x.channels {
			dw = append(dw, o.store(quant.Exactly(o.sum(a.overBatch(dy, u, &again, c), 0, 64+2, 64+4, u, c)), 0, 64+6, u*x.channels+c))
		}
		db = append(db, o.store(quant.Exactly(o.sum(a.overBatch(dy, u, nil, 0), 0, 0, 128+4, u, 0)), 0, 128+6, u))
	}
	pulled := operandOf(o, dy, 8)
	dx = newBlock(a.samples, x.channels, x.length)
	for s := range a.samples {
		for c := range x.channels {
			for t := range x.length {
				var list []term
				for u := range dy.channels {
					list = append(list, term{u, w[u*x.channels+c], pulled.at(s, u, t)})
				}
				dx.v[dx.index(s, c, t)] = o.sum(list, 0, 9, 11, c, s*x.length+t)
			}
		}
	}
	return dw, db, stores(o, dx, 13)
}

// overBatch are the terms of a weight's gradient, sample, then position.
func (a *layerAccount) overBatch(dy block, u int, x *block, c int) (list []term) {
	for s := range a.samples {
		for t := range dy.length {
			e := term{k: s*dy.length + t, a: dy.at(s, u, t)}
			if x != nil {
				e.b = x.at(s, c, t)
			}
			list = append(list, e)
		}
	}
	return list
}

// workingOf are the working copies of a layer's parameters, as doubles.
func workingOf(e *engine[float32]) (all [][]float64) {
	for _, q := range e.params {
		all = append(all, widened(q.working.data))
	}
	return all
}

// accountedLayer walks one layer forward and back on stored values and returns the
// engine and the account that follows it.
func accountedLayer(t *testing.T, text string, operand *quant.Point) (*engine[float32], *layerAccount, block, block) {
	t.Helper()
	const samples = 2
	net := network(t, []int{3, 4}, text)
	o := oracle{stored: stochastic(t, "bf16", 12), inside: stochastic(t, "E6M9", 7), operand: operand, seed: random.Derive(77, random.RoundingBits), step: 1}
	arm := Everything(o.stored, 1, 1)
	l := &arm.Layers[0]
	sums := quant.Accumulate{Product: &o.inside, Sum: o.inside}
	l.Forward, l.InputGradient.Sums, l.WeightGradient.Sums = sums, sums, sums
	l.Operand, l.InputGradient.Gradient = operand, operand
	job := Job{Network: net, Arm: arm, Training: sgdTraining(samples, 1), Seed: 77, Train: dataset(samples, net.Input, 3, 1)}
	for i, s := range net.Layers[0].Params {
		job.Start = append(job.Start, startParam(uint64(3+i), s.Shape...))
	}
	e := engineFor[float32](t, &job)
	e.pass.step, e.pass.samples = 1, samples
	e.forward(&e.pass, e.fetch([]int32{0, 1}))
	top := e.edges[1].gradients(samples)
	for i, v := range uniform(len(top), 9) {
		x, _ := o.stored.Round(quant.Exactly(float64(v)), 0)
		top[i] = float32(x)
	}
	e.layers[0].backward(&e.pass, true)
	shape := append(net.Layers[0].Out, 1)
	return e, &layerAccount{o, samples},
		block{3, 4, widened(e.edges[0].values(samples))}, block{shape[0], shape[1], widened(top)}
}

// eachOperand runs a test with operands as stored and with operands of their own.
func eachOperand(t *testing.T, run func(t *testing.T, operand *quant.Point)) {
	own := stochastic(t, "E5M4", 5)
	t.Run("operands as stored", func(t *testing.T) { run(t, nil) })
	t.Run("own operands", func(t *testing.T) { run(t, &own) })
}

func TestElmanIsItsScalarAccount(t *testing.T) {
	for _, text := range []string{"recurrent units=2", "recurrent units=2 output=all"} {
		eachOperand(t, func(t *testing.T, operand *quant.Point) {
			e, a, x, dy := accountedLayer(t, text, operand)
			const units, both = 2, 5
			w := workingOf(e)
			// Forward: lines are [x_t, h_(t-1)] as operands.
			lines, states := newBlock(2, both, 4), newBlock(2, units, 4)
			for t := range 4 {
				now := newBlock(2, both, 1)
				for s := range 2 {
					for c := range both {
						switch {
						case c < 3:
							now.v[now.index(s, c, 0)] = x.at(s, c, t)
						case t > 0:
							now.v[now.index(s, c, 0)] = states.at(s, c-3, t-1)
						}
					}
				}
				o := a.part(t)
				now = operandOf(o, now, 46)
				for s := range 2 {
					for c := range both {
						lines.v[lines.index(s, c, t)] = now.at(s, c, 0)
					}
					for u := range units {
						var list []term
						for c := range both {
							list = append(list, term{c, w[0][u*both+c], now.at(s, c, 0)})
						}
						z := o.sum(list, 0, 4, 6, u, s)
						z = o.insideSum(quant.Exactly(z).Add(quant.Exactly(w[1][u])), 0, 6, both, u, s)
						states.v[states.index(s, u, t)] = o.store(quant.Exactly(elementary.Tanh(z)), 0, 3, s*units+u)
					}
				}
			}
			// Back: da are the gradients of the sums.
			da, dx := newBlock(2, units, 4), newBlock(2, 3, 4)
			later := make([]float64, 2*units)
			for t := 3; t >= 0; t-- {
				o := a.part(t)
				now := newBlock(2, units, 1)
				for s := range 2 {
					for u := range units {
						g := later[s*units+u]
						switch {
						case dy.length == 4 && t == 3:
							g = dy.at(s, u, t)
						case dy.length == 4:
							g = o.sum([]term{{k: 0, a: dy.at(s, u, t)}, {k: 1, a: g}}, 0, 0, 47, 0, s*units+u)
							g = o.store(quant.Exactly(g), 0, 49, s*units+u)
						case t == 3:
							g = dy.v[s*units+u]
						}
						h := states.at(s, u, t)
						now.v[s*units+u] = o.store(quant.Exactly(g*(1-float64(h*h))), 0, 51, s*units+u)
						da.v[da.index(s, u, t)] = now.v[s*units+u]
					}
				}
				now = operandOf(o, now, 8)
				for s := range 2 {
					for c := range both {
						var list []term
						for u := range units {
							list = append(list, term{u, w[0][u*both+c], now.v[s*units+u]})
						}
						if c < 3 {
							dx.v[dx.index(s, c, t)] = o.store(quant.Exactly(o.sum(list, 0, 9, 11, c, s)), 0, 13, s*3+c)
							continue
						}
						second := *o
						second.seed = random.Derive(o.seed, random.Stream(1<<16+1))
						z := second.sum(list, 0, 9, 11, c-3, s)
						later[s*units+c-3] = o.store(quant.Exactly(z), 0, 50, s*units+c-3)
					}
				}
			}
			y := states.v
			if dy.length == 1 {
				y = nil
				for i := range 2 * units {
					y = append(y, states.v[i*4+3])
				}
			}
			sameBits(t, "outputs", widened(e.edges[1].values(2)), y)
			sameBits(t, "gradient of the input", widened(e.edges[0].gradients(2)), dx.v)
			var dw, db []float64
			for u := range units {
				for c := range both {
					dw = append(dw, a.store(quant.Exactly(a.sum(a.overBatch(da, u, &lines, c), 0, 64+2, 64+4, u, c)), 0, 64+6, u*both+c))
				}
				db = append(db, a.store(quant.Exactly(a.sum(a.overBatch(da, u, nil, 0), 0, 0, 128+4, u, 0)), 0, 128+6, u))
			}
			sameBits(t, "gradient of the weight", widened(e.params[0].gradient.data), dw)
			sameBits(t, "gradient of the bias", widened(e.params[1].gradient.data), db)
		})
	}
}
