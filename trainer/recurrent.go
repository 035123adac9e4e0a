package trainer

import (
	"fmt"

	"ulpine/quant"
)

// recurrentKind walks along an input [channels, length], a column x_t at a time, and
// carries a state of units values, h_0 = +0 before the first column. Its output is
// the last state [units], or all of them [units, length]. The cell says how a state
// follows from the last: see elman and gru. The sums over x_t and the state are one
// sum each, input channels ascending, then units of the state.
//
// Back through time, from the last column to the first: the gradient of h_t joins
// that of the output h_t, if there is one, and then those that the cell sends back
// from t+1 in the order it states: a sum without products at the input gradient's sum
// point, then R[input_gradient.result]; a single one passes as it is. In the sums of
// gradients k is the unit; rows are the channels of x_t, and in a sum of its own the
// units of the state, which are a second group (see pass.group). The weight gradient is
// one sum over sample, then time, of the gradients of the sums and [x_t, h_(t-1)], zero
// states included. Nothing is formed for the gradient of x_t where the layers below
// have no parameters, nor for that of h_0.
//
// A time is as a layer of its own: elements and columns count in [sample, unit], or
// [sample, channel], and random words come from a key of the time and gate: part
// gates t + gate, t counted from 0. The weights as operand of the input gradient are
// rounded once a step. Of formats with shared scales, the tensor of forward.operand is
// one [x_t, h_(t-1)], that of input_gradient.gradient the mini-batch at one time.
var recurrentKind = kind{
	name: "recurrent", usage: "recurrent units=16 cell=elman output=last", parse: parseRecurrent,
	build32: newRecurrent[float32], build64: newRecurrent[float64],
}

// cellKind is a row of the table of cells.
type cellKind struct {
	name    string
	gates   int
	names   []string // in front of "weight" and "bias", one a gate
	values  int      // a unit's values rounded a time, the state included
	back    int      // a unit's gradients rounded at every time
	later   int      // and at every time but the first
	build32 func(*bench[float32], int) (cell[float32], error)
	build64 func(*bench[float64], int) (cell[float64], error)
}

var cells = []*cellKind{&elmanCell, &gruCell}

func cellNames() []string {
	names := make([]string, len(cells))
	for i, c := range cells {
		names[i] = c.name
	}
	return names
}

func findCell(name string) *cellKind {
	for _, c := range cells {
		if c.name == name {
			return c
		}
	}
	return nil
}

// The states that a recurrent layer gives out.
const (
	lastState = "last"
	allStates = "all"
)

func parseRecurrent(o *options, s *Spec) error {
	if len(s.In) != 2 {
		return fmt.Errorf("recurrent needs an input of channels x length; give a plain signal one channel, 1x%d", volume(s.In))
	}
	units, err := o.number("units", 1, -1)
	if err != nil {
		return err
	}
	if s.cell, err = o.word("cell", cellNames()...); err != nil {
		return err
	}
	output, err := o.word("output", lastState, allStates)
	if err != nil {
		return err
	}
	channels, length, c := s.In[0], s.In[1], findCell(s.cell)
	if units > maxElements/length { // before anything is multiplied
		return fmt.Errorf("units=%d at %d times are more than %d values; use fewer units or a stride below", units, length, maxElements)
	}
	s.Name = fmt.Sprintf("recurrent units=%d cell=%s output=%s", units, s.cell, output)
	s.Out = []int{units}
	if output == allStates {
		s.Out = []int{units, length}
	}
	for _, name := range c.names {
		s.Params = append(s.Params,
			ParamSpec{Name: name + "weight", Shape: []int{units, channels + units}, FanIn: channels + units},
			ParamSpec{Name: name + "bias", Shape: []int{units}})
	}
	s.Points = productPoints
	s.Sums = Lengths{Forward: channels + units, InputGradient: units, WeightGradient: length, BiasGradient: length}
	s.countRecurrent(uint64(units), uint64(c.gates), c)
	return nil
}

// countRecurrent fills in the work: a product with every gate's weight a time.
func (s *Spec) countRecurrent(units, gates uint64, c *cellKind) {
	channels, length := uint64(s.In[0]), uint64(s.In[1])
	inner := gates * units * units * (length - 1) // none back to the first state
	if gates > 1 {
		inner += units * units // but back to the candidate's
	}
	forward := gates * units * (channels + units) * length
	s.MACs = Work{Forward: forward, InputGradient: gates*units*channels*length + inner, WeightGradient: forward}
	back := units * (length*uint64(c.back) + (length-1)*uint64(c.later))
	if len(s.Out) == 2 && gates == 1 {
		back += units * (length - 1) // the join with an output; gated states join anyway
	}
	lines, slopes := gates*(channels+units)*length, gates*units*length
	s.Inner = Inner{
		Values: units*length*uint64(c.values) - uint64(volume(s.Out)), Gradients: back,
		Operands: lines, Activations: lines, Slopes: slopes, Pulled: slopes, Back: int(units), BackMACs: inner,
	}
	if gates > 1 {
		s.Inner.Inputs = gates * channels * length
	}
}

