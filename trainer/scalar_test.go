package trainer

import (
	"testing"

	"ulpine/quant"
	"ulpine/quant/elementary"
	"ulpine/quant/random"
)

// oracle recomputes a dense network operation by operation with quant's scalar
// rounding, every random word addressed by numbers written out here: a change of
// any address, order or rounding shows.
type oracle struct {
	stored, inside quant.Point
	working        quant.Point  // of working copies
	operand        *quant.Point // of all backward operands; nil: unset
	seed           uint64
	step, phase    uint32
}

// words of one operation; layer -1 is the network itself.
func (o *oracle) draws(layer, operation int) quant.Draws {
	return quant.Draws{Seed: o.seed, Step: o.step, Site: uint32((layer+1)*256 + operation), Phase: o.phase}
}

// store rounds element n of a stored tensor.
func (o *oracle) store(x quant.Real, layer, operation int, n int) float64 {
	v, _ := o.stored.Round(x, o.draws(layer, operation).Word(uint64(n)))
	return v
}

// insideSum rounds a product or a partial sum: term or addition k of result (i, j).
func (o *oracle) insideSum(x quant.Real, layer, operation, k, i, j int) float64 {
	r := o.draws(layer, operation).Lane(uint32(k), uint32(i))
	v := o.draws(layer, operation+1).Lane(uint32(k), uint32(j))
	s16 := func(w uint32) int32 { return int32(int16(w)) }
	u := uint32(s16(r|1)*s16(v)+s16(r>>16)*s16(v>>16)) & 0xffff
	y, _ := o.inside.Round(x, u<<16)
	return y + 0 // zeros inside sums are +0
}

// again is a backward operand: a matrix of stored rows, rounded once more where
// the operand is set.
func (o *oracle) again(m [][]float64, layer, operation int) [][]float64 {
	if o.operand == nil {
		return m
	}
	var out [][]float64
	for r, row := range m {
		var rounded []float64
		for c, v := range row {
			y, _ := o.operand.Round(quant.Exactly(v), o.draws(layer, operation).Word(uint64(r*len(row)+c)))
			rounded = append(rounded, y)
		}
		out = append(out, rounded)
	}
	return out
}

// term is one term of a sum, number k of the full enumeration.
type term struct {
	k    int
	a, b float64
}

// terms numbers two rows in turn; b may be nil.
func terms(a, b []float64) (list []term) {
	for k := range a {
		t := term{k: k, a: a[k]}
		if b != nil {
			t.b = b[k]
		}
		list = append(list, t)
	}
	return list
}

// sum adds products in turn; operation numbers are those of the product's rows
// and the sum's rows. Without a product operation the terms are their a.
func (o *oracle) sum(list []term, layer, product, sum, i, j int) float64 {
	var s float64
	for _, t := range list {
		x := quant.Exactly(t.a)
		if product != 0 {
			x = quant.Exactly(o.insideSum(quant.ExactProduct(t.a, t.b), layer, product, t.k, i, j))
		}
		s = o.insideSum(quant.Exactly(s).Add(x), layer, sum, t.k, i, j)
	}
	return s
}

// scalarDense is one dense layer of the oracle.
type scalarDense struct {
	layer         int
	w, v, working [][]float64 // [unit][input..., bias last]
}

func (d *scalarDense) inputs() int { return len(d.w[0]) - 1 }

// each visits every parameter: its block of operation numbers, its element number.
func (d *scalarDense) each(f func(u, i, block, n int)) {
	for u := range d.w {
		for i := range d.inputs() {
			f(u, i, 64, u*d.inputs()+i)
		}
		f(u, d.inputs(), 128, u)
	}
}

func (d *scalarDense) refresh(o *oracle) {
	d.each(func(u, i, block, n int) {
		d.working[u][i], _ = o.working.Round(quant.Exactly(d.w[u][i]), o.draws(d.layer, block+0).Word(uint64(n)))
	})
}

// forward returns outputs [sample][unit]; first is the first sample's number.
func (d *scalarDense) forward(o *oracle, x [][]float64, first int) [][]float64 {
	units := len(d.w)
	y := make([][]float64, len(x))
	for s := range x {
		y[s] = make([]float64, units)
		for u := range units {
			k := d.inputs()
			z := o.sum(terms(d.working[u][:k], x[s]), d.layer, 4, 6, u, first+s)
			z = o.insideSum(quant.Exactly(z).Add(quant.Exactly(d.working[u][k])), d.layer, 6, k, u, first+s)
			y[s][u] = o.store(quant.Exactly(z), d.layer, 3, (first+s)*units+u)
		}
	}
	return y
}

