package report

import (
	"cmp"
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"

	"ulpine/results"
	"ulpine/results/report/draw"
)

// front draws the metric against bits per value: every arm its verdict's mark
// with an upright interval, and the arms that none beats in both as steps.
func front(v *view, width float64) []*draw.Figure {
	arms := v.scored()
	if len(arms) == 0 {
		return nil
	}
	names := 214.0 // pixels at the right edge for names
	if width < 600 {
		names = 128
	}
	height := math.Max(290, 15*float64(min(len(arms), namedArms+8))+20)
	f := &draw.Figure{
		Title: plain(v.Metric) + " against bits per value", Desc: v.describeFront(arms),
		W: width, H: height + 58,
	}
	p := frame{x0: 52, y0: 14, x1: width - names, y1: 14 + height}
	p.x, p.y = bitScale(arms, p), v.scoreScale(arms, p)
	p.grid(&f.Group, v.scoreTick)
	bitAxis(&f.Group, p)
	f.Group.Text((p.x0+p.x1)/2, p.y1+32, "mean bits of a stored value", draw.Type{Size: 10.5, Anchor: draw.Middle})
	set := pareto(v, arms)
	drawSteps(&f.Group, p, set)
	v.frontPoints(&f.Group, p, arms, set, width)
	return []*draw.Figure{f}
}

// scored are the arms that have a score and a width.
func (v *view) scored() []*armView {
	var out []*armView
	for _, a := range v.arms {
		if a.Score.N > 0 && a.Bits > 0 && !math.IsInf(a.Bits, 0) {
			out = append(out, a)
		}
	}
	return out
}

// describeFront tells the front in words.
func (v *view) describeFront(arms []*armView) string {
	var b strings.Builder
	for _, a := range arms {
		fmt.Fprintf(&b, "%s: %s bits, %s. ", a.Label(), bits(a.Bits), v.scoreLine(a.Score))
	}
	return strings.TrimSpace(b.String())
}

// scoreLine spells a mean of the metric with interval and n.
func (v *view) scoreLine(e estimate) string {
	if e.N == 0 {
		return "no score"
	}
	iv := "no interval"
	if !math.IsNaN(e.Low) {
		iv = "[" + v.words.value(e.Low) + ", " + v.words.value(e.High) + "]"
	}
	return fmt.Sprintf("%s %s, n = %d", v.words.value(e.Mean), iv, e.N)
}

// bitScale leaves at least one bit of room on either side.
func bitScale(arms []*armView, p frame) draw.Linear {
	lo, hi := math.Inf(1), 0.0
	for _, a := range arms {
		lo, hi = math.Min(lo, a.Bits), math.Max(hi, a.Bits)
	}
	pad := math.Max(1, (hi-lo)*0.08)
	return draw.Linear{Lo: math.Max(0, lo-pad), Hi: hi + pad, P0: p.x0, P1: p.x1}
}

// bitAxis draws the axis of bits below the frame.
func bitAxis(g *draw.Group, p frame) {
	g.Line(p.x0, p.y1, p.x1, p.y1, draw.Line(draw.Ink, 1))
	for _, t := range p.x.Ticks(max(2, int((p.x1-p.x0)/50))) {
		x := p.x.At(t)
		g.Line(x, p.y1, x, p.y1+4, draw.Line(draw.Ink, 1))
		g.Text(x, p.y1+16, draw.TickLabel(t), draw.Type{Size: 10.5, Anchor: draw.Middle, Role: draw.Soft})
	}
}

// frontBounds are the ends of the interval drawn at an arm: that of its paired
// difference, laid around its mean. The interval of the mean by itself would
// hold what all arms share, easy and hard replicates, and hide the differences.
// The baseline, which has no difference, shows its own.
func (v *view) frontBounds(a *armView) (low, high float64) {
	c := a.Comparison
	switch {
	case a == v.baseline:
		return a.Score.Low, a.Score.High
	case c == nil:
		return math.NaN(), math.NaN()
	case v.words.metric.Higher:
		return a.Score.Mean + (c.Low - c.Mean), a.Score.Mean + (c.High - c.Mean)
	}
	// Less is better: a gain lowers the score.
	return a.Score.Mean - (c.High - c.Mean), a.Score.Mean - (c.Low - c.Mean)
}

// differenceLine spells an arm's difference to the baseline with interval and n.
func (v *view) differenceLine(a *armView) string {
	c := a.Comparison
	if c == nil {
		return missing
	}
	return fmt.Sprintf("%s%s %s, n = %d", v.words.diff(c.Mean), v.words.unit(), v.words.interval(c.Low, c.High), c.N)
}

