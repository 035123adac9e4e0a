package trainer

import (
	"testing"

	"ulpine/quant"
	"ulpine/quant/elementary"
	"ulpine/quant/random"
)

// gatedAccount recomputes a gated cell time by time, [sample, unit] being one tensor.
type gatedAccount struct {
	*layerAccount
	w              [][]float64 // update, reset, candidate: weight, then bias
	units, columns int
}

// lines are [x_t, state] as the operand of gate's sum at time t.
func (a *gatedAccount) lines(gate, t int, x block, state []float64) block {
	b := newBlock(2, a.columns+a.units, 1)
	for s := range 2 {
		for c := range a.columns {
			b.v[b.index(s, c, 0)] = x.at(s, c, t)
		}
		copy(b.v[b.index(s, a.columns, 0):][:a.units], state[s*a.units:])
	}
	return operandOf(a.part(3*t+gate), b, 46)
}

// gate is one gate's output at time t, and its operand.
func (a *gatedAccount) gate(gate, t int, x block, state []float64, f func(float64) float64) ([]float64, block) {
	o, in, both := a.part(3*t+gate), a.lines(gate, t, x, state), a.columns+a.units
	var y []float64
	for s := range 2 {
		for u := range a.units {
			z := o.sum(terms(a.w[2*gate][u*both:][:both], in.v[s*both:][:both]), 0, 4, 6, u, s)
			z = o.insideSum(quant.Exactly(z).Add(quant.Exactly(a.w[2*gate+1][u])), 0, 6, both, u, s)
			y = append(y, o.store(quant.Exactly(f(z)), 0, 3, s*a.units+u))
		}
	}
	return y, in
}

// pull is the gradient of gate's columns [first, first+n) at time t from that of its sum.
func (a *gatedAccount) pull(gate, t int, da []float64, first, n, operation int) (out []float64) {
	plain, both := a.part(3*t+gate), a.columns+a.units
	own, lanes := operandOf(plain, block{a.units, 1, da}, 8), *plain
	if first > 0 { // the state's columns are a second group
		lanes.seed = random.Derive(plain.seed, random.Stream(1<<16+1))
	}
	for s := range 2 {
		for c := range n {
			var list []term
			for u := range a.units {
				list = append(list, term{u, a.w[2*gate][u*both+first+c], own.v[s*a.units+u]})
			}
			out = append(out, plain.store(quant.Exactly(lanes.sum(list, 0, 9, 11, c, s)), 0, operation, s*n+c))
		}
	}
	return out
}

// line is one elementwise line: exact, then rounded under the update's part.
func (a *gatedAccount) line(t, operation int, f func(i int) quant.Real) (out []float64) {
	for i := range 2 * a.units {
		out = append(out, a.part(3*t).store(f(i), 0, operation, i))
	}
	return out
}

func TestGatedIsItsScalarAccount(t *testing.T) {
	for _, text := range []string{"recurrent units=2 cell=gru", "recurrent units=2 cell=gru output=all"} {
		eachOperand(t, func(t *testing.T, operand *quant.Point) {
			e, base, x, dy := accountedLayer(t, text, operand)
			checkGated(t, e, &gatedAccount{base, workingOf(e), 2, 3}, x, dy)
		})
	}
}