// backward returns the gradients of the parameters and of the inputs.
func (d *scalarDense) backward(o *oracle, x, dy [][]float64, below bool) (g, dx [][]float64) {
	columns := func(m [][]float64, c int) (out []float64) {
		for _, row := range m {
			out = append(out, row[c])
		}
		return out
	}
	g = make([][]float64, len(d.w))
	for u := range g {
		g[u] = make([]float64, d.inputs()+1)
	}
	dyAgain, xAgain := o.again(dy, d.layer, 15), o.again(x, d.layer, 14)
	d.each(func(u, i, block, n int) {
		var s float64
		if i == d.inputs() {
			s = o.sum(terms(columns(dyAgain, u), nil), d.layer, 0, block+4, u, 0)
		} else {
			s = o.sum(terms(columns(dyAgain, u), columns(xAgain, i)), d.layer, block+2, block+4, u, i)
		}
		g[u][i] = o.store(quant.Exactly(s), d.layer, block+6, n)
	})
	if below {
		dx = d.inputGradient(o, dy, columns)
	}
	return g, dx
}

// inputGradient uses the working copy, or, where the operand is set, its rounding
// of the master.
func (d *scalarDense) inputGradient(o *oracle, dy [][]float64, columns func([][]float64, int) []float64) (dx [][]float64) {
	weights := d.working
	if o.operand != nil {
		weights = nil
		for _, row := range d.w {
			weights = append(weights, row[:d.inputs()])
		}
		weights = o.again(weights, d.layer, 64+1)
	}
	dy = o.again(dy, d.layer, 8)
	for s := range dy {
		row := make([]float64, d.inputs())
		for i := range row {
			z := o.sum(terms(columns(weights, i), dy[s]), d.layer, 9, 11, i, s)
			row[i] = o.store(quant.Exactly(z), d.layer, 13, s*d.inputs()+i)
		}
		dx = append(dx, row)
	}
	return dx
}

func (d *scalarDense) update(o *oracle, g [][]float64, momentum, rate, scale float64) {
	d.each(func(u, i, block, n int) {
		v := o.store(quant.ExactProduct(momentum, d.v[u][i]), d.layer, block+16, n)
		v = o.store(quant.Exactly(v).Add(quant.Exactly(g[u][i]/scale)), d.layer, block+17, n)
		step := o.store(quant.ExactProduct(rate, v), d.layer, block+7, n)
		d.v[u][i] = v
		d.w[u][i] = o.store(quant.Exactly(d.w[u][i]).Add(quant.Exactly(step).Negated()), d.layer, block+8, n)
	})
	d.refresh(o)
}

// start rounds the parameters that a run of a layer is to start from.
func (o *oracle) start(layer int, weight, bias Param) *scalarDense {
	d := &scalarDense{layer: layer}
	units, inputs := weight.Shape[0], weight.Shape[1]
	for u := range units {
		row := append(append([]float64(nil), weight.Values[u*inputs:][:inputs]...), bias.Values[u])
		d.w = append(d.w, row)
		d.v = append(d.v, make([]float64, inputs+1))
		d.working = append(d.working, make([]float64, inputs+1))
	}
	d.each(func(u, i, block, n int) { d.w[u][i] = o.store(quant.Exactly(d.w[u][i]), layer, block+8, n) })
	d.refresh(o)
	return d
}

// network of the oracle: dense, relu, dense.
type scalarNet struct {
	o      *oracle
	lo, hi *scalarDense
}

// forward keeps what the backward pass needs.
func (n *scalarNet) forward(x []float32, per, first, count int) (in, pre, act, y [][]float64) {
	for s := range count {
		row := make([]float64, per)
		for i := range row {
			row[i] = n.o.store(quant.Exactly(float64(x[(first+s)*per+i])), -1, 1, n.place(first, s)*per+i)
		}
		in = append(in, row)
	}
	pre = n.lo.forward(n.o, in, n.place(first, 0))
	for s, row := range pre {
		out := make([]float64, len(row))
		for i, v := range row {
			out[i] = n.o.store(quant.Exactly(max(v, 0)), 1, 3, n.place(first, s)*len(row)+i)
		}
		act = append(act, out)
	}
	return in, pre, act, n.hi.forward(n.o, act, n.place(first, 0))
}

// place is the number of example s of a batch: counted in the batch in training,
// in the set in an evaluation.
func (n *scalarNet) place(first, s int) int {
	if n.o.phase == 0 {
		return s
	}
	return first + s
}

