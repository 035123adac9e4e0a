package report

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"ulpine/results"
	"ulpine/results/report/draw"
)

// stations are the rounding points of a training step in order of computation.
var stations = []struct {
	phase  string
	points []string
}{
	{"input", []string{"input"}},
	{"forward", []string{"weight", "operand", "product", "sum", "outer", "statistic", "moment", "activation"}},
	{"loss", []string{"gradient"}},
	{"weight gradient", []string{"activation", "gradient", "product", "sum", "outer", "result", "residue"}},
	{"input gradient", []string{"weight", "gradient", "product", "sum", "outer", "statistic", "result"}},
	{"update", []string{"state", "step", "master"}},
}

// station is a rounding point on the map.
type station struct{ phase, point string }

// mapStations are the stations that any arm of the study has a setting for, in
// order of computation; points the list does not know come last.
func mapStations(v *view) []station {
	found := map[station]bool{}
	var strange []station
	for _, a := range v.arms {
		for _, s := range a.Settings {
			st := stationOf(s.Point)
			if !found[st] {
				found[st] = true
				strange = append(strange, st)
			}
		}
	}
	var out []station
	for _, ph := range stations {
		for _, p := range ph.points {
			if st := (station{ph.phase, p}); found[st] {
				out = append(out, st)
				strange = slices.DeleteFunc(strange, func(s station) bool { return s == st })
			}
		}
	}
	return append(out, strange...)
}

// stationOf finds a point's station; "update.state.velocity" is at "state".
func stationOf(point string) station {
	phase, name := splitPoint(point)
	name, _, _ = strings.Cut(name, ".")
	return station{phase, name}
}

// stop is what an arm does at a station, over all layers.
type stop struct {
	there      bool
	idle       bool // every layer reuses what another point has rounded
	changed    bool // differs from the baseline in at least one layer
	least      int  // fewest bits over the layers
	most       int
	stochastic bool
	guilty     bool
	words      string
}

// stops reads an arm's settings off against the baseline's.
func (v *view) stops(a *armView, at []station) []stop {
	type place struct {
		layer int
		point string
	}
	base := map[place]results.Setting{}
	if v.baseline != nil {
		for _, s := range v.baseline.Settings {
			base[place{s.Layer, s.Point}] = s
		}
	}
	out := make([]stop, len(at))
	kinds := make([][]string, len(at))
	for _, s := range a.Settings {
		i := slices.Index(at, stationOf(s.Point))
		o := &out[i]
		if !o.there || s.Bits < o.least {
			o.least = s.Bits
		}
		o.idle = s.Rounding == reused && (o.idle || !o.there)
		o.there, o.most = true, max(o.most, s.Bits)
		// A point that the baseline has no setting for is a change by being there.
		b, known := base[place{s.Layer, s.Point}]
		if known && differs(s, b) || !known && v.baseline != nil && a != v.baseline {
			o.changed = true
		}
		o.stochastic = o.stochastic || strings.HasPrefix(strings.ToLower(s.Rounding), "stochastic")
		o.guilty = o.guilty || slices.Contains(a.Guilty, s.Point)
		w := strings.Join(slices.DeleteFunc([]string{plain(s.Format), plain(s.Rounding), plain(s.Order)}, func(x string) bool { return x == "" }), ", ")
		if !slices.Contains(kinds[i], w) {
			kinds[i] = append(kinds[i], w)
		}
	}
	for i := range out {
		out[i].words = strings.Join(kinds[i], "; ")
	}
	return out
}

// differs compares what changes a rounded value. Where both reuse another
// point's values, any difference is that point's.
func differs(a, b results.Setting) bool {
	if a.Rounding == reused && b.Rounding == reused {
		return false
	}
	return a.Format != b.Format || a.Rounding != b.Rounding || a.Order != b.Order || a.Overflow != b.Overflow
}

// mapRows is the number of arms on one map.
const mapRows = 16

// stepMap draws the training step once, as a line with a station a rounding
// point, and under it each arm as a row of columns: their height is the width of
// the format, dark where the arm differs from the baseline.
func stepMap(v *view, width float64) []*draw.Figure {
	at := mapStations(v)
	if len(at) == 0 {
		return nil
	}
	// Every part repeats the map, so that each can be read by itself.
	var out []*draw.Figure
	for i := 0; i < len(v.arms); i += mapRows {
		m := &mapLayout{v: v, at: at, width: width, arms: v.arms[i:min(i+mapRows, len(v.arms))]}
		out = append(out, m.draw())
	}
	return out
}

