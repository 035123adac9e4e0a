package report

import (
	"fmt"
	"html/template"
	"math"
	"slices"
	"strings"

	"ulpine/results"
	"ulpine/results/report/draw"
)

// gridView is one grid of the plan with the roles that its axes play.
type gridView struct {
	name   string
	arms   []*armView
	across axisView   // along the level axis of a plot
	lines  axisView   // one line a value; no name: one line
	panels []axisView // one plot a combination of values
}

// axisView is an axis with its values in order of appearance.
type axisView struct {
	name   string
	values []string
}

// grids are the study's grids, in order of appearance.
func (v *view) grids() []gridView {
	var out []gridView
	for _, a := range v.others() {
		if plain(a.Grid) == "" || len(a.Axes) == 0 {
			continue
		}
		i := slices.IndexFunc(out, func(g gridView) bool { return g.name == plain(a.Grid) })
		if i < 0 {
			i = len(out)
			out = append(out, gridView{name: plain(a.Grid)})
		}
		out[i].arms = append(out[i].arms, a)
	}
	for i := range out {
		out[i].assign()
	}
	return out
}

// assign gives every axis its role: roundings become lines, the axis with the
// most values runs across, the others part the plots.
func (g *gridView) assign() {
	var axes []axisView
	for _, a := range g.arms {
		for _, c := range a.Axes {
			i := slices.IndexFunc(axes, func(x axisView) bool { return x.name == plain(c.Axis) })
			if i < 0 {
				i = len(axes)
				axes = append(axes, axisView{name: plain(c.Axis)})
			}
			if !slices.Contains(axes[i].values, plain(c.Value)) {
				axes[i].values = append(axes[i].values, plain(c.Value))
			}
		}
	}
	if i := slices.IndexFunc(axes, axisView.rounding); i >= 0 && len(axes) > 1 {
		g.lines = axes[i]
		axes = slices.Delete(axes, i, i+1)
	}
	most := 0
	for i, x := range axes {
		if len(x.values) > len(axes[most].values) {
			most = i
		}
	}
	g.across = axes[most]
	g.panels = slices.Delete(axes, most, most+1)
}

// rounding reports whether all values of the axis are ways of rounding.
func (x axisView) rounding() bool {
	return !slices.ContainsFunc(x.values, func(s string) bool {
		s = strings.ToLower(s)
		return !slices.ContainsFunc([]string{"nearest", "stochastic", "toward", "odd", "up", "down"}, func(w string) bool { return strings.HasPrefix(s, w) || strings.HasPrefix(s, "to-"+w) })
	})
}

// at is an arm's value on an axis; empty: it has none.
func (x axisView) at(a *armView) string {
	for _, c := range a.Axes {
		if plain(c.Axis) == x.name {
			return plain(c.Value)
		}
	}
	return ""
}

// plotOf is one plot of a grid.
type plotOf struct {
	head string
	arms []*armView
}

// plots parts the grid's arms by the values of the panel axes.
func (g *gridView) plots() []plotOf {
	var out []plotOf
	for _, a := range g.arms {
		var words []string
		for _, x := range g.panels {
			words = append(words, x.name+" "+x.at(a))
		}
		head := strings.Join(words, ", ")
		i := slices.IndexFunc(out, func(p plotOf) bool { return p.head == head })
		if i < 0 {
			i = len(out)
			out = append(out, plotOf{head: head})
		}
		out[i].arms = append(out[i].arms, a)
	}
	return out
}

// gridSection groups the arms of each grid; nil when the plan has none.
func gridSection(v *view) any {
	gs := v.grids()
	if len(gs) == 0 {
		return nil
	}
	data := struct {
		Figures []template.HTML
		Tables  []*tabular
	}{}
	add := func(id, caption string) {
		if f := figureHTML(v, id, caption, false); f != "" {
			data.Figures = append(data.Figures, f)
		}
	}
	add("grids", "Each mark is an arm: its mean paired difference to the baseline with its interval and its verdict's mark. Upright: better is higher; the level post is the margin. Lines join arms that differ in the level axis alone; all plots of a grid share their axes.")
	add("grid-bits", "The same arms against the mean bits of a stored value, one line a way of rounding.")
	for i := range gs {
		data.Tables = append(data.Tables, v.gridTable(&gs[i]))
	}
	return data
}

