package cost

import (
	"fmt"
)

// Point is what a rounding point costs: the bits of its format, and the random
// bits that one rounding draws.
type Point struct {
	Format     Format `json:"format"`
	RandomBits int    `json:"random_bits,omitempty"` // 0: not stochastic
}

// Order is the order in which the terms of a sum are added.
type Order string

// The orders. The zero value is sequential.
const (
	Sequential  Order = "sequential"
	Chunk       Order = "chunk"
	Pairwise    Order = "pairwise"
	Lanes       Order = "lanes"
	Wide        Order = "wide"        // exact, rounded once
	Compensated Order = "compensated" // Kahan: four additions a term
)

// Sums says how a product's sums are formed.
type Sums struct {
	Product *Point `json:"product,omitempty"` // nil: the product is not rounded
	Sum     Point  `json:"sum"`
	Outer   *Point `json:"outer,omitempty"` // nil: as Sum
	Order   Order  `json:"order,omitempty"`
	K       int    `json:"k,omitempty"` // chunk length, number of lanes
	// Through32: the adder rounds to binary32 first, so it is charged as one.
	Through32 bool `json:"through32,omitempty"`
}

// Backward is the arithmetic of one of a layer's gradient products. First is the
// format that the weight (input gradient) or activation (weight gradient) is
// converted to on its way from where it is stored; nil: as in the forward product.
// Gradient is the same of the gradient; nil: used as it is.
type Backward struct {
	First    *Point `json:"first,omitempty"`
	Gradient *Point `json:"gradient,omitempty"`
	Sums     Sums   `json:"sums"`
	Result   Point  `json:"result"`
	// Residue, of the weight gradient only, is the format of what rounding to Result
	// leaves, kept for the next step's gradient: one more tensor, read and written, and
	// two more additions a parameter; nil: it is lost.
	Residue *Point `json:"residue,omitempty"`
}

// Assignment is the arithmetic of one layer. A point left zero is one the layer
// does not have: without an activation point it hands on its input's format,
// without an input-gradient result that of the gradient above.
type Assignment struct {
	Weight     Point `json:"weight"`
	Activation Point `json:"activation"`
	// Operand is what the layer's input is converted to on its way into the forward
	// product; nil: it is used as it is stored.
	Operand        *Point   `json:"operand,omitempty"`
	Forward        Sums     `json:"forward"`
	InputGradient  Backward `json:"input_gradient"`
	WeightGradient Backward `json:"weight_gradient"`
	States         []Point  `json:"states,omitempty"` // one a state of the optimizer
	Step           Point    `json:"step"`
	Master         Point    `json:"master"`
	// Compensation is the format of the carried error of a Kahan-compensated
	// update: one more tensor and three more additions; nil: plain.
	Compensation *Point `json:"compensation,omitempty"`
}

// Arm is an assignment of arithmetic to a whole network.
type Arm struct {
	Name  string `json:"name"`
	Slug  string `json:"slug"`
	Input Point  `json:"input"`
	Loss  Point  `json:"loss"` // the output error
	// Channels are the points of the input's channels, which have as many values each,
	// where they differ; Input is then the widest, what multipliers must hold.
	Channels []Point      `json:"channels,omitempty"`
	Layers   []Assignment `json:"layers"`
	// LossScaled: gradients are divided by the loss scale before the update, one
	// multiplication a parameter.
	LossScaled bool `json:"loss_scaled,omitempty"`
}

// Uniform is the arm in which every point has one format and rounds to nearest,
// products rounded and sums sequential.
func Uniform(n *Network, o *Optimizer, name string, f Format) Arm {
	p := Point{Format: f}
	sums := Sums{Product: &p, Sum: p, Order: Sequential}
	back := Backward{Sums: sums, Result: p}
	arm := Arm{Name: name, Slug: name, Input: p, Loss: p, Layers: make([]Assignment, len(n.Layers))}
	for i := range arm.Layers {
		l := &n.Layers[i]
		a := &arm.Layers[i]
		switch {
		case l.parameters() > 0:
			*a = Assignment{
				Weight: p, Activation: p, Forward: sums, InputGradient: back, WeightGradient: back,
				Step: p, Master: p,
			}
			for range o.States {
				a.States = append(a.States, p)
			}
		case !l.view():
			a.Activation, a.Forward, a.InputGradient = p, sums, back
		}
	}
	return arm
}

// separateMaster reports whether the master copy is a tensor of its own.
func (a *Assignment) separateMaster() bool { return !a.Master.Format.same(a.Weight.Format) }

// outer is where chunks and biases are added.
func (s *Sums) outer() Point {
	if s.Outer != nil {
		return *s.Outer
	}
	return s.Sum
}

