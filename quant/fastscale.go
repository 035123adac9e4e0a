package quant

import "math"

// lateScale multiplies the sums that the kernels finished by the factors of their rows
// and adds the biases. It serves roundings to nearest-even, which draw nothing.
type lateScale struct {
	sum, outer quick
	x          []float64 // a row
}

// newLateScale returns the late scaling of acc, nil where there is none.
func newLateScale(acc Accumulate) *lateScale {
	l := &lateScale{sum: newQuick(&acc.Sum)}
	l.outer = l.sum
	if acc.Outer != nil {
		l.outer = newQuick(acc.Outer)
	}
	near := func(q *quick) bool { return q.kind == quickNearest || q.kind == quickNative32 }
	if acc.Through32 || !near(&l.sum) || !near(&l.outer) {
		return nil
	}
	return l
}

// finish replaces the sums of row i by R[outer](R[sum](scale[i] sum) + bias[i]).
func (l *lateScale) finish(p *Product[float32], scale []float64, bias []float32, sums *Counts) {
	var own Counts
	for i := range p.I {
		row := p.C[i*p.J+p.from : i*p.J+p.to]
		l.x = grown(l.x, len(row))
		l.scaleRow(row, scale[i], &own)
		if bias != nil {
			l.addRow(row, float64(bias[i]), &own)
		}
	}
	if sums != nil {
		own.Underflow = 0 // not counted inside sums
		sums.Add(own)
	}
}

// scaleRow is engine.scale. Adding +0 makes zeros positive.
func (l *lateScale) scaleRow(row []float32, factor float64, n *Counts) {
	if scaleBlock(l.x, factor, row, &l.sum) && l.sum.block(l.x, nil, 0, n) {
		for j, v := range l.x {
			row[j] = float32(v) + 0
		}
		return
	}
	for j, v := range row {
		row[j] = roundLate(l.sum.point, ExactProduct(factor, float64(v)), n)
	}
}

// addRow is engine.addBias.
func (l *lateScale) addRow(row []float32, bias float64, n *Counts) {
	regular := true
	for j, s := range row {
		v := float64(s) + bias
		regular = regular && math.Abs(v) <= math.MaxFloat64
		l.x[j] = oddFold(v, twoSumRest(v, float64(s), bias))
	}
	if regular && l.outer.block(l.x, nil, 0, n) {
		for j, v := range l.x {
			row[j] = float32(v) + 0
		}
		return
	}
	for j, s := range row {
		row[j] = roundLate(l.outer.point, Exactly(float64(s)).Add(Exactly(bias)), n)
	}
}

// roundLate rounds one exact real, zero as +0.
func roundLate(p *Point, x Real, n *Counts) float32 {
	v, e := p.Round(x, 0)
	n.Count(e)
	return float32(v) + 0
}
