package main

// A mode is an arithmetic of a sum of products, as a list of operations a term.
type mode struct {
	name      string
	doc       string
	double    bool     // binary64 lanes
	constants []string // read from the table, in order of need of a register
	random    bool     // reads the tables R and V
	terms     bool     // and the tables TermR and TermV
	truncate  bool     // AVX2: runs under rounding toward zero
	watch     bool     // watches the greatest magnitude against Limit
	keepRight bool     // B[k, columns] in registers instead of memory operands
	careful   bool     // has the real meaning of numbers beyond the format, see careful.go
	tree      bool     // adds the products of eight terms pairwise, see tree.go
	step      func(g *tile, r, v int) chain
}

// modes are all kernels. The name is the Go function's stem.
var modes = []mode{
	{
		name: "baseline", doc: "the loop s = binary32(s + binary32(a b)), terms ascending.",
		keepRight: true,
		step: func(g *tile, r, v int) chain {
			p := g.reg()
			return join(g.multiply(p, r, v), g.plus(g.sums[r][v], p))
		},
	},
	{
		name: "fmaChain", doc: "the loop s = binary32(s + a b), terms ascending.",
		keepRight: true,
		step:      func(g *tile, r, v int) chain { return g.fuse(r, v) },
	},
	{
		name: "tree8", doc: "the pairwise sum of binary32 products of eight terms, neighbours first, each rounded.",
		tree: true,
	},
	{
		name: "rounded", doc: "the loop s = binary32(s + R(a b)), R nearest-even, terms ascending.",
		constants: []string{"Grow", "ExponentMask", "Least"},
		step: func(g *tile, r, v int) chain {
			p := g.reg()
			return join(g.multiply(p, r, v), g.nearest(p, "Least", "Grow"), g.plus(g.sums[r][v], p))
		},
	},
	{
		name: "both", doc: "the loop s = R(s + R(a b)), R nearest-even, terms ascending.",
		constants: []string{"Grow", "SumSplit", "Least", "ExponentMask"},
		step: func(g *tile, r, v int) chain {
			p, s := g.reg(), g.sums[r][v]
			return join(g.multiply(p, r, v), g.nearest(p, "Least", "Grow"), g.plus(s, p), g.split(s))
		},
	},
	{
		name: "bothScaled", doc: "the loop s = S(s + R(a b)), R and S nearest-even and no quantum of R finer than S's, terms ascending.",
		constants: []string{"Grow", "SumSplit", "Rescale", "Least", "ExponentMask"},
		step: func(g *tile, r, v int) chain {
			p, s := g.reg(), g.sums[r][v]
			return join(g.multiply(p, r, v), g.nearest(p, "Least", "Grow"), g.plusRescaled(s, p), g.split(s))
		},
	},
	{
		name: "bothCare", doc: "the loop s = S(binary32(s + R(a b))), R and S nearest-even, terms ascending.",
		constants: []string{"Grow", "SumGrow", "Rescale", "Least", "SumLeast", "ExponentMask"},
		step: func(g *tile, r, v int) chain {
			p, s := g.reg(), g.sums[r][v]
			return join(g.multiply(p, r, v), g.nearest(p, "Least", "Grow"), g.plusRescaled(s, p), g.nearest(s, "SumLeast", "SumGrow"))
		},
	},
	{
		name: "through", doc: "the loop s = R(binary32(s + a b)), R nearest-even, terms ascending.",
		constants: []string{"SumGrow", "SumLeast", "ExponentMask"},
		step: func(g *tile, r, v int) chain {
			return join(g.fuse(r, v), g.nearest(g.sums[r][v], "SumLeast", "SumGrow"))
		},
	},
	{
		name: "throughFree", doc: "the loop s = R(binary32(s + a b)), R nearest-even, no sum subnormal and inexact, terms ascending.",
		constants: []string{"SumSplit"},
		step: func(g *tile, r, v int) chain {
			return join(g.fuse(r, v), g.split(g.sums[r][v]))
		},
	},
	{
		name: "productThrough", doc: "the loop s = R(binary32(s + binary32(a b))), R nearest-even, terms ascending.",
		constants: []string{"SumGrow", "SumLeast", "ExponentMask"},
		step: func(g *tile, r, v int) chain {
			p, s := g.reg(), g.sums[r][v]
			return join(g.multiply(p, r, v), g.plus(s, p), g.nearest(s, "SumLeast", "SumGrow"))
		},
	},
	{
		name: "odd", doc: "the loop s = R(s + binary32(a b)), R nearest-even of the exact sum, terms ascending.",
		constants: []string{"SumGrow", "SumLeast", "ExponentMask", "Ones"},
		step: func(g *tile, r, v int) chain {
			p, s := g.reg(), g.sums[r][v]
			return join(g.multiply(p, r, v), g.plusOdd(s, p), g.nearest(s, "SumLeast", "SumGrow"))
		},
	},
	{
		name: "oddRounded", doc: "the loop s = S(s + R(a b)), R and S nearest-even, S of the exact sum, terms ascending.",
		constants: []string{"Grow", "SumGrow", "Rescale", "Least", "SumLeast", "ExponentMask", "Ones"},
		step: func(g *tile, r, v int) chain {
			p, s := g.reg(), g.sums[r][v]
			rescale := chain{func() { g.mul(p, p, g.constant("Rescale")) }}
			return join(g.multiply(p, r, v), g.nearest(p, "Least", "Grow"), rescale, g.plusOdd(s, p), g.nearest(s, "SumLeast", "SumGrow"))
		},
	},
	{
		name: "carefulFused", doc: "the loop s = R(binary32(s + a b)), R nearest-even with its overflow, events counted.",
		careful: true, constants: carefulConstants,
		step: func(g *tile, r, v int) chain {
			return join(g.fuse(r, v), g.roundCarefully(g.sums[r][v], sumCare))
		},
	},
	{
		name: "carefulProduct", doc: "the loop s = R(s + P(binary32(a b))), P only the overflow of products, R nearest-even with its own, events counted.",
		careful: true, constants: carefulConstants,
		step: func(g *tile, r, v int) chain {
			p, s := g.reg(), g.sums[r][v]
			return join(g.multiply(p, r, v), g.roundCarefully(p, termOverflow), g.plusCarefully(s, p), g.roundCarefully(s, sumCare))
		},
	},
	{
		name: "carefulRounded", doc: "the loop s = R(s + P(a b)), P and R nearest-even with their overflow, events counted.",
		careful: true, constants: carefulConstants,
		step: func(g *tile, r, v int) chain {
			p, s := g.reg(), g.sums[r][v]
			return join(g.multiply(p, r, v), g.roundCarefully(p, termCare), g.plusCarefully(s, p), g.roundCarefully(s, sumCare))
		},
	},
	{
		name: "fused", doc: "the loop s = R(s + a b), R nearest-even of a sum exact in binary64, terms ascending.",
		double: true, constants: []string{"SumGrow", "SumLeast", "ExponentMask"},
		step: func(g *tile, r, v int) chain {
			return join(g.fuse(r, v), g.nearest(g.sums[r][v], "SumLeast", "SumGrow"))
		},
	},
	{
		name: "fusedFree", doc: "the loop s = R(s + a b), R nearest-even of a sum exact in binary64, no sum subnormal and inexact, terms ascending.",
		double: true, constants: []string{"SumSplit"},
		step: func(g *tile, r, v int) chain {
			return join(g.fuse(r, v), g.split(g.sums[r][v]))
		},
	},
	{
		name: "stochastic", doc: "the loop s = S(binary32(s + R(a b))), R nearest-even, S stochastic without subnormals, terms ascending.",
		constants: []string{"RandomShift", "Grow", "Rescale", "Keep", "RandomMask", "Least", "ExponentMask"}, random: true,
		step: func(g *tile, r, v int) chain {
			p, u, s := g.reg(), g.reg(), g.sums[r][v]
			return join(g.mix(u, r, v), g.multiply(p, r, v), g.nearest(p, "Least", "Grow"), g.plusRescaled(s, p), g.stochastic(s, u))
		},
	},
	{
		name: "stochasticFused", doc: "the loop s = S(binary32(s + a b)), S stochastic without subnormals, terms ascending.",
		constants: []string{"RandomShift", "Keep", "RandomMask"}, random: true,
		step: func(g *tile, r, v int) chain {
			u, s := g.reg(), g.sums[r][v]
			return join(g.mix(u, r, v), g.fuse(r, v), g.stochastic(s, u))
		},
	},
	{
		name: "stochasticCare", doc: "the loop s = S(binary32(s + a b)), S stochastic, terms ascending.",
		constants: careConstants, random: true,
		step: func(g *tile, r, v int) chain {
			u, s := g.reg(), g.sums[r][v]
			return join(g.mix(u, r, v), g.fuse(r, v), g.stochasticCare(s, u))
		},
	},
	{
		name: "stochasticProductCare", doc: "the loop s = S(binary32(s + R(a b))), R nearest-even, S stochastic, terms ascending.",
		constants: append([]string{"Grow", "Rescale", "Least"}, careConstants...), random: true,
		step: func(g *tile, r, v int) chain {
			p, u, s := g.reg(), g.reg(), g.sums[r][v]
			return join(g.mix(u, r, v), g.multiply(p, r, v), g.nearest(p, "Least", "Grow"), g.plusRescaled(s, p), g.stochasticCare(s, u))
		},
	},
	{
		name: "stochasticTruncated", doc: "the loop s = S(s + a b), S stochastic of the exact sum, cut to binary32, no sum subnormal and inexact, terms ascending.",
		truncate: true, watch: true, random: true,
		constants: []string{"MagnitudeMask", "RandomShift", "RandomMask", "RandomHalf", "Keep"},
		step: func(g *tile, r, v int) chain {
			u, s := g.reg(), g.sums[r][v]
			return join(g.mix(u, r, v), g.fuseTruncated(r, v), g.watch(s), g.alignDown(u), g.carry(s, u, sumRounding))
		},
	},
	{
		name: "stochasticWide", doc: "the loop s = S(s + a b), S stochastic of the exact sum, terms ascending.",
		double: true, truncate: true, watch: true, random: true,
		constants: []string{"RandomShift", "SumLeast", "SignMask", "MagnitudeMask", "RandomMask", "RandomHalf", "Keep"},
		step: func(g *tile, r, v int) chain {
			u, s := g.reg(), g.sums[r][v]
			return join(g.mix(u, r, v), g.fuseTruncated(r, v), g.stochasticWide(s, u, sumRounding))
		},
	},
	{
		name: "stochasticProduct", doc: "the loop s = S(s + R(a b)), R nearest-even, S stochastic of a sum exact in binary64 and without subnormals, terms ascending.",
		double: true, watch: true, random: true,
		constants: []string{"RandomShift", "Grow", "Rescale", "Least", "ExponentMask", "RandomMask", "RandomHalf", "Keep", "MagnitudeMask"},
		step: func(g *tile, r, v int) chain {
			p, u, s := g.reg(), g.reg(), g.sums[r][v]
			return join(g.mix(u, r, v), g.multiply(p, r, v), g.nearest(p, "Least", "Grow"), g.plusRescaled(s, p), g.watch(s), g.align(u, sumRounding), g.carry(s, u, sumRounding))
		},
	},
	{
		name: "stochasticBoth", doc: "the loop s = S(s + R(a b)), R and S stochastic, S of the exact sum, terms ascending.",
		double: true, truncate: true, watch: true, random: true, terms: true,
		constants: []string{
			"SignMask", "MagnitudeMask", "SumLeast", "Least", "TermShift", "TermMask", "TermHalf", "TermKeep",
			"RandomShift", "RandomMask", "RandomHalf", "Keep",
		},
		step: func(g *tile, r, v int) chain {
			p, t, u, s := g.reg(), g.reg(), g.reg(), g.sums[r][v]
			return join(g.mixTerm(t, r, v), g.mix(u, r, v), g.multiply(p, r, v),
				g.stochasticWide(p, t, termRounding), g.plusTruncated(s, p), g.stochasticWide(s, u, sumRounding))
		},
	},
	{
		name: "baseline64", doc: "the loop s = binary64(s + binary64(a b)), terms ascending.",
		double: true, keepRight: true,
		step: func(g *tile, r, v int) chain {
			p := g.reg()
			return join(g.multiply(p, r, v), g.plus(g.sums[r][v], p))
		},
	},
	{
		name: "fmaChain64", doc: "the loop s = binary64(s + a b), terms ascending.",
		double: true, keepRight: true,
		step: func(g *tile, r, v int) chain { return g.fuse(r, v) },
	},
}

// heads is the number of operations at the start of a chain that read the operands
// of the term.
func (m mode) heads() int {
	switch {
	case !m.random:
		return 1
	case m.terms:
		return 5
	case m.double:
		return 3
	}
	return 2
}

var careConstants = []string{
	"RandomShift", "PreShift", "WholeShift", "ExponentMask", "SumLeast", "BaseShift",
	"Fraction", "Implicit", "RandomHalf", "Quantum", "SignMask",
}

func join(parts ...chain) chain {
	var c chain
	for _, p := range parts {
		c = append(c, p...)
	}
	return c
}
