package cost

import "math/bits"

// exactAccumulator names an adder that no format has.
const exactAccumulator = "exact accumulator"

// term is a number of equal operations. A multiplication has two operand
// formats, an addition one.
type term struct {
	a, b  Format
	count uint64
}

// operations are what a phase of a layer computes.
type operations struct {
	multiplies []term
	additions  []term
	divisions  []term // and square roots
	random     uint64 // random bits drawn
	operands   []term // values that enter multipliers, read from the nearest cache
	// The pair of formats that decides the rate of the product.
	a, b, sum Format
	scales    []term // additions of block scales, beside the multiply-adds
	exact     bool   // sums without rounding, which no table of rates has
	// elementwise: no product of matrices, so no reuse in registers and the
	// machine's elementwise rate.
	elementwise bool
}

// slots is the number of multiply-adds, each of which takes one multiplication,
// one addition, or both; a division takes several.
func (o *operations) slots() uint64 {
	m, a := total(o.multiplies), total(o.additions)
	if o.elementwise {
		return m + a + DivisionAsMultiplies*total(o.divisions)
	}
	return max(m, a)
}

func total(terms []term) (n uint64) {
	for _, t := range terms {
		n += t.count
	}
	return n
}

func (o *operations) add(f Format, count uint64) {
	if count > 0 {
		o.additions = append(o.additions, term{a: f, b: f, count: count})
	}
}

func (o *operations) multiply(a, b Format, count uint64) {
	if count > 0 {
		o.multiplies = append(o.multiplies, term{a: a, b: b, count: count})
	}
}

// draw counts the random bits of so many roundings at a point.
func (o *operations) draw(p *Point, roundings uint64) {
	if p != nil {
		o.random += uint64(p.RandomBits) * roundings
	}
}

// operations are what a phase of layer i computes for a batch.
func (b *bound) operations(i int, p Phase, batch uint64) operations {
	l := &b.net.Layers[i]
	switch {
	case l.view():
	case p == Forward:
		return b.forwardWork(i, batch)
	case p == InputGradient && b.net.backwards(i):
		return b.inputWork(i, batch)
	case p == WeightGradient && l.parameters() > 0:
		return b.weightWork(i, batch)
	case p == Update && l.parameters() > 0:
		return b.updateWork(i)
	}
	return operations{elementwise: true}
}

// forwardWork: the products and their sums, the biases, the outputs' rounding.
func (b *bound) forwardWork(i int, batch uint64) operations {
	l, a := &b.net.Layers[i], &b.arm.Layers[i]
	s := b.forwardSums(i)
	o := operations{elementwise: l.additive()}
	if o.a, o.b = b.forwardOperands(i); l.Weights == 0 {
		o.a = o.b
	}
	o.sums(&s, batch*l.Work.Forward, l.Terms.Forward, l.InAxis)
	if l.Biases > 0 {
		outer := s.outer()
		biased := l.Biases * l.biasTerms(batch)
		if !l.several() {
			biased = batch * l.Outputs
		}
		o.add(s.adder(outer), biased)
		o.draw(&outer, biased)
	}
	o.draw(a.Operand, batch*l.taken())
	o.draw(&a.Activation, batch*(l.Outputs+l.Inner.Values))
	return o
}

func (b *bound) inputWork(i int, batch uint64) operations {
	l, a := &b.net.Layers[i], &b.arm.Layers[i]
	s := a.InputGradient.Sums
	s.Sum.Format = orElse(s.Sum.Format, b.grads[i])
	o := operations{elementwise: l.additive()}
	if o.a, o.b = b.inputOperands(i); l.Weights == 0 {
		o.a = o.b
	}
	products, terms := l.inputProducts(b.net.propagates(i))
	o.sums(&s, batch*products, terms, l.OutAxis)
	o.draw(again(a.InputGradient.First, &a.Weight), l.Weights)
	o.draw(a.InputGradient.Gradient, batch*l.slopes())
	results := l.Inner.Gradients
	if b.net.propagates(i) {
		results += l.Inputs
	}
	o.draw(&a.InputGradient.Result, batch*results)
	return o
}

// weightWork: the sums run over the whole batch; bias gradients are sums of
// their own, without products.
func (b *bound) weightWork(i int, batch uint64) operations {
	l, a := &b.net.Layers[i], &b.arm.Layers[i]
	s := &a.WeightGradient.Sums
	o := operations{elementwise: l.additive()}
	o.a, o.b = b.weightOperands(i)
	o.sums(s, batch*l.Work.WeightGradient, batch*l.Terms.WeightGradient, batch)
	if l.Biases > 0 {
		o.adds(s, l.Biases, l.biasTerms(batch))
	}
	o.draw(again(a.WeightGradient.First, a.Operand), batch*l.taken())
	o.draw(a.WeightGradient.Gradient, batch*l.slopes())
	o.draw(&a.WeightGradient.Result, l.parameters())
	if r := a.WeightGradient.Residue; r != nil { // sum + residue, and what its rounding leaves
		o.add(s.adder(s.outer()), 2*l.parameters())
		o.draw(r, l.parameters())
	}
	return o
}

