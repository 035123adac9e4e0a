package quant

// RoundSlice writes R[p](src[i]) to dst. Element i is number first+i of the
// tensor for the random bits of d. dst and src may be the same slice. n may be nil.
func RoundSlice[D, S Element](dst []D, src []S, p *Point, d Draws, first uint64, n *Counts) {
	sameLength(len(dst), len(src))
	w := words{draws: d, on: p.Rounding.Mode == Stochastic}
	for i, x := range src {
		v, e := p.Round(Exactly(float64(x)), w.at(first+uint64(i)))
		n.Count(e)
		dst[i] = D(v)
	}
}

// ScaleSlice writes R[p](alpha src[i]), the product exact, to dst.
func ScaleSlice[D, S Element](dst []D, alpha float64, src []S, p *Point, d Draws, n *Counts) {
	sameLength(len(dst), len(src))
	w := words{draws: d, on: p.Rounding.Mode == Stochastic}
	for i, x := range src {
		v, e := p.Round(ExactProduct(alpha, float64(x)), w.at(uint64(i)))
		n.Count(e)
		dst[i] = D(v)
	}
}

// AddSlice writes R[p](a[i] + b[i]), the sum exact, to dst.
func AddSlice[D, A, B Element](dst []D, a []A, b []B, p *Point, d Draws, n *Counts) {
	sameLength(len(dst), len(a))
	sameLength(len(dst), len(b))
	w := words{draws: d, on: p.Rounding.Mode == Stochastic}
	for i := range dst {
		v, e := p.Round(Exactly(float64(a[i])).Add(Exactly(float64(b[i]))), w.at(uint64(i)))
		n.Count(e)
		dst[i] = D(v)
	}
}

// SubSlice writes R[p](a[i] - b[i]), the difference exact, to dst.
func SubSlice[D, A, B Element](dst []D, a []A, b []B, p *Point, d Draws, n *Counts) {
	sameLength(len(dst), len(a))
	sameLength(len(dst), len(b))
	w := words{draws: d, on: p.Rounding.Mode == Stochastic}
	for i := range dst {
		v, e := p.Round(Exactly(float64(a[i])).Add(Exactly(float64(b[i])).Negated()), w.at(uint64(i)))
		n.Count(e)
		dst[i] = D(v)
	}
}

// words yields the words of a stream in ascending order, four a block.
type words struct {
	draws Draws
	on    bool // words are needed at all
	valid bool
	block uint64
	four  [4]uint32
}

// at returns word n, zero when no words are needed.
func (w *words) at(n uint64) uint32 {
	if !w.on {
		return 0
	}
	if !w.valid || n/4 != w.block {
		w.valid, w.block, w.four = true, n/4, w.draws.Words(n/4)
	}
	return w.four[n%4]
}

func sameLength(a, b int) {
	if a != b {
		panic("quant: slices of different length")
	}
}
