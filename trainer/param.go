package trainer

import (
	"math"

	"ulpine/quant"
	"ulpine/quant/random"
)

// param is one parameter tensor in training.
type param[T quant.Element] struct {
	place
	number int // within the layer: 0 weight, 1 bias
	name   string
	shape  []int
	fanIn  int // 0: starts at first
	first  float64
	fixed  bool // running means, then variances: not trained

	master   array[T] // what the optimizer updates
	working  array[T] // R[forward.weight](master): what the forward pass multiplies
	gradient array[T] // R[weight_gradient.result], still scaled by S
	states   []array[T]

	// What rounding the gradient left, of the last step taken and of this one; empty
	// where it is not kept. See storeGradient.
	residue     array[T]
	nextResidue []T

	// Of the left-hand operand of a product only: its axes, and the factors of its
	// channels where the format shares scales.
	axes    quant.Shape
	factors []float64
}

// newParam makes parameter number of a layer.
func newParam[T quant.Element](b *bench[T], number int) *param[T] {
	s := b.spec.Params[number]
	q := &param[T]{
		place: b.place, number: number, name: s.Name, shape: s.Shape, fanIn: s.FanIn, first: s.Start, fixed: s.Statistic,
		master: newArray[T](s.Shape...), working: newArray[T](s.Shape...), gradient: newArray[T](s.Shape...),
	}
	if b.set.WeightGradient.Residue != nil && !q.fixed {
		q.residue, q.nextResidue = newArray[T](s.Shape...), make([]T, volume(s.Shape))
	}
	return q
}

// draws addresses an operation on this parameter.
func (q *param[T]) draws(p *pass, o operation) quant.Draws {
	return q.place.draws(p, o.of(q.number))
}

// start sets the master to R[update.master] of exact values; running statistics are
// R[forward.moment].
func (q *param[T]) start(p *pass, values []float64) {
	if q.fixed {
		round(q.place, p, ForwardMoment, opMaster.of(q.number), q.master.data, values, q.set.moment(), 0)
		return
	}
	round(q.place, p, UpdateMaster, opMaster.of(q.number), q.master.data, values, &q.set.Master, 0)
}

// refresh makes the working copy anew; once after every update of the master.
func (q *param[T]) refresh(p *pass) {
	if q.fixed {
		return // evaluations read what is stored
	}
	if shared(&q.set.Weight) {
		q.requantise(p)
		return
	}
	round(q.place, p, ForwardWeight, opWorking.of(q.number), q.working.data, q.master.data, &q.set.Weight, 0)
}

// drawInitial fills binary64 initial values: normal with variance gain/fan-in
// from the replicate's stream of weights, zero for a bias. They depend on the
// seed, the layer and the element alone, so all arms of a replicate share them.
// Weights of normalisations start at one; running means at zero, variances at one.
func (q *param[T]) drawInitial(values []float64, seed uint64, gain float64) {
	if q.fanIn == 0 {
		for i := range values {
			values[i] = q.first
			if q.fixed && i >= len(values)/2 {
				values[i] = 1
			}
		}
		return
	}
	d := quant.Draws{Seed: q.key(random.Derive(seed, random.Weights)), Site: site(q.layer, opWorking.of(q.number))}
	deviation := math.Sqrt(gain / float64(q.fanIn))
	for i := range values {
		values[i] = float64(deviation * d.Normal(uint64(i)))
	}
}

// record copies the master out of the engine.
func (q *param[T]) record(wide bool) Param {
	out := Param{Name: paramName(q.layer, q.name), Shape: append([]int(nil), q.shape...), Wide: wide}
	out.Values = make([]float64, len(q.master.data))
	for i, v := range q.master.data {
		out.Values[i] = float64(v)
	}
	return out
}
