package report

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"ulpine/results"
	"ulpine/results/report/draw"
)

// multiples draws small plots of paired differences over one level axis: an
// upright margin rail in each.
type multiples struct {
	v      *view
	title  string
	axis   string
	ticks  []string // names of the places 0, 1, 2 ...; nil: the axis is of numbers
	lo, hi float64  // of numbers
	place  func(*armView) float64
	line   func(*armView) string // arms of the same word are joined
	width  float64
	d      domain
}

// domain takes in the differences that will be drawn, replicates aside: their
// strokes are not.
func (m *multiples) domain(arms []*armView) {
	cs := compared(arms)
	for i := range cs {
		cs[i].Differences = nil
	}
	m.d = railDomain(m.v, cs)
}

const (
	multipleHead = 22.0
	multiplePlot = 190.0
)

// draw lays plots out in up to three columns.
func (m *multiples) draw(ps []plotOf) *draw.Figure {
	columns := min(len(ps), 3)
	if m.width < 600 {
		columns = 1
	}
	lines := m.lineNames(ps)
	cell := m.width / float64(columns)
	right := 14.0
	if len(lines) > 1 {
		right = 102
	}
	plotWidth := cell - 46 - right
	foot, turned := 44.0, false
	if pitch := plotWidth / math.Max(1, float64(len(m.ticks))); m.ticks != nil {
		for _, t := range m.ticks {
			if draw.Width(t, 10, false)+5 > pitch {
				turned = true
			}
		}
	}
	if turned {
		foot = 30
		for _, t := range m.ticks {
			foot = math.Max(foot, math.Min(110, draw.Width(t, 10, false))+34)
		}
	}
	rows := (len(ps) + columns - 1) / columns
	f := &draw.Figure{Title: m.title, W: m.width, H: 16 + float64(rows)*(multipleHead+multiplePlot+foot)}
	words := m.title + ": difference to the baseline" + commaUnit(m.v)
	if m.d.fold() > 0 {
		words += "; linear between the dotted lines, logarithmic outside"
	}
	f.Group.Text(0, 11, words, draw.Type{Size: 11, Role: draw.Soft, Max: m.width})
	var said []string
	for i, p := range ps {
		x, y := cell*float64(i%columns), 16+(multipleHead+multiplePlot+foot)*float64(i/columns)
		fr := frame{x0: x + 46, y0: y + multipleHead, x1: x + cell - right, y1: y + multipleHead + multiplePlot}
		fr.x = m.level(fr)
		fr.y = m.d.scale(m.d.fold(), fr.y1, fr.y0)
		m.ground(&f.Group, fr, turned)
		f.Group.Text(x+46, y+14, p.head, draw.Type{Size: 11, Bold: true, Max: cell - 50})
		m.plot(&f.Group, fr, p, lines)
		said = append(said, m.describe(p))
	}
	f.Desc = strings.Join(said, " ")
	return f
}

// lineNames are the words of the lines, in order of appearance.
func (m *multiples) lineNames(ps []plotOf) []string {
	var out []string
	for _, p := range ps {
		for _, a := range p.arms {
			if l := m.line(a); !slices.Contains(out, l) {
				out = append(out, l)
			}
		}
	}
	return out
}

// level is the scale of the level axis.
func (m *multiples) level(f frame) draw.Scale {
	if m.ticks != nil {
		return draw.Linear{Lo: -0.5, Hi: float64(len(m.ticks)) - 0.5, P0: f.x0, P1: f.x1}
	}
	pad := math.Max(0.5, (m.hi-m.lo)*0.08)
	return draw.Linear{Lo: m.lo - pad, Hi: m.hi + pad, P0: f.x0, P1: f.x1}
}