// shortfall spreads shares of one by the logarithm of what is missing to one,
// so that 99 and 98 % are as far apart as 80 and 60 %.
type shortfall struct{ log draw.Log }

// At implements draw.Scale.
func (s shortfall) At(v float64) float64 {
	return s.log.At(math.Max(s.log.Lo, math.Min(s.log.Hi, 1-v)))
}

// Ticks implements draw.Scale.
func (s shortfall) Ticks(n int) []float64 {
	t := s.log.Ticks(n)
	for i := range t {
		t[i] = 1 - t[i]
	}
	return t
}

// scoreScale puts better scores higher.
func (v *view) scoreScale(arms []*armView, p frame) draw.Scale {
	lo, hi := math.Inf(1), math.Inf(-1)
	for _, a := range arms {
		low, high := v.frontBounds(a)
		for _, x := range []float64{low, a.Score.Mean, high} {
			if !math.IsNaN(x) && !math.IsInf(x, 0) {
				lo, hi = math.Min(lo, x), math.Max(hi, x)
			}
		}
	}
	if v.words.percent {
		// A perfect score lies at no finite place: five in ten thousand is the
		// least shortfall shown.
		least, most := math.Max(1-hi, 5e-4), math.Max(1-lo, 1e-3)
		if most < least*1.15 {
			least, most = least/1.08, most*1.08
		}
		return shortfall{draw.Log{Lo: least / 1.08, Hi: math.Min(1, most*1.08), P0: p.y0, P1: p.y1}}
	}
	if lo == hi { // one score, or equal ones
		lo, hi = lo-math.Abs(lo)*0.1-1e-9, hi+math.Abs(hi)*0.1+1e-9
	}
	s := draw.Linear{Lo: lo - (hi-lo)*0.06, Hi: hi + (hi-lo)*0.06, P0: p.y1, P1: p.y0}
	if !v.words.metric.Higher { // a loss: low is better, and better is up
		s.P0, s.P1 = s.P1, s.P0
	}
	return s
}

// scoreTick spells a tick of the axis of scores; the rounding removes what
// binary fractions leave behind.
func (v *view) scoreTick(t float64) string {
	if v.words.percent {
		return draw.TickLabel(math.Round(1e6*t)/1e4) + " %"
	}
	return draw.TickLabel(t)
}

// pareto are the arms that no other arm equals or beats in both bits and mean
// score, by ascending bits. Arms that diverged are not in it.
func pareto(v *view, arms []*armView) []*armView {
	byBits := slices.Clone(arms)
	slices.SortStableFunc(byBits, func(a, b *armView) int {
		return cmp.Or(cmp.Compare(a.Bits, b.Bits), cmp.Compare(v.gain(b), v.gain(a)))
	})
	var out []*armView
	best := math.Inf(-1)
	for _, a := range byBits {
		k, ok := a.kind()
		if g := v.gain(a); g > best && (!ok || k != results.Diverged) {
			best = g
			out = append(out, a)
		}
	}
	return out
}

// drawSteps draws what is reached with at most so many bits.
func drawSteps(g *draw.Group, p frame, set []*armView) {
	var pts []draw.Point
	for i, a := range set {
		x, y := p.x.At(a.Bits), p.y.At(a.Score.Mean)
		if i > 0 {
			pts = append(pts, draw.Point{X: x, Y: pts[len(pts)-1].Y})
		} else { // with fewer bits than any arm, nothing is reached: the steps rise from the axis
			pts = append(pts, draw.Point{X: x, Y: p.y1})
		}
		pts = append(pts, draw.Point{X: x, Y: y})
	}
	if len(pts) > 0 {
		pts = append(pts, draw.Point{X: p.x1, Y: pts[len(pts)-1].Y})
	}
	g.Titled("Pareto set: no arm needs fewer bits and scores better").Polyline(pts, draw.Line(draw.Ink, 1.5))
}

// namedArms is the number of arms up to which each has its name at the edge of
// the front. With more, the leaders to the names would hide the marks: then only
// the Pareto set is named there, and the others carry their numbers.
const namedArms = 16

