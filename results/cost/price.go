package cost

// pricer puts times and energies on work, and notes on its labels what it had to
// extrapolate.
type pricer struct {
	machine     *Machine
	energy      *EnergyTable
	time, power *Label
}

// activity are the figures of a list of phases; an inference has no loss.
func (p *pricer) activity(b *bound, phases []Phase, batch, cache uint64) Activity {
	var a Activity
	for _, ph := range phases {
		a.Phases = append(a.Phases, PhaseFigures{Phase: ph, Figures: idle()})
	}
	training := len(phases) > 1
	a.Total = idle()
	for i := range b.net.Layers {
		l := &b.net.Layers[i]
		a.layer(LayerFigures{Layer: i, Name: l.Name, Kind: l.Kind}, phases, func(ph Phase) Figures {
			o := b.operations(i, ph, batch)
			return p.price(b.flows(i, ph, batch, cache), &o)
		})
	}
	if training {
		a.layer(LayerFigures{Layer: -1, Name: "loss", Kind: "loss"}, phases, func(ph Phase) Figures {
			o := b.lossWork(ph, batch)
			return p.price(b.lossFlows(ph, batch), &o)
		})
	}
	return a
}

// lossWork: only the rounding of the output error is charged.
func (b *bound) lossWork(p Phase, batch uint64) operations {
	o := operations{elementwise: true}
	if p == InputGradient {
		o.draw(&b.arm.Loss, batch*b.net.Layers[len(b.net.Layers)-1].Outputs)
	}
	return o
}

// layer adds a layer's figures, phase by phase, to all sums.
func (a *Activity) layer(l LayerFigures, phases []Phase, figures func(Phase) Figures) {
	l.Total = idle()
	for p, ph := range phases {
		f := figures(ph)
		l.Phases = append(l.Phases, PhaseFigures{Phase: ph, Figures: f})
		l.Total.add(&f)
		a.Phases[p].add(&f)
	}
	a.Total.add(&l.Total)
	a.Layers = append(a.Layers, l)
}

func idle() Figures { return Figures{Time: Time{Binds: Nothing}} }

// price is the cost of moving flows and computing operations at the same time.
func (p *pricer) price(flows []flow, o *operations) Figures {
	var f Figures
	for i := range flows {
		bits := flows[i].bits()
		*f.Traffic.at(flows[i].class) += bits
		f.Bits += bits
		f.Values += flows[i].sweeps * flows[i].values
	}
	f.Multiplies = total(o.multiplies)
	f.Additions = total(o.additions)
	f.Random = o.random
	f.Time = p.roofline(f.Bits, o)
	f.Energy = p.joules(f.Bits, o)
	return f
}

// roofline is the time of a piece of work.
func (p *pricer) roofline(bits uint64, o *operations) Time {
	rate, extrapolated := 1.0, false
	slots := o.slots()
	switch {
	case slots == 0:
	case o.elementwise && p.machine.Elementwise > 0:
		rate = p.machine.Elementwise
	default:
		f := p.machine.rate(o.a, o.b, o.sum)
		if rate = f.rate; f.extrapolated != "" {
			extrapolated = true
			p.time.rule(f.extrapolated)
		}
		if o.exact {
			extrapolated = true
			p.time.rule("exact sums: at the rate of sums in " + o.sum.Name)
		}
	}
	drawing := 0.0
	if p.machine.RandomBits > 0 {
		drawing = seconds(float64(o.random), p.machine.RandomBits)
	}
	t := roof(seconds(float64(slots), rate), float64(bits)/8/p.machine.Bandwidth, drawing)
	t.Extrapolated = extrapolated
	return t
}

// joules is the energy of a piece of work.
func (p *pricer) joules(bits uint64, o *operations) Energy {
	t := p.energy
	e := Energy{
		Random: float64(o.random) * t.Random,
		Cache:  float64(bits) * t.far(),
		Memory: float64(bits) * t.dram(),
	}
	if o.random > 0 {
		e.Extrapolated = true
		p.power.rule(ruleRandom)
	}
	e.Multiply = p.charge(&e, o.multiplies, 1, func(x term) charge { return t.multiply(x.a, x.b) })
	e.Multiply += p.charge(&e, o.divisions, DivisionAsMultiplies, func(x term) charge {
		return charge{t.multiply(x.a, x.b).pj, ruleDivide}
	})
	e.Add = p.charge(&e, o.additions, 1, func(x term) charge { return t.addition(x.a) })
	e.Add += p.charge(&e, o.scales, 1, func(x term) charge { return charge{t.add(x.a).pj, ruleScale} })
	for _, x := range o.operands {
		width := x.a.BitsPerValue() + x.b.BitsPerValue()
		e.Operands += float64(float64(x.count) * (width * t.near() / t.Reuse))
	}
	e.Total = e.Multiply + e.Add + e.Random + e.Operands + e.Cache + e.Memory
	return e
}

// charge adds up the energy of operations, each as dear as times of its kind.
func (p *pricer) charge(e *Energy, terms []term, times float64, of func(term) charge) (pj float64) {
	for _, x := range terms {
		c := of(x)
		pj += float64(float64(x.count) * (c.pj * times))
		if c.extrapolated != "" {
			e.Extrapolated = true
			p.power.rule(c.extrapolated)
		}
	}
	return pj
}

// addition is add with the rule of the adder that only the model has.
func (t *EnergyTable) addition(f Format) charge {
	c := t.add(f)
	if f.Name == exactAccumulator {
		c.extrapolated = ruleExact
	}
	return c
}
