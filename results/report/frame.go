package report

import (
	"math"

	"ulpine/results/report/draw"
)

// frame is the plot area of a figure with its two scales.
type frame struct {
	x0, y0, x1, y1 float64 // left, top, right, bottom
	x, y           draw.Scale
}

// epochAxis draws the time axis below the frame; words is written under it when
// not empty.
func (f frame) epochAxis(g *draw.Group, words string) {
	g.Line(f.x0, f.y1, f.x1, f.y1, draw.Line(draw.Ink, 1))
	last := math.Inf(-1) // right edge of the last label
	for _, t := range f.x.Ticks(max(2, int((f.x1-f.x0)/34))) {
		if t != math.Trunc(t) {
			continue // no half epochs
		}
		x := f.x.At(t)
		g.Line(x, f.y1, x, f.y1+4, draw.Line(draw.Ink, 1))
		s := draw.TickLabel(t)
		if w := draw.Width(s, 10.5, false); x-w/2 > last+4 {
			g.Text(x, f.y1+15, s, draw.Type{Size: 10.5, Anchor: draw.Middle, Role: draw.Soft})
			last = x + w/2
		}
	}
	g.Text((f.x0+f.x1)/2, f.y1+30, words, draw.Type{Size: 10.5, Anchor: draw.Middle})
}

// grid draws the horizontal grid with its labels, spelt by label, left of the frame.
func (f frame) grid(g *draw.Group, label func(float64) string) {
	f.gridAt(g, label, f.y.Ticks(max(2, int((f.y1-f.y0)/30))))
}

// gridAt is grid for given ticks.
func (f frame) gridAt(g *draw.Group, label func(float64) string, ticks []float64) {
	last := math.Inf(1) // the last label's height: labels closer than a line are left out
	for _, t := range ticks {
		y := f.y.At(t)
		if y < f.y0-0.5 || y > f.y1+0.5 {
			continue
		}
		g.Line(f.x0, y, f.x1, y, draw.Line(draw.Faint, 0.8))
		if s := label(t); s != "" && math.Abs(y-last) > 12 {
			g.Text(f.x0-6, y+3.7, s, draw.Type{Size: 10.5, Anchor: draw.End, Role: draw.Soft})
			last = y
		}
	}
}

// line turns values over x into points of the frame; what lies beyond the top
// or bottom edge is drawn on it, what is missing or infinite is a gap.
func (f frame) line(x, y []float64) []draw.Point {
	out := make([]draw.Point, len(x))
	for i := range x {
		out[i] = draw.Point{X: f.x.At(x[i]), Y: f.inside(y[i])}
	}
	return out
}

// inside is the pixel of a value, held within the frame; infinities that stand
// for missing curves stay gaps.
func (f frame) inside(v float64) float64 {
	if math.IsInf(v, 0) || math.IsNaN(v) {
		return math.NaN()
	}
	y := f.y.At(v)
	if math.IsNaN(y) { // zero or less on a logarithmic axis
		return f.y1
	}
	return math.Max(f.y0, math.Min(f.y1, y))
}

// band draws the area between two curves; an infinite upper edge lies at the top.
func (f frame) band(g *draw.Group, c *curve, s draw.Style) {
	var x, lo, hi []float64
	for i := range c.X {
		l, h := f.inside(c.Low[i]), f.inside(c.High[i])
		if math.IsInf(c.High[i], 1) {
			h = f.y0
		}
		x, lo, hi = append(x, f.x.At(c.X[i])), append(lo, l), append(hi, h)
	}
	g.Band(x, lo, hi, s)
}