// mapLayout holds the columns of a step map.
type mapLayout struct {
	v      *view
	at     []station
	arms   []*armView
	width  float64
	narrow bool
	left   float64
	xs     []float64 // middle of each station
	pitch  float64
	line   float64 // y of the track
	most   int     // bits of the tallest column
}

// draw lays the map out: the track above, a row an arm below.
func (m *mapLayout) draw() *draw.Figure {
	m.narrow = m.width < 600
	m.left, m.line = 200, 62
	if m.narrow {
		m.left = 14
	}
	m.columns()
	row, first := 44.0, m.line+68
	if m.narrow {
		row, first = 58, m.line+72
	}
	f := &draw.Figure{Title: "Step map: the rounding points of a training step and what each arm does there", W: m.width, H: first + row*float64(len(m.arms)) + 6}
	m.track(&f.Group, first+row*float64(len(m.arms)))
	var desc []string
	m.most = 1
	for _, a := range m.arms {
		for _, s := range a.Settings {
			m.most = max(m.most, s.Bits)
		}
	}
	for i, a := range m.arms {
		desc = append(desc, m.arm(&f.Group, first+row*float64(i), row, a))
	}
	f.Desc = strings.Join(desc, " ")
	return f
}

// columns spaces the stations, with a wider gap between phases.
func (m *mapLayout) columns() {
	gaps := 0
	for i := 1; i < len(m.at); i++ {
		if m.at[i].phase != m.at[i-1].phase {
			gaps++
		}
	}
	const gap = 0.7 // of a pitch, the distance of two stations
	m.pitch = math.Min(34, (m.width-m.left-16)/(float64(len(m.at))+gap*float64(gaps)))
	x := m.left + m.pitch/2
	for i := range m.at {
		if i > 0 && m.at[i].phase != m.at[i-1].phase {
			x += gap * m.pitch
		}
		m.xs = append(m.xs, x)
		x += m.pitch
	}
}

// track draws the line through the stations, their names and phases, and the
// way back from the update to the next step.
func (m *mapLayout) track(g *draw.Group, bottom float64) {
	n := len(m.xs)
	ink := draw.Line(draw.Ink, 2.2)
	g.Line(m.xs[0], m.line, m.xs[n-1], m.line, ink)
	if n > 1 {
		back := draw.Line(draw.Soft, 1.2).Dashed(3, 3)
		x0, x1, y := m.xs[m.start()], m.xs[n-1], 12.0
		g.Polyline([]draw.Point{{X: x1, Y: m.line - 6}, {X: x1, Y: y}, {X: x0, Y: y}, {X: x0, Y: m.line - 6}}, back)
		g.Polyline([]draw.Point{{X: x0 - 4, Y: m.line - 13}, {X: x0, Y: m.line - 6}, {X: x0 + 4, Y: m.line - 13}}, draw.Line(draw.Soft, 1.4))
		// The words stand in a gap of the line back.
		words := "next step"
		w := draw.Width(words, 10.5, false)
		g.Rect((x0+x1-w)/2-5, y-7, w+10, 14, draw.Fill(draw.Paper))
		g.Text((x0+x1)/2, y+4, words, draw.Type{Size: 10.5, Anchor: draw.Middle, Role: draw.Soft})
	}
	for i, st := range m.at {
		g.Circle(m.xs[i], m.line, 3.6, draw.Style{Fill: draw.Paper, Line: draw.Ink, Width: 1.8})
		// Turned by a quarter, words hang from their base line to the right of it.
		g.Text(m.xs[i]-3.6, m.line+11, st.point, draw.Type{Size: math.Min(10.5, m.pitch-0.6), Turn: 90, Role: draw.Soft})
	}
	m.phases(g, bottom)
}

// start is the station to which the new weights go: the forward weights.
func (m *mapLayout) start() int {
	return max(0, slices.Index(m.at, station{"forward", "weight"}))
}

