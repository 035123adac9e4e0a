package report

import (
	"encoding/json"
	"fmt"
	"math"
	"strings"

	"ulpine/results"
	"ulpine/results/report/draw"
)

// dashes are the line patterns that go with the Series paints; with six paints
// they repeat together only after 24 lines.
var dashes = [][]float64{nil, {7, 3}, {2, 3}, {9, 3, 2, 3}}

// lossRange is the common logarithmic range of all loss curves with their bands.
func lossRange(v *view) (lo, hi float64, ok bool) {
	return rangeOf(v, func(take func(curves ...[]float64)) {
		for _, a := range v.arms {
			for _, c := range []*curve{&a.Training, &a.Validation, &a.Test} {
				take(c.Low, c.Mid, c.High)
			}
		}
	})
}

// medianRange is the range of the medians of the training loss.
func medianRange(v *view) (lo, hi float64, ok bool) {
	return rangeOf(v, func(take func(curves ...[]float64)) {
		for _, a := range v.arms {
			take(a.Training.Mid)
		}
	})
}

// rangeOf is the logarithmic range of what each passes on. Values far above
// where training began say only "lost" and are cut off at the top edge.
func rangeOf(v *view, each func(take func(curves ...[]float64))) (lo, hi float64, ok bool) {
	lo, hi = math.Inf(1), 0
	start := 0.0 // the highest median of the first stretch: where training began
	for _, a := range v.arms {
		for i, m := range a.Training.Mid {
			if i == 0 && m > start && !math.IsInf(m, 0) {
				start = m
			}
		}
	}
	each(func(curves ...[]float64) {
		for _, c := range curves {
			for _, x := range c {
				if x > 0 && !math.IsInf(x, 0) {
					lo, hi = math.Min(lo, x), math.Max(hi, x)
				}
			}
		}
	})
	if hi == 0 { // no positive loss anywhere: a logarithmic axis has nothing to show
		return 0, 0, false
	}
	if start > 0 {
		hi = math.Min(hi, 3*start)
	}
	lo = math.Min(lo, hi)
	if hi < lo*1.2 { // a flat curve still needs an axis of some length
		lo, hi = lo/1.1, hi*1.1
	}
	return lo / 1.06, hi * 1.06, true
}

// panelData tells the page's script where a plot lies and what it shows.
type panelData struct {
	Box    [4]float64 `json:"box"`    // x0, y0, x1, y1 in pixels of the figure
	Epochs [2]float64 `json:"epochs"` // at x0 and x1
	Loss   [2]float64 `json:"loss"`   // at y1 and y0, logarithmic
	Arms   []string   `json:"arms"`
}

// data describes the frame to the page's script. The baseline, when it is
// there, comes first, the arm the plot is about last.
func (f frame) data(lo, hi, epochs float64, arms ...*armView) panelData {
	d := panelData{Box: [4]float64{f.x0, f.y0, f.x1, f.y1}, Epochs: [2]float64{0, epochs}, Loss: [2]float64{lo, hi}}
	for _, a := range arms {
		d.Arms = append(d.Arms, a.Slug)
	}
	return d
}

// attach puts panel data on a figure.
func attach(f *draw.Figure, panels []panelData) {
	b, err := json.Marshal(panels)
	if err != nil {
		panic("report: panel data: " + err.Error()) // plain finite numbers and strings
	}
	f.Data = append(f.Data, draw.Attr{Name: "panels", Value: string(b)})
}

// duration is the length of the time axis in epochs.
func (v *view) duration() float64 {
	if v.clock.steps > 0 {
		return math.Max(float64(v.clock.steps)/v.clock.per, float64(v.clock.epochs))
	}
	return math.Max(1, float64(v.clock.epochs))
}

// overview draws the median training loss of all arms in one plot, each line
// named at its end.
func overview(v *view, width float64) []*draw.Figure {
	lo, hi, ok := medianRange(v)
	if !ok {
		return nil
	}
	var shown []*armView
	for _, a := range v.arms {
		if !a.Training.empty() {
			shown = append(shown, a)
		}
	}
	if len(shown) == 0 {
		return nil
	}
	names := 190.0 // pixels at the right edge for the lines' names
	if width < 600 {
		names = 118
	}
	// As high as the names need when every one stands alone.
	height := math.Max(300, 15*float64(len(shown))+20)
	f := &draw.Figure{Title: "Training loss of every arm, medians over replicates", W: width, H: height + 50}
	p := frame{x0: 44, y0: 14, x1: width - names, y1: 14 + height}
	p.x = draw.Linear{Lo: 0, Hi: v.duration(), P0: p.x0, P1: p.x1}
	p.y = draw.Log{Lo: lo, Hi: hi, P0: p.y1, P1: p.y0}
	p.grid(&f.Group, draw.TickLabel)
	p.epochAxis(&f.Group, "epoch (training loss, logarithmic axis)")
	f.Desc = describeCurves(shown)
	endLabels(&f.Group, p, shown, width)
	attach(f, []panelData{p.data(lo, hi, v.duration(), shown...)})
	return []*draw.Figure{f}
}