// gridTable lists a grid's arms by their coordinates.
func (v *view) gridTable(g *gridView) *tabular {
	axes := append([]axisView{}, g.panels...)
	axes = append(axes, g.across)
	if g.lines.name != "" {
		axes = append(axes, g.lines)
	}
	var heads []string
	for _, x := range axes {
		heads = append(heads, orMissing(x.name))
	}
	t := &tabular{Caption: "Grid: " + g.name, Columns: columns(append(heads, "#bits a value", "#difference"+commaShort(v), "#interval", "#n", "verdict")...)}
	for _, a := range g.arms {
		var row []string
		for _, x := range axes {
			row = append(row, orMissing(x.at(a)))
		}
		row = append(row, bits(a.Bits))
		if c := a.Comparison; c != nil {
			row = append(row, v.words.diff(c.Mean), v.words.interval(c.Low, c.High), fmt.Sprint(c.N), verdictWords(c.Verdict))
		} else {
			row = append(row, missing, missing, missing, "no verdict")
		}
		t.Rows = append(t.Rows, row)
	}
	return t
}

// gridFigures draws each grid as small multiples.
func gridFigures(v *view, width float64) []*draw.Figure {
	var out []*draw.Figure
	gs := v.grids()
	for i := range gs {
		g := &gs[i]
		place := func(a *armView) float64 { return float64(slices.Index(g.across.values, g.across.at(a))) }
		line := func(a *armView) string { return g.lines.at(a) }
		m := &multiples{v: v, title: "Grid " + g.name, axis: g.across.name, ticks: g.across.values, place: place, line: line, width: width}
		m.domain(g.arms)
		ps := g.plots()
		for k := 0; k < len(ps); k += panelsPerFigure {
			out = append(out, m.draw(ps[k:min(k+panelsPerFigure, len(ps))]))
		}
	}
	return out
}

// gridBits draws each grid against bits, one line a way of rounding; grids whose
// arms store in one width are left out.
func gridBits(v *view, width float64) []*draw.Figure {
	var out []*draw.Figure
	for _, g := range v.grids() {
		var arms []*armView
		lo, hi := math.Inf(1), 0.0
		for _, a := range g.arms {
			if a.Comparison != nil && a.Bits > 0 && !math.IsInf(a.Bits, 0) {
				arms = append(arms, a)
				lo, hi = math.Min(lo, a.Bits), math.Max(hi, a.Bits)
			}
		}
		if len(arms) < 2 || hi-lo < 0.5 {
			continue
		}
		m := &multiples{
			v: v, title: "Grid " + g.name + " against bits, by rounding", axis: "mean bits of a stored value", width: width,
			place: func(a *armView) float64 { return a.Bits }, line: func(a *armView) string { return roundingOf(a) },
			lo: lo, hi: hi,
		}
		m.domain(arms)
		out = append(out, m.draw([]plotOf{{arms: arms}}))
	}
	return out
}

// roundingOf is how an arm rounds: stochastic where any of its points does.
func roundingOf(a *armView) string {
	how := ""
	for _, s := range a.Settings {
		r := plain(s.Rounding)
		switch {
		case isStochastic(r):
			return "stochastic"
		case r != "" && r != "exact" && r != reused && r != "nearest-even":
			how = r
		}
	}
	if how == "" {
		return "nearest-even"
	}
	return how
}

// byPlace sorts arms from left to right.
func byPlace(arms []*armView, place func(*armView) float64) []*armView {
	out := slices.Clone(arms)
	slices.SortStableFunc(out, func(a, b *armView) int {
		switch x, y := place(a), place(b); {
		case x < y:
			return -1
		case x > y:
			return 1
		}
		return 0
	})
	return out
}

// compared are the arms that have a difference to show.
func compared(arms []*armView) []results.Comparison {
	var out []results.Comparison
	for _, a := range arms {
		if a.Comparison != nil {
			out = append(out, *a.Comparison)
		}
	}
	return out
}
