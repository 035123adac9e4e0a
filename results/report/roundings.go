package report

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"ulpine/results"
	"ulpine/results/report/draw"
)

// twin is two arms that differ in nothing but the rounding of some points:
// stochastic in one, to nearest in the other.
type twin struct {
	nearest, stochastic *armView
	points              []string            // where they differ
	contrast            *results.Comparison // of the two, where the plan asks for it; nil: not
}

// twins finds them, each stochastic arm once, in the plan's order.
func (v *view) twins() []twin {
	var out []twin
	arms := v.arms
	for _, s := range arms {
		for _, n := range arms {
			points, ok := roundingOnly(s, n)
			if !ok {
				continue
			}
			t := twin{nearest: n, stochastic: s, points: points}
			for i := range v.Contrasts {
				if c := &v.Contrasts[i]; c.Arm == s.Slug && c.Against == n.Slug && t.contrast == nil {
					t.contrast = c
				}
			}
			out = append(out, t)
			break
		}
	}
	return out
}

// roundingOnly lists the points at which s rounds stochastically and n to
// nearest; false when there are none, or when the two differ in anything else.
// The loss scale counts, as do overflow and the order of sums.
func roundingOnly(s, n *armView) ([]string, bool) {
	if s == n || s.LossScale != n.LossScale || len(s.Settings) != len(n.Settings) {
		return nil, false
	}
	var points []string
	for i, a := range s.Settings {
		b := n.Settings[i]
		if a == b {
			continue
		}
		same := b
		same.Rounding = a.Rounding
		if a != same || !isStochastic(a.Rounding) || !strings.HasPrefix(strings.ToLower(b.Rounding), "nearest") {
			return nil, false
		}
		if !slices.Contains(points, plain(a.Point)) {
			points = append(points, plain(a.Point))
		}
	}
	return points, len(points) > 0
}

// isStochastic reads a rounding's words.
func isStochastic(rounding string) bool {
	return strings.HasPrefix(strings.ToLower(plain(rounding)), "stochastic")
}

// twinSection sets stochastic beside nearest rounding; nil where no two arms
// differ in that alone.
func twinSection(v *view) any {
	t := v.twinTable()
	if t == nil {
		return nil
	}
	caption := "Two arms that share everything but the rounding at the named points: above the line rounded to nearest, below it stochastically (dotted). Bars, marks, post and scale as among the paired differences to the baseline."
	return figureWith{Figure: figureHTML(v, "stochastic-beside-nearest", caption, false), Table: t}
}

// twinTable has a row a pair; nil when there is none.
func (v *view) twinTable() *tabular {
	all := v.twins()
	if len(all) == 0 {
		return nil
	}
	t := &tabular{
		Caption: "Stochastic beside nearest, all else being equal: differences to the baseline" + commaUnit(v),
		Columns: columns("Stochastic at", "to nearest: difference, interval, n", "stochastic: difference, interval, n", "stochastic against nearest, paired"),
	}
	for _, w := range all {
		direct := "no contrast of the two in the plan"
		if c := w.contrast; c != nil {
			direct = fmt.Sprintf("%s %s, n = %d: %s", v.words.diff(c.Mean), v.words.interval(c.Low, c.High), c.N, verdictWords(c.Verdict))
		}
		t.Rows = append(t.Rows, []string{strings.Join(w.points, "; "), v.twinCell(w.nearest), v.twinCell(w.stochastic), direct})
	}
	return t
}

// twinCell is one of two arms with its difference.
func (v *view) twinCell(a *armView) string {
	c := a.Comparison
	if c == nil {
		return a.Label()
	}
	return fmt.Sprintf("%s: %s %s, n = %d, %s", a.Label(), v.words.diff(c.Mean), v.words.interval(c.Low, c.High), c.N, verdictWords(c.Verdict))
}

// twinRows is the number of pairs on one figure.
const twinRows = 12

// twinFigure draws each pair as one row of a margin rail with two bars.
func twinFigure(v *view, width float64) []*draw.Figure {
	var drawn []twin
	var cs []results.Comparison
	for _, w := range v.twins() {
		if w.nearest.Comparison != nil && w.stochastic.Comparison != nil {
			drawn = append(drawn, w)
			cs = append(cs, *w.nearest.Comparison, *w.stochastic.Comparison)
		}
	}
	if len(drawn) == 0 {
		return nil
	}
	d := railDomain(v, cs)
	var out []*draw.Figure
	for i := 0; i < len(drawn); i += twinRows {
		out = append(out, twinPart(v, drawn[i:min(i+twinRows, len(drawn))], d, width))
	}
	return out
}

