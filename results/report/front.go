package report

import (
	"cmp"
	"fmt"
	"math"
	"slices"
	"strings"

	"ulpine/results"
	"ulpine/results/report/draw"
)

// expense is what a front sets the score against: something to have less of.
type expense struct {
	id, title, axis string
	height          float64 // of the plot at least, pixels
	// of is an arm's expense, and the ends of its interval where it has one:
	// what different models of the same expense say. 0: not known.
	of    func(v *view, a *armView) (x, low, high float64)
	spell func(x float64) string
}

// expenses are the fronts of the report.
var expenses = []expense{
	{
		"bits", "bits a value", "mean bits of a stored value", 290,
		func(_ *view, a *armView) (x, low, high float64) { return a.Bits, a.Bits, a.Bits },
		func(x float64) string { return bits(x) + " bits" },
	},
	{
		"bytes", "bytes moved", "bytes moved in a training step, % of FP32's", 210,
		func(_ *view, a *armView) (x, low, high float64) {
			if a.Bill == nil {
				return 0, 0, 0
			}
			x, tiled := 100*a.Bill.Step.BitShare, 100*a.Bill.StepTiled.BitShare
			return x, math.Min(x, tiled), math.Max(x, tiled)
		},
		func(x float64) string { return significant(x, 3) + " % of FP32's bytes" },
	},
	{
		"energy", "energy", "energy of a training step by model, % of FP32's", 210,
		func(_ *view, a *armView) (x, low, high float64) {
			if a.Bill == nil {
				return 0, 0, 0
			}
			x, tiled := 100*a.Bill.Step.EnergyShare, 100*a.Bill.StepTiled.EnergyShare
			return x, math.Min(x, tiled), math.Max(x, tiled)
		},
		func(x float64) string { return significant(x, 3) + " % of FP32's energy" },
	},
}

// frontOf is the drawing function of the front of expense i.
func frontOf(i int) func(v *view, width float64) []*draw.Figure {
	return func(v *view, width float64) []*draw.Figure { return v.front(&expenses[i], width) }
}

// front draws the metric against an expense: every arm its verdict's mark with
// an upright interval, and the arms that none beats in both as steps.
func (v *view) front(e *expense, width float64) []*draw.Figure {
	arms := v.scored(e)
	if len(arms) == 0 {
		return nil
	}
	names := 214.0 // pixels at the right edge for names
	if width < 600 {
		names = 128
	}
	height := math.Max(e.height, 15*float64(min(len(arms), namedArms+8))+20)
	f := &draw.Figure{
		Title: plain(v.Metric) + " against " + e.title, Desc: v.describeFront(e, arms),
		W: width, H: height + 58,
	}
	axis := draw.Wrap(e.axis, 10.5, false, width-60, 2)
	f.H += 12 * float64(len(axis)-1)
	p := frame{x0: 52, y0: frontHead, x1: width - names, y1: frontHead + height}
	f.H += frontHead - 14
	f.Group.Text(0, 11, plain(v.Metric)+v.betterWords(), draw.Type{Size: 10.5, Max: width})
	p.x, p.y = v.expenseScale(e, arms, p), v.scoreScale(arms, p)
	p.grid(&f.Group, v.scoreTick)
	p.valueAxis(&f.Group)
	for k, l := range axis {
		f.Group.Text(p.x0, p.y1+32+12*float64(k), l, draw.Type{Size: 10.5})
	}
	set := pareto(v, e, arms)
	v.drawSteps(&f.Group, e, p, set)
	v.frontPoints(&f.Group, e, p, arms, set, width)
	return []*draw.Figure{f}
}

// frontHead is the room above a front, for the words of its upright axis, pixels.
const frontHead = 32.0

// betterWords says which way is better where a reader may doubt it.
func (v *view) betterWords() string {
	if v.words.metric.Higher {
		return ""
	}
	return ", upwards is better"
}

// scored are the arms that have a score and an expense.
func (v *view) scored(e *expense) []*armView {
	var out []*armView
	for _, a := range v.arms {
		if x, _, _ := e.of(v, a); a.Score.N > 0 && x > 0 && !math.IsInf(x, 0) {
			out = append(out, a)
		}
	}
	return out
}