// phases names the stretches of the track and parts them by thin lines.
func (m *mapLayout) phases(g *draw.Group, bottom float64) {
	for i := 0; i < len(m.at); {
		j := i
		for j+1 < len(m.at) && m.at[j+1].phase == m.at[i].phase {
			j++
		}
		x0, x1 := m.xs[i]-m.pitch/2, m.xs[j]+m.pitch/2
		words := strings.Fields(m.at[i].phase)
		for k, w := range words { // above the stretch, a word a line
			w = draw.Fit(w, 10.5, true, x1-x0+1.2*m.pitch)
			half := draw.Width(w, 10.5, true) / 2
			x := (x0 + x1) / 2
			// Names keep clear of the way back.
			if i == m.start() && i < j {
				x = math.Max(x, m.xs[i]+7+half)
			}
			if j == len(m.at)-1 && i < j {
				x = math.Min(x, m.xs[j]-7-half)
			}
			g.Text(x, m.line-12-11.5*float64(len(words)-1-k), w, draw.Type{Size: 10.5, Bold: true, Anchor: draw.Middle})
		}
		if i > 0 {
			x := (m.xs[i-1] + m.xs[i]) / 2
			g.Line(x, m.line+8, x, bottom, draw.Line(draw.Faint, 1))
		}
		i = j + 1
	}
}

// arm draws one arm's row and returns it in words.
func (m *mapLayout) arm(g *draw.Group, y, row float64, a *armView) string {
	g = g.Sub("arm", draw.Attr{Name: "arm", Value: a.Slug})
	foot := y + row - 8
	if m.narrow { // the name stands above the row, on clean ground
		g.Rect(0, y, m.width, 18, draw.Fill(draw.Paper))
		g.Text(m.left-7, y+13, a.Label(), draw.Type{Size: 11.5, Bold: true, Max: m.width - 2*m.left})
	} else {
		lines := draw.Wrap(a.Label(), 11.5, true, m.left-16, 2)
		for k, l := range lines {
			g.Text(0, foot-8-14*float64(len(lines)-1-k), l, draw.Type{Size: 11.5, Bold: true})
		}
	}
	const tall = 25.0 // pixels of the widest format
	g.Line(m.xs[0]-m.pitch/2, foot+0.5, m.xs[len(m.xs)-1]+m.pitch/2, foot+0.5, draw.Line(draw.Faint, 1))
	var changed []string
	for i, s := range m.v.stops(a, m.at) {
		if !s.there {
			continue
		}
		m.column(g, m.xs[i], foot, tall, s, m.at[i])
		if s.changed {
			changed = append(changed, m.at[i].phase+" "+m.at[i].point+" "+s.words)
		}
	}
	if len(changed) == 0 {
		return a.Label() + ": nothing differs from the baseline."
	}
	return a.Label() + ": " + strings.Join(changed, ", ") + "."
}

// column draws one stop: as tall as the format is wide, lighter above the
// narrowest layer where layers differ, dotted on top where rounding is stochastic.
func (m *mapLayout) column(g *draw.Group, x, foot, tall float64, s stop, at station) {
	t := g.Titled(fmt.Sprintf("%s, %s: %s", at.phase, at.point, s.words))
	w := math.Min(15, m.pitch-2)
	height := func(b int) float64 { return math.Max(2, tall*float64(b)/float64(m.most)) }
	paint := draw.Fill(draw.Faint)
	if s.changed {
		paint = draw.Fill(draw.Arm)
	}
	if s.idle && !s.changed {
		t.Rect(x-w/2+0.6, foot-height(s.most), w-1.2, height(s.most), draw.Line(draw.Faint, 1.2))
		return
	}
	t.Rect(x-w/2, foot-height(s.least), w, height(s.least), paint)
	if s.most > s.least {
		t.Rect(x-w/2, foot-height(s.most), w, height(s.most)-height(s.least), paint.With(0.4))
	}
	top := foot - height(s.most)
	if s.changed && w >= 12 { // the width in figures: in the column, or on it when it is too low
		if height(s.least) >= 11 {
			t.Text(x, foot-2.5, fmt.Sprint(s.least), draw.Type{Size: 9, Anchor: draw.Middle, Role: draw.Paper, Bold: true})
		} else {
			t.Text(x, top-2, fmt.Sprint(s.least), draw.Type{Size: 9, Anchor: draw.Middle, Bold: true})
			top -= 9
		}
	}
	if s.stochastic {
		n := 3
		if w < 9 {
			n = 2
		}
		for k := range n {
			t.Circle(x-w/2+w*(float64(k)+0.5)/float64(n), top-3, 1.2, draw.Fill(draw.Ink))
		}
	}
	if s.guilty {
		t.Circle(x, (top+foot)/2, math.Max(w, foot-top)/2+5, draw.Line(draw.Post, 2.2))
	}
}