// describeCurves tells the curves' ends in words.
func describeCurves(arms []*armView) string {
	var b strings.Builder
	for _, a := range arms {
		c := &a.Training
		if i := c.last(); i < 0 {
			fmt.Fprintf(&b, "%s: no finite loss, %d diverged. ", a.Label(), c.Diverged)
		} else {
			fmt.Fprintf(&b, "%s: median %s at epoch %s, n = %d", a.Label(), significant(c.Mid[i], 3), significant(c.X[i], 3), c.N)
			if c.Diverged > 0 {
				fmt.Fprintf(&b, ", %d diverged", c.Diverged)
			}
			b.WriteString(". ")
		}
	}
	return strings.TrimSpace(b.String())
}

// endLabels draws each arm's median and writes its name at the right edge, as
// near to the line's end as the other names allow.
func endLabels(g *draw.Group, p frame, arms []*armView, width float64) {
	ends := make([]float64, len(arms))
	for i, a := range arms {
		ends[i] = p.inside(a.Training.Mid[a.Training.last()])
	}
	at := draw.Spread(ends, 14.5, p.y0+4, p.y1-4)
	lines := 0 // drawn so far, the baseline aside
	for i, a := range arms {
		role, dash, wide := draw.Base, []float64(nil), 3.2
		if a.Number > 0 {
			role, dash, wide = draw.SeriesRole(lines), dashes[lines/draw.SeriesCount%len(dashes)], 1.8
			if lines >= draw.SeriesCount*len(dashes) { // paints and dashes are used up: the names have to do
				dash = []float64{1, 2}
			}
			lines++
		}
		s := g.Sub("arm", draw.Attr{Name: "arm", Value: a.Slug})
		// The line, then a thin leader: level to the edge of the plot, then over to the name.
		s.Polyline(p.line(a.Training.X, a.Training.Mid), draw.Line(role, wide).Dashed(dash...))
		k := a.Training.last()
		ex, ey := p.x.At(a.Training.X[k]), ends[i]
		s.Polyline([]draw.Point{{X: ex, Y: ey}, {X: math.Max(ex, p.x1-2), Y: ey}, {X: p.x1 + 12, Y: at[i]}, {X: p.x1 + 16, Y: at[i]}},
			draw.Line(role, 0.8).With(0.7))
		if k < len(a.Training.Mid)-1 && a.Training.Diverged > 0 { // more than half of the replicates are lost
			drawMark(s, ex, ey, 4.5, results.Diverged)
		}
		if role == draw.Base {
			role = draw.Soft // grey enough to read
		}
		s.Text(p.x1+19, at[i]+3.8, a.Label(), draw.Type{Size: 11, Role: role, Bold: a.Number == 0, Max: width - p.x1 - 20})
	}
}

// Panels of small multiples: how many stand in one figure, so that it fits on a
// printed page.
const panelsPerFigure = 12

// panels draws one small plot an arm: the arm with its band, the baseline in
// grey, and test or validation loss where it was evaluated.
func panels(v *view, width float64) []*draw.Figure {
	lo, hi, ok := lossRange(v)
	if !ok {
		return nil
	}
	arms := v.others()
	if len(arms) == 0 && v.baseline != nil { // a study of the baseline alone shows the baseline
		arms = []*armView{v.baseline}
	}
	var out []*draw.Figure
	for i := 0; i < len(arms); i += panelsPerFigure {
		out = append(out, panelFigure(v, arms[i:min(i+panelsPerFigure, len(arms))], width, lo, hi))
	}
	return out
}

// panelFigure lays panels out in three columns, or in one where it is narrow.
// All share one pair of axes, so that they can be compared by eye.
func panelFigure(v *view, arms []*armView, width, lo, hi float64) *draw.Figure {
	columns := 3
	if width < 600 {
		columns = 1
	}
	columns = min(columns, max(1, len(arms)))
	const head, plot, foot = 34.0, 128.0, 44.0 // pixels: two lines of title, the plot, the time axis
	cell := width / float64(columns)
	if columns == 1 { // one arm alone is not stretched over the page
		cell = math.Min(width, 420)
	}
	rows := (len(arms) + columns - 1) / columns
	f := &draw.Figure{Title: "Loss of each arm against the baseline", W: width, H: float64(rows)*(head+plot+foot) - 8}
	f.Desc = describeCurves(arms)
	var data []panelData
	for i, a := range arms {
		x, y := cell*float64(i%columns), (head+plot+foot)*float64(i/columns)
		p := frame{x0: x + 40, y0: y + head, x1: x + cell - 102, y1: y + head + plot}
		p.x = draw.Linear{Lo: 0, Hi: v.duration(), P0: p.x0, P1: p.x1}
		p.y = draw.Log{Lo: lo, Hi: hi, P0: p.y1, P1: p.y0}
		drawPanel(f.Sub("arm", draw.Attr{Name: "arm", Value: a.Slug}), v, p, a, x, cell)
		shown := []*armView{a}
		if v.baseline != nil && v.baseline != a {
			shown = []*armView{v.baseline, a}
		}
		data = append(data, p.data(lo, hi, v.duration(), shown...))
	}
	attach(f, data)
	return f
}