// sums counts n products (in a pool: n terms) in sums of the given length, the
// blocks of shared scales within axis terms of it.
func (o *operations) sums(s *Sums, n, terms, axis uint64) {
	o.sum = s.adder(s.Sum)
	if n == 0 {
		return
	}
	o.products(s, n, axisOr(axis, terms))
	o.adds(s, ceilDiv(n, terms), terms)
}

// adds counts the additions of so many sums of the given length, and the random
// bits of their roundings.
func (o *operations) adds(s *Sums, count, terms uint64) {
	inner, outer := s.additions(terms)
	f := s.adder(s.Sum)
	if s.Order == Wide {
		f, o.exact = wideFormat(o.a, o.b, terms), true
	}
	o.add(f, count*inner)
	o.add(s.adder(s.outer()), count*outer)
	inner, outer = s.roundings(terms)
	o.draw(&s.Sum, count*inner)
	if outer > 0 {
		p := s.outer()
		o.draw(&p, count*outer)
	}
}

// products counts the multiplications of n products, the reads of their
// operands, and one addition of block scales for every pair of blocks.
func (o *operations) products(s *Sums, n, axis uint64) {
	if o.elementwise {
		return
	}
	o.multiply(o.a, o.b, n)
	o.operands = append(o.operands, term{a: o.a, b: o.b, count: n})
	o.draw(s.Product, n)
	if block := shorterBlock(o.a, o.b, axis); block > 0 {
		scale := Fixed("block scale", max(o.a.ScaleBits, o.b.ScaleBits, 1))
		o.scales = append(o.scales, term{a: scale, b: scale, count: ceilDiv(n, block)})
	}
}

// shorterBlock is the number of terms of a sum that share the scales of both
// operands, 0 if neither has blocks.
func shorterBlock(a, b Format, axis uint64) (block uint64) {
	for _, f := range []Format{a, b} {
		if size := min(uint64(f.Block), axis); size > 0 && (block == 0 || size < block) {
			block = size
		}
	}
	return block
}

// updateWork follows the optimizer's formula for every parameter; each of its
// operations is rounded.
func (b *bound) updateWork(i int) operations {
	l, a, opt := &b.net.Layers[i], &b.arm.Layers[i], b.opt
	n := l.parameters()
	o := operations{elementwise: true, a: a.Step.Format, b: a.Step.Format, sum: wider(a.Master.Format, a.Step.Format)}
	times := func(k int) uint64 { return n * uint64(k) }
	if b.arm.LossScaled {
		g := a.WeightGradient.Result.Format
		o.multiply(g, g, n)
	}
	if s := widest(a.States); s != nil {
		o.multiply(s.Format, s.Format, times(opt.StateMultiplies))
		o.add(s.Format, times(opt.StateAdditions))
		o.draw(s, times(opt.StateMultiplies+opt.StateAdditions))
		o.a, o.b = wider(o.a, s.Format), wider(o.a, s.Format)
	}
	step := a.Step.Format
	o.multiply(step, step, times(opt.StepMultiplies))
	o.add(step, times(opt.StepAdditions))
	if opt.Divisions > 0 {
		o.divisions = append(o.divisions, term{a: step, b: step, count: times(opt.Divisions)})
	}
	o.draw(&a.Step, times(opt.StepMultiplies+opt.StepAdditions+opt.Divisions))
	o.add(a.Master.Format, n)
	o.draw(&a.Master, n)
	if c := a.Compensation; c != nil {
		o.add(wider(c.Format, a.Master.Format), 3*n)
		o.draw(c, 3*n)
	}
	if a.separateMaster() {
		o.draw(&a.Weight, n)
	}
	return o
}

// widest is the point of the widest format, the first on a tie; nil of none.
func widest(points []Point) (w *Point) {
	for i := range points {
		if w == nil || points[i].Format.Bits > w.Format.Bits {
			w = &points[i]
		}
	}
	return w
}

// wideFormat is the fixed-point accumulator that holds a sum of products
// exactly: the span of the operands' exponents and fractions, the carries of the
// terms, and a sign (Kulisch's long accumulator; from memory).
func wideFormat(a, b Format, terms uint64) Format {
	return Fixed(exactAccumulator, span(a)+span(b)+bits.Len64(terms)+1)
}

// span is the number of places between the least and the largest bit of a
// format's values.
func span(f Format) int {
	if f.Family == Integer {
		return f.Bits
	}
	return max(1<<min(f.reach(), 15)-2, 1) + f.Fraction
}
