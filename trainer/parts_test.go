package trainer

import (
	"math"
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
						now.v[s*units+u] = o.store(quant.Exactly(g*(1-h*h)), 0, 51, s*units+u)
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

func TestAttentionIsItsScalarAccount(t *testing.T) {
	for _, text := range []string{"attention heads=2 width=4", "attention heads=2 width=4 mask=causal", "attention"} {
		eachOperand(t, func(t *testing.T, operand *quant.Point) { checkAttention(t, text, operand) })
	}
}

// attentionAccount holds the tensors between the products of an attention layer.
type attentionAccount struct {
	*layerAccount
	heads, deep, length int
	causal              bool
}

// exists reports whether position i may ask position j.
func (a *attentionAccount) exists(j, i int) bool { return !a.causal || j <= i }

// heads visits every result [rows, columns] of a product of activations: words, terms
// and place are the caller's.
func (a *attentionAccount) each(visit func(s, h, lane int)) {
	for s := range a.samples {
		for h := range a.heads {
			visit(s, h, (s*a.heads+h)*a.length)
		}
	}
}

func checkAttention(t *testing.T, text string, operand *quant.Point) {
	e, base, x, dy := accountedLayer(t, text, operand)
	spec := &e.net.Layers[0]
	width := spec.Params[2].Shape[1]
	a := &attentionAccount{base, spec.heads, width / spec.heads, 4, spec.causal}
	w := workingOf(e)
	n, deep := a.length, a.deep
	factor := float64(float32(1 / math.Sqrt(float64(deep))))

	parts := a.project(0, x, w[0], w[1])
	taken := operandOf(a.part(2), parts, 46)
	q := func(b *block, s, h, d, i int) float64 { return b.at(s, h*deep+d, i) }
	k := func(b *block, s, h, d, j int) float64 { return b.at(s, width+h*deep+d, j) }
	v := func(b *block, s, h, d, j int) float64 { return b.at(s, 2*width+h*deep+d, j) }

	// Scores and softmax, [sample, head j, i].
	p := newBlock(2, a.heads*n, n)
	o := a.part(2)
	a.each(func(s, h, lane int) {
		for i := range n {
			m := math.Inf(-1)
			column := make([]float64, n)
			for j := range n {
				if !a.exists(j, i) {
					continue
				}
				var list []term
				for d := range deep {
					list = append(list, term{d, k(&taken, s, h, d, j), q(&taken, s, h, d, i)})
				}
				at := p.index(s, h*n+j, i)
				column[j] = o.store(quant.ExactProduct(o.sum(list, 0, 4, 6, j, lane+i), factor), 0, 47, at)
				m = max(m, column[j])
			}
			var list []term
			for j := range n {
				if a.exists(j, i) {
					column[j] = o.store(quant.Exactly(elementary.Exp(column[j]-m)), 0, 48, p.index(s, h*n+j, i))
					list = append(list, term{k: j, a: column[j]})
				}
			}
			total := o.sum(list, 0, 0, 49, 0, lane+i)
			for j := range n {
				if at := p.index(s, h*n+j, i); a.exists(j, i) {
					p.v[at] = o.store(quant.ExactQuotient(column[j], total), 0, 51, at)
				}
			}
		}
	})
	weights := operandOf(a.part(3), p, 46)
	mixed := newBlock(2, width, n)
	o = a.part(3)
	a.each(func(s, h, lane int) {
		for d := range deep {
			for i := range n {
				var list []term
				for j := range n {
					if a.exists(j, i) {
						list = append(list, term{j, v(&taken, s, h, d, j), weights.at(s, h*n+j, i)})
					}
				}
				mixed.v[mixed.index(s, h*deep+d, i)] = o.sum(list, 0, 4, 6, d, lane+i)
			}
		}
	})
	mixed = stores(o, mixed, 3)
	sameBits(t, "outputs", widened(e.edges[1].values(2)), a.project(1, mixed, w[2], w[3]).v)

	// Back.
	dwo, dbo, do := a.projectBack(1, mixed, dy, w[2])
	pulled := operandOf(a.part(4), do, 8)
	da, dparts := newBlock(2, a.heads*n, n), newBlock(2, 3*width, n)
	a.each(func(s, h, lane int) {
		dp, dv := a.part(4), a.part(5)
		for i := range n {
			var agree []term
			for j := range n {
				if !a.exists(j, i) {
					continue
				}
				var list []term
				for d := range deep {
					list = append(list, term{d, v(&taken, s, h, d, j), q(&pulled, s, h, d, i)})
				}
				at := p.index(s, h*n+j, i)
				da.v[at] = dp.store(quant.Exactly(dp.sum(list, 0, 9, 11, j, lane+i)), 0, 13, at)
				agree = append(agree, term{j, p.v[at], da.v[at]})
			}
			g := dp.sum(agree, 0, 52, 54, 0, lane+i)
			for j := range n {
				if at := p.index(s, h*n+j, i); a.exists(j, i) {
					u := dp.store(quant.Exactly(da.v[at]).Add(quant.Exactly(-g)), 0, 56, at)
					u = dp.store(quant.ExactProduct(p.v[at], u), 0, 57, at)
					da.v[at] = dp.store(quant.ExactProduct(u, factor), 0, 58, at)
				}
			}
		}
		for d := range deep {
			for j := range n {
				var list []term
				for i := range n {
					if a.exists(j, i) {
						list = append(list, term{i, q(&pulled, s, h, d, i), weights.at(s, h*n+j, i)})
					}
				}
				dparts.v[dparts.index(s, 2*width+h*deep+d, j)] = dv.sum(list, 0, 9, 11, d, lane+j)
			}
		}
	})
	slopes := operandOf(a.part(6), da, 8)
	a.each(func(s, h, lane int) {
		for d := range deep {
			for t := range n {
				var toQuery, toKey []term
				for r := range n {
					if a.exists(r, t) {
						toQuery = append(toQuery, term{r, k(&taken, s, h, d, r), slopes.at(s, h*n+r, t)})
					}
					if a.exists(t, r) {
						toKey = append(toKey, term{r, q(&taken, s, h, d, r), slopes.at(s, h*n+t, r)})
					}
				}
				dparts.v[dparts.index(s, h*deep+d, t)] = a.part(6).sum(toQuery, 0, 9, 11, d, lane+t)
				dparts.v[dparts.index(s, width+h*deep+d, t)] = a.part(7).sum(toKey, 0, 9, 11, d, lane+t)
			}
		}
	})
	dparts = stores(a.part(6), dparts, 13)
	dw, db, dx := a.projectBack(0, x, dparts, w[0])
	sameBits(t, "gradient of the input", widened(e.edges[0].gradients(2)), dx.v)
	for i, want := range [][]float64{dw, db, dwo, dbo} {
		sameBits(t, "gradient of "+e.params[i].name, widened(e.params[i].gradient.data), want)
	}
}