func checkGated(t *testing.T, e *engine[float32], a *gatedAccount, x, dy block) {
	const length, size = 4, 4
	zero := make([]float64, size)
	var z, r, n, h, d [length][]float64
	var in [3]block // operands of the weight gradients
	for g := range in {
		in[g] = newBlock(2, a.columns+a.units, length)
	}
	before := func(at int) []float64 {
		if at == 0 {
			return zero
		}
		return h[at-1]
	}
	gate := func(g, at int, state []float64, f func(float64) float64) []float64 {
		y, lines := a.gate(g, at, x, state, f)
		for i, v := range lines.v {
			in[g].v[i*length+at] = v
		}
		return y
	}
	for at := range length {
		z[at] = gate(0, at, before(at), elementary.Sigmoid)
		r[at] = gate(1, at, before(at), elementary.Sigmoid)
		s := a.line(at, 52, func(i int) quant.Real { return quant.ExactProduct(r[at][i], before(at)[i]) })
		n[at] = gate(2, at, s, elementary.Tanh)
		d[at] = a.line(at, 53, func(i int) quant.Real { return quant.Exactly(before(at)[i]).Add(quant.Exactly(-n[at][i])) })
		m := a.line(at, 54, func(i int) quant.Real { return quant.ExactProduct(z[at][i], d[at][i]) })
		h[at] = a.line(at, 55, func(i int) quant.Real { return quant.Exactly(n[at][i]).Add(quant.Exactly(m[i])) })
	}

	var da [3]block
	for g := range da {
		da[g] = newBlock(2, a.units, length)
	}
	dx := newBlock(2, a.columns, length)
	bent := func(g, at int, dy, y []float64, slope func(y float64) float64) (out []float64) {
		for i := range dy {
			v := a.part(3*at+g).store(quant.Exactly(dy[i]*slope(y[i])), 0, 51, i)
			out, da[g].v[i*length+at] = append(out, v), v
		}
		return out
	}
	joined := func(at, sum, result, n int, list ...[]float64) (out []float64) {
		if len(list) == 1 {
			return list[0]
		}
		for i := range n {
			var all []term
			for k, tensor := range list {
				all = append(all, term{k: k, a: tensor[i]})
			}
			out = append(out, a.part(3*at).store(quant.Exactly(a.part(3*at).sum(all, 0, 0, sum, 0, i)), 0, result, i))
		}
		return out
	}
	sigmoid := func(y float64) float64 { return y * (1 - y) }
	var later [][]float64
	for at := length - 1; at >= 0; at-- {
		var list [][]float64
		if dy.length == length {
			now := make([]float64, size)
			for i := range now {
				now[i] = dy.v[i*length+at]
			}
			list = append(list, now)
		} else if at == length-1 {
			list = append(list, dy.v)
		}
		g := joined(at, 47, 49, size, append(list, later...)...)
		u := a.line(at, 56, func(i int) quant.Real { return quant.ExactProduct(g[i], d[at][i]) })
		toUpdate := bent(0, at, u, z[at], sigmoid)
		b := a.line(at, 57, func(i int) quant.Real { return quant.ExactProduct(g[i], z[at][i]) })
		m := a.line(at, 58, func(i int) quant.Real { return quant.Exactly(g[i]).Add(quant.Exactly(-b[i])) })
		toNew := bent(2, at, m, n[at], func(y float64) float64 { return 1 - float64(y*y) })
		q := a.pull(2, at, toNew, a.columns, a.units, 50)
		v := a.line(at, 59, func(i int) quant.Real { return quant.ExactProduct(q[i], before(at)[i]) })
		toReset := bent(1, at, v, r[at], sigmoid)
		kept := a.line(at, 60, func(i int) quant.Real { return quant.ExactProduct(q[i], r[at][i]) })
		later = [][]float64{b, kept, a.pull(1, at, toReset, a.columns, a.units, 50), a.pull(0, at, toUpdate, a.columns, a.units, 50)}
		column := joined(at, 61, 63, 2*a.columns,
			a.pull(0, at, toUpdate, 0, a.columns, 13), a.pull(1, at, toReset, 0, a.columns, 13), a.pull(2, at, toNew, 0, a.columns, 13))
		for i, v := range column {
			dx.v[i*length+at] = v
		}
	}

	y := h[length-1]
	if dy.length == length {
		y = make([]float64, size*length)
		for i := range y {
			y[i] = h[i%length][i/length]
		}
	}
	sameBits(t, "outputs", widened(e.edges[1].values(2)), y)
	sameBits(t, "gradient of the input", widened(e.edges[0].gradients(2)), dx.v)
	both := a.columns + a.units
	for g := range da {
		o := a.part(g)
		var dw, db []float64
		for u := range a.units {
			for c := range both {
				dw = append(dw, o.store(quant.Exactly(o.sum(a.overBatch(da[g], u, &in[g], c), 0, 64+2, 64+4, u, c)), 0, 64+6, u*both+c))
			}
			db = append(db, o.store(quant.Exactly(o.sum(a.overBatch(da[g], u, nil, 0), 0, 0, 128+4, u, 0)), 0, 128+6, u))
		}
		sameBits(t, "gradient of "+e.params[2*g].name, widened(e.params[2*g].gradient.data), dw)
		sameBits(t, "gradient of "+e.params[2*g+1].name, widened(e.params[2*g+1].gradient.data), db)
	}
}