// describeFront tells the front in words.
func (v *view) describeFront(e *expense, arms []*armView) string {
	var b strings.Builder
	for _, a := range arms {
		x, _, _ := e.of(v, a)
		fmt.Fprintf(&b, "%s: %s, %s. ", a.Label(), e.spell(x), v.scoreLine(a.Score))
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

// expenseScale leaves at least one unit of room on either side, and room for marks
// that stand beside each other.
func (v *view) expenseScale(e *expense, arms []*armView, p frame) draw.Linear {
	lo, hi := math.Inf(1), 0.0
	for _, a := range arms {
		_, low, high := e.of(v, a)
		lo, hi = math.Min(lo, low), math.Max(hi, high)
	}
	pad := math.Max(1, (hi-lo)*0.08)
	return draw.Linear{Lo: math.Max(0, lo-pad), Hi: hi + pad, P0: p.x0 + 24, P1: p.x1 - 10}
}

// valueAxis draws the level axis of values below the frame.
func (p frame) valueAxis(g *draw.Group) {
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

// pareto are the arms that no other arm equals or beats in both expense and mean
// score, by ascending expense. Arms that diverged are not in it.
func pareto(v *view, e *expense, arms []*armView) []*armView {
	byExpense := slices.Clone(arms)
	slices.SortStableFunc(byExpense, func(a, b *armView) int {
		x, _, _ := e.of(v, a)
		y, _, _ := e.of(v, b)
		return cmp.Or(cmp.Compare(x, y), cmp.Compare(v.gain(b), v.gain(a)))
	})
	var out []*armView
	best := math.Inf(-1)
	for _, a := range byExpense {
		k, ok := a.kind()
		if g := v.gain(a); g > best && (!ok || k != results.Diverged) {
			best = g
			out = append(out, a)
		}
	}
	return out
}

// drawSteps draws what is reached with at most so much.
func (v *view) drawSteps(g *draw.Group, e *expense, p frame, set []*armView) {
	var pts []draw.Point
	for i, a := range set {
		spent, _, _ := e.of(v, a)
		x, y := p.x.At(spent), p.y.At(a.Score.Mean)
		if i > 0 {
			pts = append(pts, draw.Point{X: x, Y: pts[len(pts)-1].Y})
		} else { // with less than any arm, nothing is reached: the steps rise from the axis
			pts = append(pts, draw.Point{X: x, Y: p.y1})
		}
		pts = append(pts, draw.Point{X: x, Y: y})
	}
	if len(pts) > 0 {
		pts = append(pts, draw.Point{X: p.x1, Y: pts[len(pts)-1].Y})
	}
	g.Titled("Pareto set: no arm needs less and scores better").Polyline(pts, draw.Line(draw.Ink, 1.5))
}

// namedArms is the number of arms up to which each has its name at the edge of
// the front. With more, the leaders to the names would hide the marks: then only
// the Pareto set is named there, and the others carry their numbers.
const namedArms = 16

// frontPoints draws the arms' marks, intervals and names.
func (v *view) frontPoints(g *draw.Group, e *expense, p frame, arms, set []*armView, width float64) {
	shift := v.sideways(e, p, arms)
	places := make([]draw.Point, len(arms))
	var named []int
	for i, a := range arms {
		x, _, _ := e.of(v, a)
		places[i] = draw.Point{X: p.x.At(x) + shift[i], Y: p.y.At(a.Score.Mean)}
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
		v.frontPoint(groups[i], e, p, a, places[i])
	}
	if len(arms) > namedArms {
		numberPoints(groups, p, arms, places)
	}
}

// frontPoint draws one arm's interval and mark.
func (v *view) frontPoint(g *draw.Group, e *expense, p frame, a *armView, at draw.Point) {
	x, left, right := e.of(v, a)
	t := g.Titled(a.Label() + ": " + v.scoreLine(a.Score) + "; difference " + v.differenceLine(a) + "; " + e.spell(x))
	low, high := v.frontBounds(a)
	lo, hi, role := p.y.At(low), p.y.At(high), draw.Arm
	if a == v.baseline {
		role = draw.Base
	}
	if right > left { // what the models of the expense say, moved with the mark
		d := at.X - p.x.At(x)
		t.Line(p.x.At(left)+d, at.Y, p.x.At(right)+d, at.Y, draw.Line(role, 1.6))
		for _, end := range []float64{left, right} {
			t.Line(p.x.At(end)+d, at.Y-3.5, p.x.At(end)+d, at.Y+3.5, draw.Line(role, 1.4))
		}
	}
	t.Line(at.X, lo, at.X, hi, draw.Line(role, 2.4))
	for _, end := range []float64{lo, hi} {
		t.Line(at.X-3.5, end, at.X+3.5, end, draw.Line(role, 1.4))
	}
	if k, ok := a.kind(); ok {
		drawMark(t, at.X, at.Y, 4.8, k)
	} else { // the baseline has no verdict
		t.Rect(at.X-4, at.Y-4, 8, 8, draw.Style{Fill: draw.Base, Line: draw.Ink, Width: 1.2})
	}
}

// gain is an arm's mean score, more being better.
func (v *view) gain(a *armView) float64 {
	if v.words.metric.Higher {
		return a.Score.Mean
	}
	return -a.Score.Mean
}