// softmax returns loss and slope of one example.
func softmax(y []float64, label int32) (loss float64, slope []float64) {
	m := y[0]
	for _, v := range y {
		m = max(m, v)
	}
	var z float64
	for _, v := range y {
		z += elementary.Exp(v - m)
	}
	for c, v := range y {
		q := elementary.Exp(v-m) / z
		if c == int(label) {
			q--
		}
		slope = append(slope, q)
	}
	return elementary.Log(z) - (y[label] - m), slope
}

// TestStochasticStepIsItsScalarAccount recomputes an arm in which every stored
// tensor is stochastic bfloat16 and every product and partial sum stochastic
// E6M9, with and without operands of
// their own, with a fixed loss scale, over an epoch with a short last batch and an
// evaluation, from the published addresses of its random words.
func TestStochasticStepIsItsScalarAccount(t *testing.T) {
	checkScalarAccount(t, nil)
	operand := stochastic(t, "E5M4", 5)
	checkScalarAccount(t, &operand)
}

// startParam draws exact starting values that no format in play holds.
func startParam(seed uint64, shape ...int) Param {
	p := Param{Shape: shape}
	for _, v := range uniform(volume(shape), seed) {
		p.Values = append(p.Values, float64(v)/3)
	}
	return p
}

func checkScalarAccount(t *testing.T, operand *quant.Point) {
	const examples, batch, tests, scale = 5, 2, 3, 256
	net := network(t, []int{3}, "dense 4", "relu", "dense 3")
	o := &oracle{stored: stochastic(t, "bf16", 12), working: stochastic(t, "E8M4", 9), inside: stochastic(t, "E6M9", 7), operand: operand, seed: random.Derive(77, random.RoundingBits)}
	arm := Everything(o.stored, 3, 1)
	sums := quant.Accumulate{Product: &o.inside, Sum: o.inside}
	for i := range arm.Layers {
		l := &arm.Layers[i]
		l.Forward, l.InputGradient.Sums, l.WeightGradient.Sums = sums, sums, sums
		l.Weight = o.working
		l.InputGradient.First, l.InputGradient.Gradient = operand, operand
		l.WeightGradient.First, l.WeightGradient.Gradient = operand, operand
	}
	arm.LossScale = LossScale{Kind: FixedScale, Value: scale}
	job := Job{
		Network: net, Arm: arm, Training: sgdTraining(batch, 1), Seed: 77,
		Train: dataset(examples, net.Input, 3, 1), Test: dataset(tests, net.Input, 3, 2),
	}
	job.Start = []Param{startParam(3, 4, 3), startParam(4, 4), startParam(5, 3, 4), startParam(6, 3)}
	out := mustRun(t, job)

	n := &scalarNet{o: o, lo: o.start(0, job.Start[0], job.Start[1]), hi: o.start(2, job.Start[2], job.Start[3])}
	var losses []float64
	x := job.Train.Inputs.Float32s()
	for first := 0; first < examples; first += batch {
		o.step++
		labels := job.Train.Labels[first:min(first+batch, examples)]
		in, pre, act, y := n.forward(x, 3, first, len(labels))
		var sum float64
		var dy [][]float64
		for s := range y {
			loss, slope := softmax(y[s], labels[s])
			sum += loss
			for c := range slope {
				slope[c] = o.store(quant.Exactly(slope[c]/float64(len(labels))*scale), -1, 2, s*3+c)
			}
			dy = append(dy, slope)
		}
		losses = append(losses, sum/float64(len(labels)))
		ghi, dact := n.hi.backward(o, act, dy, true)
		for s := range dact {
			for i := range dact[s] {
				if pre[s][i] <= 0 {
					dact[s][i] = 0
				}
			}
		}
		glo, _ := n.lo.backward(o, in, dact, false)
		n.lo.update(o, glo, float64(float32(0.9)), float64(float32(0.05)), scale)
		n.hi.update(o, ghi, float64(float32(0.9)), float64(float32(0.05)), scale)
	}
	sameBits(t, "loss", out.Steps, losses)
	for i, d := range []*scalarDense{n.lo, n.hi} {
		var w, b []float64
		for _, row := range d.w {
			w, b = append(w, row[:d.inputs()]...), append(b, row[d.inputs()])
		}
		sameBits(t, "weight", out.Final[2*i].Values, w)
		sameBits(t, "bias", out.Final[2*i+1].Values, b)
	}

	o.step, o.phase = 1, 2
	_, _, _, y := n.forward(job.Test.Inputs.Float32s(), 3, 0, tests)
	var sum float64
	for s := range y {
		loss, _ := softmax(y[s], job.Test.Labels[s])
		sum += loss
	}
	sameBits(t, "test loss", []float64{out.Epochs[0].TestLoss}, []float64{sum / tests})
}
