package trainer

import "ulpine/quant"

// Error feedback: what rounding a parameter's gradient leaves is kept in a tensor of
// its own and added to the next step's gradient before that is rounded, so that
// small gradients add up until they count (F. Seide, H. Fu, J. Droppo, G. Li, D. Yu:
// 1-bit stochastic gradient descent and its application to data-parallel distributed
// training of speech DNNs, Interspeech 2014, section 3, from memory). With s the
// finished sum of weight_gradient and e the residue, at first +0:
//
//	g = R[weight_gradient.result](s + e)
//	e = R[weight_gradient.residue]((s + e) - g)
//
// s + e and (s + e) - g are exact. Both lines belong to the weight-gradient phase, but
// e takes its new value with the update: a skipped step leaves it alone. It is, as g,
// scaled by S; when S becomes S',
//
//	e = R[weight_gradient.residue](e f), f = S'/S in binary64
//
// (a power of two under the defaults), before the next step.

// storeGradient stores a parameter's gradient, finished sums s.
func (q *param[T]) storeGradient(p *pass, sums []T) {
	set := &q.set.WeightGradient
	if set.Residue == nil {
		round(q.place, p, WeightGradientResult, opWeightResult.of(q.number), q.gradient.data, sums, &set.Result, 0)
		return
	}
	add(p, q, WeightGradientResult, opWeightResult, q.gradient.data, sums, q.residue.data, &set.Result)
	q.leave(p, sums)
}

// leave computes the residue of a gradient just stored, for the update to adopt.
func (q *param[T]) leave(p *pass, sums []T) {
	point, dst, g, e := q.set.WeightGradient.Residue, q.nextResidue, q.gradient.data, q.residue.data
	if p.watch != nil {
		for i, at := range p.watch.at[:p.watch.choose(len(dst))] {
			p.watch.before[i] = (float64(sums[at]) + float64(e[at])) - float64(g[at])
		}
	}
	draws, counts := q.draws(p, opResidue), q.counts(p, WeightGradientResidue)
	x := blocks.Get().(*[combineLength]float64)
	defer blocks.Put(x)
	odd, _ := roads(point)
	for at := 0; at < len(dst); at += combineLength {
		end := min(at+combineLength, len(dst))
		if block := x[:end-at]; odd && foldLeft(block, sums[at:end], e[at:end], g[at:end]) {
			quant.RoundSlice(dst[at:end], block, point, draws, uint64(at), counts)
			continue
		}
		leaveScalar(dst[at:end], sums[at:end], e[at:end], g[at:end], point, draws, uint64(at), counts)
	}
	if p.watch != nil {
		compare(p.watch, q.layer, WeightGradientResidue, dst, point)
	}
}

// foldLeft writes (s + e) - g, rounded to odd; see fold. It reports whether binary64 can say so of all: not of infinities and NaN.
func foldLeft[T quant.Element](x []float64, s, e, g []T) bool {
	for i := range x {
		v, rest := left(float64(s[i]), float64(e[i]), float64(g[i]))
		if v-v != 0 {
			return false
		}
		x[i] = foldRest(v, rest)
	}
	return true
}

// left is (s + e) - g as the nearest binary64 number and what that leaves, which is
// rounded to odd where it is no binary64 number itself. Sums of three numbers are
// distilled: each pass replaces neighbours by their sum and its rest, from the least
// up, until the parts do not overlap (T. J. Dekker 1971, D. M. Priest 1991, from
// memory); three passes are enough for three parts. Not finite where a part is not.
func left(s, e, g float64) (v, rest float64) {
	high, middle := valueAndRest(s, e, sum)
	high, low := valueAndRest(high, g, difference)
	if !(high-high == 0 && middle-middle == 0 && low-low == 0) {
		return (s + e) - g, 0
	}
	for range 3 {
		middle, low = valueAndRest(middle, low, sum)
		high, middle = valueAndRest(high, middle, sum)
	}
	return high, foldRest(middle, low)
}

// leaveScalar is the residue by exact reals.
func leaveScalar[T quant.Element](dst, s, e, g []T, point *quant.Point, draws quant.Draws, first uint64, counts *quant.Counts) {
	for i := range dst {
		var word uint32
		if point.Rounding.Mode == quant.Stochastic {
			word = point.Rounding.Word(draws, first+uint64(i))
		}
		v, rest := left(float64(s[i]), float64(e[i]), float64(g[i]))
		r := quant.Exactly(v)
		if rest != 0 {
			r = r.Add(quant.Exactly(rest))
		}
		y, event := point.Round(r, word)
		dst[i] = T(y)
		counts.Count(event)
	}
}

// adoptResidues makes the residues of a step that was taken those of the next one.
func (e *engine[T]) adoptResidues() {
	for _, q := range e.params {
		q.residue.data, q.nextResidue = q.nextResidue, q.residue.data
	}
}

// rescaleResidues follows the loss scale from old to where it is now.
func (e *engine[T]) rescaleResidues(p *pass, old float64) {
	if e.scaler.s == old {
		return
	}
	for _, q := range e.params {
		if point := q.set.WeightGradient.Residue; point != nil && len(q.residue.data) > 0 {
			scale(p, q, WeightGradientResidue, opResidueScale, q.residue.data, e.scaler.s/old, q.residue.data, point)
		}
	}
}