// twinPart is one figure of pairs.
func twinPart(v *view, pairs []twin, d domain, width float64) *draw.Figure {
	r := &rail{v: v, width: width, narrow: width < 600, top: 30, row: 62}
	r.left, r.right = 226, width-176
	head := 0.0
	if r.narrow {
		r.left, r.right, head = 12, width-12, 56
	}
	r.folded = d.fold()
	r.scale = d.scale(r.folded, r.left+9, r.right-9)
	bottom := r.top + (r.row+head)*float64(len(pairs))
	f := &draw.Figure{Title: "Stochastic beside nearest rounding, all else being equal", W: width, H: bottom + 52}
	r.ground(&f.Group, bottom)
	var said []string
	for i, w := range pairs {
		y := r.top + (r.row+head)*float64(i)
		r.pair(&f.Group, y, head, i, w)
		said = append(said, "At "+strings.Join(w.points, ", ")+": "+v.twinCell(w.nearest)+"; "+v.twinCell(w.stochastic)+".")
	}
	f.Desc = strings.Join(said, " ")
	return f
}

// pair draws two arms around one line of the rail.
func (r *rail) pair(g *draw.Group, y, head float64, i int, w twin) {
	at := "stochastic at " + strings.Join(w.points, ", ")
	if len(w.points) > 2 { // the table names them
		at = fmt.Sprintf("stochastic at %d points", len(w.points))
	}
	if r.narrow {
		g.Rect(0, y, r.width, head, draw.Fill(draw.Paper))
		for k, a := range []*armView{w.nearest, w.stochastic} {
			g.Text(12, y+26+14*float64(k), a.Label()+": "+r.v.words.diff(a.Comparison.Mean)+" "+r.v.words.interval(a.Comparison.Low, a.Comparison.High), draw.Type{Size: 10.5, Max: r.width - 24})
		}
		g.Text(12, y+12, at, draw.Type{Size: 11, Bold: true, Max: r.width - 24})
	} else {
		g.Text(0, y+14, at, draw.Type{Size: 10, Role: draw.Soft, Max: r.left - 14})
		for k, a := range []*armView{w.nearest, w.stochastic} {
			ay := y + head + 32 + 20*float64(k)
			g.Text(0, ay, a.Label(), draw.Type{Size: 11.5, Bold: true, Max: r.left - 14})
			c := a.Comparison
			words := r.v.words.diff(c.Mean) + " " + r.v.words.interval(c.Low, c.High)
			if math.IsNaN(c.Mean) {
				words = "no mean"
			}
			g.Text(r.right+14, ay, words+fmt.Sprintf(", n = %d", c.N), draw.Type{Size: 10.5, Max: r.width - r.right - 14})
		}
	}
	top := y + head
	if i == 0 && !r.narrow {
		top = r.top
	}
	r.postThrough(g, top, y+head+r.row, w.nearest.Comparison.Margin, i == 0)
	g.Line(r.left, y+head+38, r.right, y+head+38, draw.Line(draw.Faint, 1))
	r.bar(g, y+head+28, w.nearest.Comparison, false)
	r.bar(g, y+head+48, w.stochastic.Comparison, true)
}

// postThrough draws the margin between two heights, with its name on request.
func (r *rail) postThrough(g *draw.Group, top, bottom, margin float64, named bool) {
	m := r.v.words.scale(margin)
	if !(m > 0) {
		return
	}
	x := r.scale.At(-m)
	g.Line(x, top, x, bottom, draw.Line(draw.Post, 4))
	if named {
		g.Text(x-4, r.top-10, "margin "+fixed(-m, marginDigits(m)), draw.Type{Size: 10.5, Anchor: draw.End, Role: draw.Post, Bold: true})
	}
}

// bar draws an interval with its mark; dotted above where rounding is stochastic.
func (r *rail) bar(g *draw.Group, at float64, c *results.Comparison, stochastic bool) {
	t := g.Sub("arm", draw.Attr{Name: "arm", Value: c.Arm}).Titled(fmt.Sprintf("%s: %s, mean %s%s, interval %s, n = %d", r.v.pairName(c), verdictWords(c.Verdict),
		r.v.words.diff(c.Mean), r.v.words.unit(), r.v.words.interval(c.Low, c.High), c.N))
	lo, hi := r.clamp(c.Low), r.clamp(c.High)
	t.Line(lo, at, hi, at, draw.Line(draw.Arm, 5))
	for _, x := range []float64{lo, hi} {
		t.Line(x, at-5, x, at+5, draw.Line(draw.Arm, 1.5))
	}
	x := r.scale.At(r.v.words.scale(c.Mean))
	drawMark(t, x, at, 5.2, c.Verdict.Kind)
	if stochastic {
		for k := range 3 {
			t.Circle(x+4*float64(k-1), at+9, 1.2, draw.Fill(draw.Ink))
		}
	}
}