// adder is the format whose adder a point of the sum needs.
func (s *Sums) adder(p Point) Format {
	if s.Through32 {
		return FP32
	}
	return p.Format
}

// additions is the number of additions of one sum of terms: in its inner format,
// and of finished chunks, tree nodes of lanes included, in the outer one.
func (s *Sums) additions(terms uint64) (inner, outer uint64) {
	k := uint64(max(s.K, 1))
	switch s.Order {
	case Pairwise:
		return terms - 1, 0
	case Chunk:
		return terms, ceilDiv(terms, k)
	case Lanes:
		return terms + k - 1, 0
	case Compensated:
		return 4 * terms, 0
	}
	return terms, 0 // sequential starts at +0: as many additions as terms
}

// roundings is the number of roundings of one sum; an exact sum has one.
func (s *Sums) roundings(terms uint64) (inner, outer uint64) {
	if s.Order == Wide {
		return 1, 0
	}
	return s.additions(terms)
}

// maxRandom is the longest random word a rounding may draw.
const maxRandom = 64

func (p *Point) check(at string, needed bool, e *fieldErrors) {
	if p.Format.IsZero() {
		if needed {
			e.add(at, "the rounding point has no format", "fill in what the plan resolved")
		}
		return
	}
	p.Format.check(at+".format", e)
	if p.RandomBits < 0 || p.RandomBits > maxRandom {
		e.add(at+".random_bits", fmt.Sprintf("%d random bits a rounding", p.RandomBits), fmt.Sprintf("use 0 to %d", maxRandom))
	}
}

func (s *Sums) check(at string, needed bool, e *fieldErrors) {
	s.Sum.check(at+".sum", needed, e)
	if s.Product != nil {
		s.Product.check(at+".product", true, e)
	}
	if s.Outer != nil {
		s.Outer.check(at+".outer", true, e)
	}
	switch s.Order {
	case "", Sequential, Pairwise, Wide, Compensated:
	case Chunk, Lanes:
		if s.K < 1 {
			e.add(at+".k", fmt.Sprintf("%s(%d)", s.Order, s.K), "use at least 1")
		}
	default:
		e.add(at+".order", fmt.Sprintf("%q is no order of a sum", s.Order),
			"use sequential, chunk, pairwise, lanes, wide or compensated")
	}
}

func (b *Backward) check(at string, needed bool, e *fieldErrors) {
	if b.First != nil {
		b.First.check(at+".first", true, e)
	}
	if b.Gradient != nil {
		b.Gradient.check(at+".gradient", true, e)
	}
	b.Sums.check(at+".sums", needed, e)
	b.Result.check(at+".result", needed, e)
	if b.Residue != nil {
		b.Residue.check(at+".residue", true, e)
	}
}

func (arm *Arm) check(at string, n *Network, o *Optimizer, e *fieldErrors) {
	if arm.Name == "" {
		e.add(at+".name", "the arm has no name", "name it as the plan does")
	}
	arm.Input.check(at+".input", true, e)
	arm.Loss.check(at+".loss", true, e)
	for i := range arm.Channels {
		arm.Channels[i].check(fmt.Sprintf("%s.channels[%d]", at, i+1), true, e)
	}
	if len(arm.Layers) != len(n.Layers) {
		e.add(at+".layers", fmt.Sprintf("arithmetic for %d layers, the network has %d", len(arm.Layers), len(n.Layers)),
			"give one entry a layer")
		return
	}
	for i := range arm.Layers {
		arm.Layers[i].check(fmt.Sprintf("%s.layers[%d]", at, i+1), n, i, o, e)
	}
}

func (a *Assignment) check(at string, n *Network, i int, o *Optimizer, e *fieldErrors) {
	l := &n.Layers[i]
	trained := l.parameters() > 0
	a.Weight.check(at+".weight", trained, e)
	a.Activation.check(at+".activation", trained, e)
	if a.Operand != nil {
		a.Operand.check(at+".operand", true, e)
	}
	a.Forward.check(at+".forward", l.Weights > 0 && l.Work.Forward > 0, e)
	a.InputGradient.check(at+".input_gradient", l.Weights > 0 && l.Work.InputGradient > 0 && n.backwards(i), e)
	a.WeightGradient.check(at+".weight_gradient", trained, e)
	a.Step.check(at+".step", trained, e)
	a.Master.check(at+".master", trained, e)
	if trained && len(a.States) != len(o.States) {
		e.add(at+".states", fmt.Sprintf("%d formats for the %d states of %s", len(a.States), len(o.States), o.Name),
			"give one a state")
	}
	for s := range a.States {
		a.States[s].check(fmt.Sprintf("%s.states[%d]", at, s+1), true, e)
	}
	if a.Compensation != nil {
		a.Compensation.check(at+".compensation", true, e)
	}
}
