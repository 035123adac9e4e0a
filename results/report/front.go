package report

import (
	"fmt"
	"math"
	"slices"
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
	names := 214.0
	if width < 600 {
		names = 128
	}
	height := math.Max(290, 15*float64(len(arms))+20)
	f := &draw.Figure{
		Title: plain(v.Metric) + " against bits per value", Desc: v.describeFront(arms),
		W: width, H: height + 58,
	}
	p := frame{x0: 52, y0: 14, x1: width - names, y1: 14 + height}
	p.x, p.y = bitScale(arms, p), v.scoreScale(arms, p)
	p.grid(&f.Group, v.scoreTick)
	bitAxis(&f.Group, p)
	f.Group.Text((p.x0+p.x1)/2, p.y1+32, "mean bits of a stored value", draw.Type{Size: 10.5, Anchor: draw.Middle})
	drawSteps(&f.Group, p, pareto(v, arms))
	v.frontPoints(&f.Group, p, arms, width)
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

func bitScale(arms []*armView, p frame) draw.Linear {
	lo, hi := math.Inf(1), 0.0
	for _, a := range arms {
		lo, hi = math.Min(lo, a.Bits), math.Max(hi, a.Bits)
	}
	pad := math.Max(1, (hi-lo)*0.08)
	return draw.Linear{Lo: math.Max(0, lo-pad), Hi: hi + pad, P0: p.x0, P1: p.x1}
}

func bitAxis(g *draw.Group, p frame) {
	g.Line(p.x0, p.y1, p.x1, p.y1, draw.Line(draw.Ink, 1))
	for _, t := range p.x.Ticks(max(2, int((p.x1-p.x0)/50))) {
		x := p.x.At(t)
		g.Line(x, p.y1, x, p.y1+4, draw.Line(draw.Ink, 1))
		g.Text(x, p.y1+16, draw.TickLabel(t), draw.Type{Size: 10.5, Anchor: draw.Middle, Role: draw.Soft})
	}
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
		for _, x := range []float64{a.Score.Low, a.Score.Mean, a.Score.High} {
			if !math.IsNaN(x) && !math.IsInf(x, 0) {
				lo, hi = math.Min(lo, x), math.Max(hi, x)
			}
		}
	}
	if v.words.percent {
		least, most := math.Max(1-hi, 5e-4), math.Max(1-lo, 1e-3)
		if most < least*1.15 {
			least, most = least/1.08, most*1.08
		}
		return shortfall{draw.Log{Lo: least / 1.08, Hi: math.Min(1, most*1.08), P0: p.y0, P1: p.y1}}
	}
	if lo == hi {
		lo, hi = lo-math.Abs(lo)*0.1-1e-9, hi+math.Abs(hi)*0.1+1e-9
	}
	s := draw.Linear{Lo: lo - (hi-lo)*0.06, Hi: hi + (hi-lo)*0.06, P0: p.y1, P1: p.y0}
	if !v.words.metric.Higher {
		s.P0, s.P1 = s.P1, s.P0
	}
	return s
}

func (v *view) scoreTick(t float64) string {
	if v.words.percent {
		return draw.TickLabel(math.Round(1e6*t)/1e4) + " %"
	}
	return draw.TickLabel(t)
}

// pareto are the arms that no other arm equals or beats in both bits and mean
// score, by ascending bits. Arms that diverged are not in it.
func pareto(v *view, arms []*armView) []*armView {
	gain := func(a *armView) float64 {
		if v.words.metric.Higher {
			return a.Score.Mean
		}
		return -a.Score.Mean
	}
	byBits := slices.Clone(arms)
	slices.SortStableFunc(byBits, func(a, b *armView) int {
		switch {
		case a.Bits != b.Bits:
			return cmpFloat(a.Bits, b.Bits)
		default:
			return cmpFloat(gain(b), gain(a))
		}
	})
	var out []*armView
	best := math.Inf(-1)
	for _, a := range byBits {
		k, ok := a.kind()
		if g := gain(a); g > best && (!ok || k != results.Diverged) {
			best = g
			out = append(out, a)
		}
	}
	return out
}

func cmpFloat(a, b float64) int {
	switch {
	case a < b:
		return -1
	case a > b:
		return 1
	}
	return 0
}

// drawSteps draws what is reached with at most so many bits.
func drawSteps(g *draw.Group, p frame, set []*armView) {
	var pts []draw.Point
	for i, a := range set {
		x, y := p.x.At(a.Bits), p.y.At(a.Score.Mean)
		if i > 0 {
			pts = append(pts, draw.Point{X: x, Y: pts[len(pts)-1].Y})
		} else {
			pts = append(pts, draw.Point{X: x, Y: p.y1})
		}
		pts = append(pts, draw.Point{X: x, Y: y})
	}
	if len(pts) > 0 {
		pts = append(pts, draw.Point{X: p.x1, Y: pts[len(pts)-1].Y})
	}
	g.Titled("Pareto set: no arm needs fewer bits and scores better").Polyline(pts, draw.Line(draw.Ink, 1.5))
}

// frontPoints draws the arms' marks, intervals and names.
func (v *view) frontPoints(g *draw.Group, p frame, arms []*armView, width float64) {
	want := make([]float64, len(arms))
	for i, a := range arms {
		want[i] = p.y.At(a.Score.Mean)
	}
	at := draw.Spread(want, 14.5, p.y0+4, p.y1-4)
	shift := sideways(arms)
	for i, a := range arms {
		s := g.Sub("arm", draw.Attr{Name: "arm", Value: a.Slug})
		x, y := p.x.At(a.Bits)+shift[i], want[i]
		s.Polyline([]draw.Point{{X: x, Y: y}, {X: p.x1 + 2, Y: y}, {X: p.x1 + 12, Y: at[i]}, {X: p.x1 + 15, Y: at[i]}}, draw.Line(draw.Soft, 0.7).With(0.55))
		t := s.Titled(a.Label() + ": " + v.scoreLine(a.Score) + ", " + bits(a.Bits) + " bits")
		lo, hi := p.y.At(a.Score.Low), p.y.At(a.Score.High)
		t.Line(x, lo, x, hi, draw.Line(draw.Arm, 2.4))
		for _, e := range []float64{lo, hi} {
			t.Line(x-3.5, e, x+3.5, e, draw.Line(draw.Arm, 1.4))
		}
		if k, ok := a.kind(); ok {
			drawMark(t, x, y, 4.8, k)
		} else {
			t.Rect(x-4, y-4, 8, 8, draw.Style{Fill: draw.Base, Line: draw.Ink, Width: 1.2})
		}
		s.Text(p.x1+18, at[i]+3.8, a.Label(), draw.Type{Size: 11, Bold: a.Number == 0, Max: width - p.x1 - 19})
	}
}

// sideways parts arms of (nearly) the same bits by a few pixels, so that their
// intervals do not hide each other.
func sideways(arms []*armView) []float64 {
	out := make([]float64, len(arms))
	count := map[int]int{}
	for i, a := range arms {
		k := int(math.Round(a.Bits * 2))
		n := count[k]
		count[k]++
		step := float64((n+1)/2) * 9
		if n%2 == 1 {
			step = -step
		}
		out[i] = math.Max(-27, math.Min(27, step))
	}
	return out
}