// drawPanel draws one arm's plot in a cell that starts at x.
func drawPanel(g *draw.Group, v *view, p frame, a *armView, x, cell float64) {
	tx := x + 2 // where the title starts: after the mark, when there is one
	if k, ok := a.kind(); ok {
		drawMark(g, x+8, p.y0-21, 4.6, k)
		tx = x + 20
	}
	for i, l := range draw.Wrap(a.Label(), 11.5, true, x+cell-tx-14, 2) {
		if i == 0 {
			g.Text(tx, p.y0-17, l, draw.Type{Size: 11.5, Bold: true})
		} else {
			g.Text(tx, p.y0-4, l, draw.Type{Size: 11.5, Bold: true})
		}
	}
	p.grid(g, draw.TickLabel)
	p.epochAxis(g, "epoch")
	// The baseline lies under the arm: where they coincide, the arm is seen.
	var ends []lineEnd
	if b := v.baseline; b != nil && b != a {
		p.band(g, &b.Training, draw.Fill(draw.Base).With(0.28))
		ends = append(ends, panelLine(g, p, &b.Training, "baseline", draw.Line(draw.Base, 2.4))...)
		ends = append(ends, heldOut(g, p, b, "baseline ", draw.Base)...)
	}
	p.band(g, &a.Training, draw.Fill(draw.Arm).With(0.22))
	ends = append(ends, panelLine(g, p, &a.Training, "this arm", draw.Line(draw.Arm, 1.8))...)
	ends = append(ends, heldOut(g, p, a, "", draw.Arm)...)
	writeEnds(g, p, ends)
	for _, r := range a.Runs {
		if r.Diverged != "" && v.clock.per > 0 {
			x := math.Min(p.x1, p.x.At(float64(r.DivergedStep)/v.clock.per))
			drawMark(g.Titled(fmt.Sprintf("replicate %d diverged in step %d: %s", r.Replicate, r.DivergedStep, plain(r.Diverged))), x, p.y0+5, 3.6, results.Diverged)
		}
	}
}

// heldOut draws the losses on examples that training does not see.
func heldOut(g *draw.Group, p frame, a *armView, prefix string, r draw.Role) []lineEnd {
	ends := panelLine(g, p, &a.Test, prefix+"test", draw.Line(r, 1.4).Dashed(5, 2.5))
	return append(ends, panelLine(g, p, &a.Validation, prefix+"valid.", draw.Line(r, 1.4).Dashed(1.5, 2))...)
}

// lineEnd is where a line stops and what it is called.
type lineEnd struct {
	x, y float64
	name string
	role draw.Role
}

// panelLine draws a median; nothing when the curve is empty.
func panelLine(g *draw.Group, p frame, c *curve, name string, s draw.Style) []lineEnd {
	k := c.last()
	if k < 0 {
		return nil
	}
	pts := p.line(c.X, c.Mid)
	if s.Dash != nil { // evaluated now and then: join what was
		pts = joined(pts)
	}
	g.Polyline(pts, s)
	return []lineEnd{{p.x.At(c.X[k]), p.inside(c.Mid[k]), name + " " + significant(c.Mid[k], 3), s.Line}}
}

// joined leaves out the points that are not there.
func joined(pts []draw.Point) []draw.Point {
	var out []draw.Point
	for _, q := range pts {
		if !math.IsNaN(q.Y) {
			out = append(out, q)
		}
	}
	return out
}

// writeEnds writes the names of a panel's lines beside it without overlaps.
func writeEnds(g *draw.Group, p frame, ends []lineEnd) {
	want := make([]float64, len(ends))
	for i, e := range ends {
		want[i] = e.y
	}
	for i, y := range draw.Spread(want, 12.5, p.y0+2, p.y1-2) {
		e := ends[i]
		g.Polyline([]draw.Point{{X: e.x, Y: e.y}, {X: math.Max(e.x, p.x1), Y: e.y}, {X: p.x1 + 6, Y: y}}, draw.Line(e.role, 0.7).With(0.7))
		role := e.role
		if role == draw.Base {
			role = draw.Soft // grey enough to read
		}
		g.Text(p.x1+8, y+3.5, e.name, draw.Type{Size: 10, Role: role, Max: 92})
	}
}
