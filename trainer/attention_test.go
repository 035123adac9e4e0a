package trainer

import (
	"math"
	"testing"

	"ulpine/quant"
	"ulpine/quant/elementary"
)

func TestAttentionIsItsScalarAccount(t *testing.T) {
	for _, text := range []string{"attention heads=2 width=4", "attention heads=2 width=4 mask=causal", "attention"} {
		eachOperand(t, func(t *testing.T, operand *quant.Point) { checkAttention(t, text, operand) })
		for _, format := range []string{"MXFP4", "INT8"} { // scales shared along each product's terms
			operand := point(t, format)
			t.Run(format, func(t *testing.T) { checkAttention(t, text, &operand) })
		}
	}
}

// attentionAccount is the account of an attention layer between its projections.
type attentionAccount struct {
	*layerAccount
	heads, deep, length int
	causal              bool
}

// exists reports whether position i may ask position j.
func (a *attentionAccount) exists(j, i int) bool { return !a.causal || j <= i }

// each visits the heads; lane is the number of their first column.
func (a *attentionAccount) each(visit func(s, h, lane int)) {
	for s := range a.samples {
		for h := range a.heads {
			visit(s, h, (s*a.heads+h)*a.length)
		}
	}
}

// face is one operand of a product of activations: lines of the terms that are summed.
type face struct {
	lines  [][]float64
	factor float64
}

// facing gathers an operand; formats with shared scales are rounded for this product.
func (a *attentionAccount) facing(lines, terms int, at func(line, term int) float64) face {
	f := face{factor: 1}
	all := make([]float64, lines*terms)
	for i := range all {
		all[i] = at(i/terms, i%terms)
	}
	if a.operand != nil && shared(a.operand) {
		f.factor = quant.RoundTensor(all, append([]float64(nil), all...), quant.Shape{Outer: lines, Axis: terms, Inner: 1}, a.operand, quant.Draws{}, 0, nil)
	}
	for i := range lines {
		f.lines = append(f.lines, all[i*terms:][:terms])
	}
	return f
}

// element is result (i, j) of a product, whose lanes are i and lane+j; only terms that
// exist are there.
func element(o *oracle, left, right face, i, j, lane, product, sum int, exists func(k int) bool) float64 {
	var list []term
	for k := range left.lines[i] {
		if exists(k) {
			list = append(list, term{k, left.lines[i][k], right.lines[j][k]})
		}
	}
	z := o.sum(list, 0, product, sum, i, lane+j)
	if f := left.factor * right.factor; f != 1 {
		z = o.insideSum(quant.ExactProduct(f, z), 0, sum, len(left.lines[i]), i, lane+j)
	}
	return z
}

func always(int) bool { return true }

func checkAttention(t *testing.T, text string, operand *quant.Point) {
	e, base, x, dy := accountedLayer(t, text, operand)
	spec, l := &e.net.Layers[0], e.layers[0].(*attention[float32])
	width := spec.Params[2].Shape[1]
	a := &attentionAccount{base, spec.heads, width / spec.heads, 4, spec.causal}
	stored := func(x []float32, channels int) block { return block{channels, 4, widened(x)} }
	parts, do := stored(l.parts.values(2), 3*width), stored(l.mixed.gradients(2), width)
	p, mixed := a.forward(parts)
	da, dparts := a.back(parts, p, do)
	sameBits(t, "probabilities", widened(l.scores.values(2)), p.v)
	sameBits(t, "mixed values", widened(l.mixed.values(2)), mixed.v)
	sameBits(t, "gradients of scores", widened(l.scores.gradients(2)), da.v)
	sameBits(t, "gradients of queries, keys, values", widened(l.parts.gradients(2)), dparts.v)
	if operand != nil && shared(operand) {
		return // projections share scales as any convolution does
	}
	w := workingOf(e)
	sameBits(t, "queries, keys, values", parts.v, a.project(0, x, w[0], w[1]).v)
	sameBits(t, "outputs", widened(e.edges[1].values(2)), a.project(1, mixed, w[2], w[3]).v)
	dwo, dbo, dmixed := a.projectBack(1, mixed, dy, w[2])
	sameBits(t, "gradients of mixed values", do.v, dmixed.v)
	dw, db, dx := a.projectBack(0, x, dparts, w[0])
	sameBits(t, "gradient of the input", widened(e.edges[0].gradients(2)), dx.v)
	for i, want := range [][]float64{dw, db, dwo, dbo} {
		sameBits(t, "gradient of "+e.params[i].name, widened(e.params[i].gradient.data), want)
	}
}

// third is q, k or v of a head as an operand: along channels, or along positions.
func (a *attentionAccount) third(parts block, which, s, h int, alongChannels bool) face {
	first := (which*a.heads + h) * a.deep
	if alongChannels {
		return a.facing(a.length, a.deep, func(i, d int) float64 { return parts.at(s, first+d, i) })
	}
	return a.facing(a.deep, a.length, func(d, i int) float64 { return parts.at(s, first+d, i) })
}