// frontPoints draws the arms' marks, intervals and names.
func (v *view) frontPoints(g *draw.Group, p frame, arms, set []*armView, width float64) {
	shift := v.sideways(arms)
	places := make([]draw.Point, len(arms))
	var named []int
	for i, a := range arms {
		places[i] = draw.Point{X: p.x.At(a.Bits) + shift[i], Y: p.y.At(a.Score.Mean)}
		if len(arms) <= namedArms || slices.Contains(set, a) {
			named = append(named, i)
		}
	}
	groups := make([]*draw.Group, len(arms))
	for i, a := range arms {
		groups[i] = g.Sub("arm", draw.Attr{Name: "arm", Value: a.Slug})
	}
	// Leaders first, so that they pass under every mark.
	want := make([]float64, len(named))
	for k, i := range named {
		want[k] = places[i].Y
	}
	for k, y := range draw.Spread(want, 14.5, p.y0+4, p.y1-4) {
		a, at, s := arms[named[k]], places[named[k]], groups[named[k]]
		s.Polyline([]draw.Point{at, {X: p.x1 + 2, Y: at.Y}, {X: p.x1 + 12, Y: y}, {X: p.x1 + 15, Y: y}}, draw.Line(draw.Soft, 0.7).With(0.55))
		s.Text(p.x1+18, y+3.8, a.Label(), draw.Type{Size: 11, Bold: a.Number == 0, Max: width - p.x1 - 19})
	}
	for i, a := range arms {
		v.frontPoint(groups[i], p, a, places[i])
	}
	if len(arms) > namedArms {
		numberPoints(groups, p, arms, places)
	}
}

// frontPoint draws one arm's interval and mark.
func (v *view) frontPoint(g *draw.Group, p frame, a *armView, at draw.Point) {
	t := g.Titled(a.Label() + ": " + v.scoreLine(a.Score) + "; difference " + v.differenceLine(a) + "; " + bits(a.Bits) + " bits")
	low, high := v.frontBounds(a)
	lo, hi, role := p.y.At(low), p.y.At(high), draw.Arm
	if a == v.baseline {
		role = draw.Base
	}
	t.Line(at.X, lo, at.X, hi, draw.Line(role, 2.4))
	for _, e := range []float64{lo, hi} {
		t.Line(at.X-3.5, e, at.X+3.5, e, draw.Line(role, 1.4))
	}
	if k, ok := a.kind(); ok {
		drawMark(t, at.X, at.Y, 4.8, k)
	} else { // the baseline has no verdict
		t.Rect(at.X-4, at.Y-4, 8, 8, draw.Style{Fill: draw.Base, Line: draw.Ink, Width: 1.2})
	}
}

// numberPoints writes the arms' numbers beside their marks, on the first side
// that is free; where none is, the mark's title has to do.
func numberPoints(groups []*draw.Group, p frame, arms []*armView, places []draw.Point) {
	var taken []draw.Box
	for _, q := range places {
		taken = append(taken, draw.Box{X0: q.X - 5, Y0: q.Y - 5, X1: q.X + 5, Y1: q.Y + 5})
	}
	for i, a := range arms {
		words := strconv.Itoa(a.Number)
		if a.Number == 0 { // the baseline has no number
			words = draw.Fit(a.Label(), 9.5, false, 60)
		}
		w := draw.Width(words, 9.5, false)
		for _, side := range []draw.Point{{X: 7, Y: 3.4}, {X: -7 - w, Y: 3.4}, {X: -w / 2, Y: -8}, {X: -w / 2, Y: 15}} {
			t := draw.Text{X: places[i].X + side.X, Y: places[i].Y + side.Y, S: words, Size: 9.5}
			b := t.Box()
			free := b.X0 > p.x0 && b.X1 < p.x1 && b.Y0 > 2
			for k, o := range taken {
				free = free && (k == i || b.Overlap(o) == 0)
			}
			if free {
				groups[i].Text(t.X, t.Y, words, draw.Type{Size: t.Size, Role: draw.Soft})
				taken = append(taken, b)
				break
			}
		}
	}
}

// sideways parts arms of (nearly) the same bits by a few pixels, so that their
// intervals do not hide each other. The best of them stays where it belongs: it
// is the one on which a step of the Pareto set may stand.
func (v *view) sideways(arms []*armView) []float64 {
	const step, most = 9.0, 27.0 // pixels
	byScore := make([]int, len(arms))
	for i := range byScore {
		byScore[i] = i
	}
	slices.SortStableFunc(byScore, func(a, b int) int { return cmp.Compare(v.gain(arms[b]), v.gain(arms[a])) })
	out := make([]float64, len(arms))
	count := map[int]int{} // by half bits
	for _, i := range byScore {
		k := int(math.Round(arms[i].Bits * 2))
		n := count[k]
		count[k]++
		out[i] = step * float64((n+1)/2) // 0, -1, +1, -2, +2 ... steps
		if n%2 == 1 {
			out[i] = -out[i]
		}
		out[i] = math.Max(-most, math.Min(most, out[i]))
	}
	return out
}

// gain is an arm's mean score, more being better.
func (v *view) gain(a *armView) float64 {
	if v.words.metric.Higher {
		return a.Score.Mean
	}
	return -a.Score.Mean
}