// cell is how a state follows from the last one.
type cell[T quant.Element] interface {
	// step computes the state after time t from that before, nil the first; x are the
	// inputs of all times.
	step(p *pass, t int, x, before, after []T)
	// back takes the gradient of the state after time t. It returns the gradients of the
	// state before, in the order in which they join, none for the first, and, if below
	// is set, those of x_t; valid until the next call.
	back(p *pass, t int, before, after, gradient []T, below bool) (state, inputs [][]T)
	gates() []*gate[T]
}

type recurrent[T quant.Element] struct {
	place
	below, above            *edge[T]
	cell                    cell[T]
	channels, units, length int
	all                     bool
	states                  []T // [time, sample, unit]
	output, gradient, input []T // of one output, state and column, [sample, ...]
	list                    [][]T
	joined                  tensors[T]
	join                    *summer[T]
}

func newRecurrent[T quant.Element](b *bench[T]) (layer[T], error) {
	units := b.spec.Out[0]
	channels, length := b.spec.In[0], b.spec.In[1]
	l := &recurrent[T]{
		place: b.place, below: b.below, above: b.above, channels: channels, units: units, length: length, all: len(b.spec.Out) == 2,
		states: make([]T, length*b.batch*units), output: make([]T, b.batch*units), gradient: make([]T, b.batch*units),
		input: make([]T, b.batch*channels), list: make([][]T, 0, mostJoined),
	}
	var err error
	if l.cell, err = newCell(b, units); err != nil {
		return nil, err
	}
	l.join, err = newSummer[T](b.set.InputGradient.Sums, mostJoined, &l.joined)
	if err != nil {
		return nil, err
	}
	return l, nil
}

func newCell[T quant.Element](b *bench[T], units int) (cell[T], error) {
	k := findCell(b.spec.cell)
	if build, ok := any(k.build32).(func(*bench[T], int) (cell[T], error)); ok {
		return build(b, units)
	}
	return any(k.build64).(func(*bench[T], int) (cell[T], error))(b, units)
}

// state are the states after time t; nil before the first.
func (l *recurrent[T]) state(p *pass, t int) []T {
	if t < 0 {
		return nil
	}
	capacity := len(l.states) / l.length
	return l.states[t*capacity:][:p.samples*l.units]
}

func (l *recurrent[T]) forward(p *pass) {
	x, y := l.below.values(p.samples), l.above.values(p.samples)
	for t := range l.length {
		h := l.state(p, t)
		l.cell.step(p, t, x, l.state(p, t-1), h)
		if l.all {
			for i, v := range h {
				y[i*l.length+t] = v
			}
		}
	}
	if !l.all {
		copy(y, l.state(p, l.length-1))
	}
}

func (l *recurrent[T]) backward(p *pass, below bool) {
	gates := l.cell.gates()
	for _, g := range gates {
		g.weights(p)
	}
	dx := l.below.gradients(p.samples)
	var later [][]T
	for t := l.length - 1; t >= 0; t-- {
		g := l.gradientOf(p, t, later)
		state, inputs := l.cell.back(p, t, l.state(p, t-1), l.state(p, t), g, below)
		if below {
			into := l.place
			into.part = gates[0].at(t).part
			for i, v := range l.merge(into, p, l.input[:p.samples*l.channels], inputs, opInputJoin, opInputJoined) {
				dx[i*l.length+t] = v
			}
		}
		later = state
	}
	for _, g := range gates {
		g.whole.weightBackward(p)
	}
}

// gradientOf is the gradient of the state after time t.
func (l *recurrent[T]) gradientOf(p *pass, t int, later [][]T) []T {
	g := l.gradient[:p.samples*l.units]
	list := l.list[:0]
	dy := l.above.gradients(p.samples)
	switch {
	case l.all:
		out := l.output[:len(g)]
		for i := range out {
			out[i] = dy[i*l.length+t]
		}
		list = append(list, out)
	case t == l.length-1:
		list = append(list, dy)
	}
	into := l.place
	into.part = l.cell.gates()[0].at(t).part
	return l.merge(into, p, g, append(list, later...), opStateJoin, opStateJoined)
}

// merge joins tensors of one shape in turn and returns the result: dst, or a single
// one itself.
func (l *recurrent[T]) merge(pl place, p *pass, dst []T, list [][]T, join, joined operation) []T {
	if len(list) == 1 {
		return list[0]
	}
	l.joined.list = list
	l.join.product.K = len(list)
	l.join.sum(dst, 0, pl.streams(p, join), pl.counts(p, InputGradientSum))
	round(pl, p, InputGradientResult, joined, dst, dst, &pl.set.InputGradient.Result, 0)
	return dst
}

func (l *recurrent[T]) params() (all []*param[T]) {
	for _, g := range l.cell.gates() {
		all = append(all, g.whole.params()...)
	}
	return all
}

// mostJoined is the largest number of gradients that join.
const mostJoined = 5

// tensors is the right-hand operand of sums over tensors, element by element.
type tensors[T quant.Element] struct{ list [][]T }

// Pack implements quant.Columns.
func (b *tensors[T]) Pack(dst []T, width, k0, k1, j0, j1 int) {
	for k := k0; k < k1; k++ {
		row := dst[(k-k0)*width:][:width]
		clear(row[copy(row, b.list[k][j0:j1]):])
	}
}

// Padded implements quant.Columns.
func (*tensors[T]) Padded(k, j int) bool { return false }