// columns is p or da of a head along j, rows the same along i.
func (a *attentionAccount) columns(p block, s, h int) face {
	return a.facing(a.length, a.length, func(i, j int) float64 { return p.at(s, h*a.length+j, i) })
}

func (a *attentionAccount) rows(p block, s, h int) face {
	return a.facing(a.length, a.length, func(j, i int) float64 { return p.at(s, h*a.length+j, i) })
}

// once is an operand of a scalar format, rounded a tensor at a time.
func (a *attentionAccount) once(part int, b block, operation int) block {
	o := a.part(part)
	if o.operand == nil || shared(o.operand) {
		return b
	}
	return operandOf(o, b, operation)
}

func (a *attentionAccount) factor() float64 { return float64(float32(1 / math.Sqrt(float64(a.deep)))) }

// forward are the probabilities [sample, head j, i] and what they mix.
func (a *attentionAccount) forward(parts block) (p, mixed block) {
	n, taken := a.length, a.once(2, parts, 46)
	p, mixed = newBlock(a.samples, a.heads*n, n), newBlock(a.samples, a.heads*a.deep, n)
	o := a.part(2)
	a.each(func(s, h, lane int) {
		k, q := a.third(taken, 1, s, h, true), a.third(taken, 0, s, h, true)
		for i := range n {
			m, column := math.Inf(-1), make([]float64, n)
			for j := range n {
				if a.exists(j, i) {
					z := element(o, k, q, j, i, lane, 4, 6, always)
					column[j] = o.store(quant.ExactProduct(z, a.factor()), 0, 47, p.index(s, h*n+j, i))
					m = max(m, column[j])
				}
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
	weights := a.once(3, p, 46)
	o = a.part(3)
	a.each(func(s, h, lane int) {
		v, c := a.third(taken, 2, s, h, false), a.columns(weights, s, h)
		for d := range a.deep {
			for i := range n {
				mixed.v[mixed.index(s, h*a.deep+d, i)] = element(o, v, c, d, i, lane, 4, 6, func(j int) bool { return a.exists(j, i) })
			}
		}
	})
	return p, stores(o, mixed, 3)
}

// back are the gradients of the scores and of q, k and v.
func (a *attentionAccount) back(parts, p, do block) (da, dparts block) {
	n, taken := a.length, a.once(2, parts, 46)
	weights, pulled := a.once(3, p, 46), a.once(4, do, 8)
	da, dparts = newBlock(a.samples, a.heads*n, n), newBlock(a.samples, parts.channels, n)
	third := func(which, s, h, d, i int) *float64 { return &dparts.v[dparts.index(s, (which*a.heads+h)*a.deep+d, i)] }
	dp, dv, dq, dk := a.part(4), a.part(5), a.part(6), a.part(7)
	a.each(func(s, h, lane int) {
		v, g := a.third(taken, 2, s, h, true), a.facing(n, a.deep, func(i, d int) float64 { return pulled.at(s, h*a.deep+d, i) })
		for i := range n {
			var agree []term
			for j := range n {
				if at := p.index(s, h*n+j, i); a.exists(j, i) {
					da.v[at] = dp.store(quant.Exactly(element(dp, v, g, j, i, lane, 9, 11, always)), 0, 13, at)
					agree = append(agree, term{j, p.v[at], da.v[at]})
				}
			}
			common := dp.sum(agree, 0, 52, 54, 0, lane+i)
			for j := range n {
				if at := p.index(s, h*n+j, i); a.exists(j, i) {
					u := dp.store(quant.Exactly(da.v[at]).Add(quant.Exactly(-common)), 0, 56, at)
					u = dp.store(quant.ExactProduct(p.v[at], u), 0, 57, at)
					da.v[at] = dp.store(quant.ExactProduct(u, a.factor()), 0, 58, at)
				}
			}
		}
		g = a.facing(a.deep, n, func(d, i int) float64 { return pulled.at(s, h*a.deep+d, i) })
		r := a.rows(weights, s, h)
		for d := range a.deep {
			for j := range n {
				*third(2, s, h, d, j) = element(dv, g, r, d, j, lane, 9, 11, func(i int) bool { return a.exists(j, i) })
			}
		}
	})
	slopes := a.once(6, da, 8)
	a.each(func(s, h, lane int) {
		q, k := a.third(taken, 0, s, h, false), a.third(taken, 1, s, h, false)
		c, r := a.columns(slopes, s, h), a.rows(slopes, s, h)
		for d := range a.deep {
			for t := range n {
				*third(0, s, h, d, t) = element(dq, k, c, d, t, lane, 9, 11, func(j int) bool { return a.exists(j, t) })
				*third(1, s, h, d, t) = element(dk, q, r, d, t, lane, 9, 11, func(i int) bool { return a.exists(t, i) })
			}
		}
	})
	return da, stores(a.part(6), dparts, 13)
}
