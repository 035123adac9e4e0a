package main

// A shape is one kernel of a mode. The numbers of wide shapes were measured on one AMD
// Zen 5 core (2026-12), every combination that fits the registers against every other.
// Narrow panels are the last few columns of a product, or all of a narrow one; there
// the longer modes have fewer rows and are not overlapped, for less code.
type shape struct {
	rows    int // rows of the tile; vectors wide as its target says
	kept    int // AVX2: constants kept in registers, the first of the mode's list
	spacing int // slots between dependent operations, see schedule
}

// target is one instruction set.
type target struct {
	name           string // of the set, and in function and file names
	zmm            bool
	single, double columns
	shapes         map[string][2]shape // by mode: wide, narrow
}

// columns are the vectors of a wide panel; a narrow one has a single vector.
type columns struct{ wide int }

// vectors returns the vectors of a panel for a mode.
func (t target) vectors(m mode, narrow bool) int {
	switch {
	case narrow:
		return 1
	case m.double:
		return t.double.wide
	}
	return t.single.wide
}

var targets = []target{
	{
		name: "AVX2", single: columns{3}, double: columns{3},
		shapes: map[string][2]shape{
			"baseline":              {{2, 0, 10}, {8, 0, 6}},
			"fmaChain":              {{4, 0, 6}, {8, 0, 3}},
			"tree8":                 {{4, 0, 0}, {4, 0, 0}},
			"rounded":               {{2, 3, 4}, {8, 3, 2}},
			"both":                  {{2, 2, 5}, {8, 3, 4}},
			"bothScaled":            {{2, 3, 5}, {8, 3, 4}},
			"bothCare":              {{2, 2, 6}, {4, 5, 0}},
			"through":               {{4, 1, 2}, {8, 3, 6}},
			"throughFree":           {{4, 1, 4}, {8, 1, 1}},
			"productThrough":        {{4, 1, 2}, {4, 3, 0}},
			"odd":                   {{2, 0, 4}, {4, 1, 0}},
			"oddRounded":            {{2, 1, 4}, {4, 1, 0}},
			"stochastic":            {{2, 4, 2}, {8, 5, 1}},
			"stochasticFused":       {{2, 3, 5}, {8, 3, 3}},
			"stochasticTruncated":   {{2, 3, 3}, {4, 3, 0}},
			"stochasticCare":        {{2, 4, 1}, {4, 4, 0}},
			"stochasticProductCare": {{2, 2, 2}, {4, 1, 0}},
			"carefulFused":          {{}, {2, 0, 0}},
			"carefulProduct":        {{}, {2, 0, 0}},
			"carefulRounded":        {{}, {2, 0, 0}},
			"baseline64":            {{2, 0, 5}, {8, 0, 2}},
			"fmaChain64":            {{4, 0, 1}, {8, 0, 10}},
			"fused":                 {{4, 1, 1}, {8, 3, 6}},
			"fusedFree":             {{4, 1, 4}, {8, 1, 5}},
			"stochasticWide":        {{2, 3, 2}, {4, 3, 0}},
			"stochasticProduct":     {{2, 3, 2}, {4, 4, 0}},
			"stochasticBoth":        {{2, 2, 1}, {4, 2, 0}},
		},
	},
	{
		name: "AVX512", zmm: true, single: columns{2}, double: columns{2},
		shapes: map[string][2]shape{
			"baseline":              {{8, all, 6}, {8, all, 8}},
			"fmaChain":              {{8, all, 6}, {8, all, 3}},
			"tree8":                 {{4, 0, 0}, {8, 0, 0}},
			"rounded":               {{4, all, 8}, {8, all, 8}},
			"both":                  {{4, all, 8}, {8, all, 8}},
			"bothScaled":            {{4, all, 8}, {8, all, 8}},
			"bothCare":              {{4, all, 8}, {4, all, 0}},
			"through":               {{8, all, 12}, {8, all, 8}},
			"throughFree":           {{8, all, 12}, {8, all, 1}},
			"productThrough":        {{8, all, 10}, {4, all, 0}},
			"odd":                   {{8, all, 8}, {4, all, 0}},
			"oddRounded":            {{4, all, 8}, {4, all, 0}},
			"stochastic":            {{4, all, 5}, {8, all, 6}},
			"stochasticFused":       {{8, all, 5}, {8, all, 2}},
			"stochasticTruncated":   {{8, all, 5}, {4, all, 0}},
			"stochasticCare":        {{4, all, 2}, {4, all, 0}},
			"stochasticProductCare": {{4, all, 2}, {4, all, 0}},
			"carefulFused":          {{}, {4, all, 0}},
			"carefulProduct":        {{}, {4, all, 0}},
			"carefulRounded":        {{}, {4, all, 0}},
			"baseline64":            {{8, all, 6}, {8, all, 2}},
			"fmaChain64":            {{8, all, 8}, {8, all, 5}},
			"fused":                 {{8, all, 12}, {8, all, 8}},
			"fusedFree":             {{8, all, 12}, {8, all, 5}},
			"stochasticWide":        {{4, all, 5}, {4, all, 0}},
			"stochasticProduct":     {{4, all, 6}, {4, all, 0}},
			"stochasticBoth":        {{4, all, 3}, {4, all, 0}},
		},
	},
}

// all constants stay in registers.
const all = 99

// tails returns the main shape and the shapes for the rows that it leaves over. Tails
// are not overlapped, which halves their size.
func (s shape) tails(narrow bool) []shape {
	if s.rows == 0 {
		return nil // the mode has none of this kind
	}
	list := []shape{s}
	if s.rows == 8 && !narrow {
		list = append(list, shape{4, s.kept, 0})
	}
	if s.rows > 2 {
		list = append(list, shape{2, s.kept, 0})
	}
	return list
}