// ground draws noise floor, grid, margin, zero and both axes.
func (m *multiples) ground(g *draw.Group, f frame, turned bool) {
	if lo, hi := m.v.words.scale(m.v.NoiseLow), m.v.words.scale(m.v.NoiseHigh); hi > lo {
		y0, y1 := f.inside(hi), f.inside(lo)
		s := g.Titled("noise floor: " + plain(m.v.NoiseFrom))
		s.Rect(f.x0, y0, f.x1-f.x0, y1-y0, draw.Fill(draw.Floor).With(0.12))
		s.Hatch(f.x0, y0, f.x1-f.x0, y1-y0, 6, draw.Line(draw.Floor, 0.9).With(0.75))
	}
	f.gridAt(g, draw.TickLabel, f.y.Ticks(10))
	g.Line(f.x0, f.inside(0), f.x1, f.inside(0), draw.Line(draw.Ink, 1.2))
	if fold := m.d.fold(); fold > 0 { // where the scale turns logarithmic
		for _, at := range []float64{-fold, fold} {
			if y := f.y.At(at); y > f.y0 && y < f.y1 {
				g.Line(f.x0, y, f.x1, y, draw.Line(draw.Soft, 1).Dashed(2, 3))
			}
		}
	}
	if m.d.margin > 0 {
		y := f.inside(-m.d.margin)
		t := g.Titled("margin " + fixed(-m.d.margin, marginDigits(m.d.margin)))
		t.Line(f.x0, y, f.x1, y, draw.Line(draw.Post, 3))
		t.Text(f.x0+4, y+12, "margin "+fixed(-m.d.margin, marginDigits(m.d.margin)), draw.Type{Size: 9.5, Role: draw.Post, Bold: true, Max: f.x1 - f.x0})
	}
	g.Line(f.x0, f.y1, f.x1, f.y1, draw.Line(draw.Ink, 1))
	if m.ticks == nil {
		f.valueAxis(g)
		g.Text((f.x0+f.x1)/2, f.y1+32, m.axis, draw.Type{Size: 10.5, Anchor: draw.Middle, Max: f.x1 - f.x0 + 60})
		return
	}
	below := f.y1 + 30
	for i, t := range m.ticks {
		x := f.x.At(float64(i))
		g.Line(x, f.y1, x, f.y1+4, draw.Line(draw.Ink, 1))
		if turned {
			g.Text(x-3.5, f.y1+8, t, draw.Type{Size: math.Min(10, (f.x1-f.x0)/float64(len(m.ticks))-0.5), Turn: 90, Role: draw.Soft, Max: 110})
			below = math.Max(below, f.y1+22+math.Min(110, draw.Width(t, 10, false)))
		} else {
			g.Text(x, f.y1+15, t, draw.Type{Size: 10, Anchor: draw.Middle, Role: draw.Soft})
		}
	}
	g.Text((f.x0+f.x1)/2, below, m.axis, draw.Type{Size: 10.5, Anchor: draw.Middle, Max: f.x1 - f.x0 + 60})
}

// plot draws the lines of one plot with their arms, and names them at their ends.
func (m *multiples) plot(g *draw.Group, f frame, p plotOf, lines []string) {
	var ends []lineEnd
	for k, name := range lines {
		shift := 5 * (float64(k) - float64(len(lines)-1)/2) // lines stand side by side
		role := draw.SeriesRole(k)
		var arms []*armView
		for _, a := range p.arms {
			if m.line(a) == name && a.Comparison != nil {
				arms = append(arms, a)
			}
		}
		arms = byPlace(arms, m.place)
		var pts []draw.Point
		for _, a := range arms {
			pts = append(pts, draw.Point{X: f.x.At(m.place(a)) + shift, Y: f.inside(m.v.words.scale(a.Comparison.Mean))})
		}
		g.Polyline(m.joined(arms, pts), draw.Line(role, 1.3).Dashed(dashes[k%len(dashes)]...).With(0.8))
		for i, a := range arms {
			m.mark(g, f, pts[i], a, role)
		}
		for i := len(pts) - 1; i >= 0 && len(lines) > 1; i-- {
			if !math.IsNaN(pts[i].Y) {
				ends = append(ends, lineEnd{pts[i].X, pts[i].Y, name, role})
				break
			}
		}
	}
	writeEnds(g, f, ends)
}

// joined are the points that a line passes: where arms share a place, the best.
func (m *multiples) joined(arms []*armView, pts []draw.Point) []draw.Point {
	var out []draw.Point
	for i, q := range pts {
		switch n := len(out); {
		case n == 0 || m.place(arms[i])-m.place(arms[i-1]) > 0.05:
			out = append(out, q)
		case !(out[n-1].Y <= q.Y): // higher up is better
			out[n-1] = q
		}
	}
	return out
}

// mark draws one arm: its interval and, at its mean, its verdict's mark.
func (m *multiples) mark(g *draw.Group, f frame, at draw.Point, a *armView, role draw.Role) {
	c := a.Comparison
	t := g.Sub("arm", draw.Attr{Name: "arm", Value: a.Slug}).Titled(fmt.Sprintf("%s: %s, mean %s%s, interval %s, n = %d; %s bits a value", a.Label(), verdictWords(c.Verdict),
		m.v.words.diff(c.Mean), m.v.words.unit(), m.v.words.interval(c.Low, c.High), c.N, bits(a.Bits)))
	if math.IsNaN(at.Y) { // no mean: the mark alone, at the foot
		if c.Verdict.Kind == results.Diverged {
			drawMark(t, at.X, f.y1-6, 4, c.Verdict.Kind)
		}
		return
	}
	lo, hi := f.inside(m.v.words.scale(c.Low)), f.inside(m.v.words.scale(c.High))
	t.Line(at.X, lo, at.X, hi, draw.Line(role, 2))
	drawMark(t, at.X, at.Y, 4, c.Verdict.Kind)
}

// describe tells a plot in words.
func (m *multiples) describe(p plotOf) string {
	var b strings.Builder
	if p.head != "" {
		b.WriteString(p.head + ": ")
	}
	for _, a := range p.arms {
		if c := a.Comparison; c != nil {
			fmt.Fprintf(&b, "%s %s %s. ", a.Label(), m.v.words.diff(c.Mean), m.v.words.interval(c.Low, c.High))
		}
	}
	if b.Len() == 0 {
		return "No arm has been compared."
	}
	return strings.TrimSpace(b.String())
}
