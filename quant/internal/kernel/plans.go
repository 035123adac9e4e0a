package kernel

// supported reports whether the sequences of the kernels can round to the grid: they
// are proved, or tested for every significand, for 1 to 10 fraction bits, and scaled
// values must stay within binary32.
func (g Grid) supported() bool {
	return g.Fraction >= 1 && g.Fraction <= 10 && g.quantum() >= -149 && g.top() <= 127 &&
		g.MinExponent <= g.top() && single.nearestScale(g) <= 126 && single.carryScale(g) <= 126
}

// supported reports whether the sum has kernels.
func (s Sum) supported() bool {
	switch s.Kind {
	case NativeSum:
		return true
	case NearestSum:
		return s.Grid.supported()
	default:
		return s.Grid.supported() && s.Bits >= 1 && s.Bits <= 16
	}
}

// newPlans prepares the ways to add terms of a's products in the sum s.
func newPlans(set *Set, a *Arithmetic, s Sum) *plans {
	p := &plans{arithmetic: a, sum: s, unfused: set.unfused}
	switch s.Kind {
	case NativeSum:
		p.native = nativePlan(a)
		if p.unfused && a.Product == ExactProduct {
			p.apart = nativePlan(&Arithmetic{Product: NativeProduct})
		}
	case NearestSum:
		p.planNearest(a)
	case StochasticSum:
		p.planStochastic(a)
	}
	return p
}

func nativePlan(a *Arithmetic) *plan {
	n := &plan{mode: fmaChain, c: single.masks()}
	switch a.Product {
	case NativeProduct:
		n.mode = baseline
	case RoundedProduct:
		// The sums keep the scale of the products: they stay clear of binary32's
		// subnormals unscaled too, and those that leave its range are handed back.
		n.mode = rounded
		n.scale = single.nearestScale(a.Grid)
		n.c.product(single, a.Grid, n.scale, n.scale)
		n.c.Scale, n.c.Unscale = single.power(1, n.scale), single.power(1, -n.scale)
	}
	return n
}

func (p *plans) planNearest(a *Arithmetic) {
	g := p.sum.Grid
	scale := single.nearestScale(g)
	make32 := func(m mode) *plan {
		n := &plan{mode: m, scale: scale, c: single.masks()}
		n.c.nearest(single, g, scale)
		return n
	}
	if a.Product == RoundedProduct {
		n := make32(bothScaled)
		n.scale = single.nearestScale(a.Grid)
		n.c.product(single, a.Grid, n.scale, scale)
		switch {
		case !p.sum.Through && a.Grid.Fraction > g.Fraction:
			n.mode = oddRounded
		case a.Grid.quantum() < g.quantum():
			n.mode = bothCare
		case n.scale == scale:
			n.mode = both
		}
		p.rounded = n
		return
	}
	p.free, p.care, p.product, p.odd = make32(throughFree), make32(through), make32(productThrough), make32(odd)
	make64 := func(m mode) *plan {
		s := double.nearestScale(g)
		n := &plan{double: true, mode: m, scale: s, c: double.masks()}
		n.c.nearest(double, g, s)
		return n
	}
	p.fused, p.fusedFree = make64(fused), make64(fusedFree)
}

func (p *plans) planStochastic(a *Arithmetic) {
	s := p.sum
	scale := single.carryScale(s.Grid)
	spare := single.fraction - s.Grid.Fraction
	productFree := a.Product != RoundedProduct || a.Grid.quantum() >= s.Grid.quantum()
	carries := spare <= 16 && (!s.Centred || s.Bits >= spare)
	switch {
	case !s.Through:
		p.planWide(a, productFree)
	case a.Product == RoundedProduct:
		p.planStochasticProduct(a, scale, carries && productFree)
	default:
		if carries {
			p.random = &plan{mode: stochasticFused, scale: scale, c: single.masks()}
			p.random.c.carry(single, s, scale)
		}
		p.randomCare = &plan{mode: stochasticCare, scale: scale, c: single.masks()}
		p.randomCare.c.fixed(s, scale)
	}
}

// planStochasticProduct chooses between the carry, free of subnormals where no
// product is finer than the sum's least value, and fixed point.
func (p *plans) planStochasticProduct(a *Arithmetic, sumScale int, carries bool) {
	n := &plan{scale: single.nearestScale(a.Grid), c: single.masks()}
	if carries {
		n.mode = stochastic
		n.c.carry(single, p.sum, sumScale)
	} else {
		n.mode = stochasticProductCare
		n.c.fixed(p.sum, sumScale)
	}
	n.c.product(single, a.Grid, n.scale, sumScale)
	p.rounded = n
}

// planWide: sums in binary64 are not scaled, their magnitude is watched. Products
// are, to find their overflow.
func (p *plans) planWide(a *Arithmetic, productFree bool) {
	n := &plan{double: true, mode: stochasticWide, c: double.masks()}
	n.c.carry(double, p.sum, 0)
	switch {
	case a.Product < RoundedProduct:
		spare := single.fraction - p.sum.Grid.Fraction
		if p.sum.Bits < spare || p.sum.Bits == spare && !p.sum.Centred {
			p.truncated = &plan{mode: stochasticTruncated, c: single.masks()}
			p.truncated.c.cut(p.sum)
		}
	case a.Product == RandomProduct:
		n.mode = stochasticBoth
		n.c.carryTerms(a)
	case a.Product == RoundedProduct && !productFree:
		return
	case a.Product == RoundedProduct:
		n.mode = stochasticProduct
		n.scale = double.nearestScale(a.Grid)
		n.c.product(double, a.Grid, n.scale, 0)
	}
	p.wide = n
}
