package report

import (
	"cmp"
	"html/template"
	"math"
	"slices"
	"strconv"

	"ulpine/results"
)

// shownCounters is the number of rows an arm has in the table of range events;
// the rest is folded away.
const shownCounters = 12

// rowGroup is one arm's rows, those that are folded away apart.
type rowGroup struct {
	Head string
	Rows [][]string
	More *tabular // nil: all are shown
	Rest string   // what is folded away, in words
}

// rangesData is the section of range events.
type rangesData struct {
	Figure  template.HTML
	Epochs  template.HTML // empty: not looked at
	Caption string
	Columns []column
	Groups  []rowGroup
	Notes   []string
}

// counterSection sums the range counters over an arm's runs: arm by arm, the
// points with the most events first.
func counterSection(v *view) any {
	d := rangesData{
		Figure: figureHTML(v, "range-map", "Columns: the rounding points in the order of computation; rows: the layers of an arm. "+
			"A cell fills from below with values that underflowed to zero and from above with values that overflowed, saturated or became no number, on a logarithmic scale from one in ten million to all of them. "+
			"The figure in a cell is their number in a million values. An empty cell was counted and saw none; no cell: nothing is rounded there. Layers and arms without any event are not drawn.", false),
		Epochs:  figureHTML(v, "range-by-epoch", "The same, epoch by epoch, of the runs that were looked at more closely. Cells as above; where only samples were looked at, a cell is their share, and an epoch without a sample has no cell.", false),
		Caption: "Range events, summed over the replicates of an arm, most events first",
		Columns: columns("Layer", "point", "#overflow", "#underflow to zero", "#saturation", "#NaN", "#in a million"),
	}
	quiet := 0 // points without events
	for _, a := range v.arms {
		g, still := v.rangeGroup(a, d.Columns)
		quiet += still
		if len(g.Rows) > 0 {
			d.Groups = append(d.Groups, g)
		}
	}
	d.Notes = append(d.Notes, plural(quiet, "other counted point")+" saw nothing leave the range. Only training is counted; underflow is counted at stored points, not inside products and sums.")
	if len(v.Volumes) == 0 {
		d.Notes = append(d.Notes, "How many values each point rounded was not recorded: events are given as counts alone.")
	}
	return d
}

// rangeTable is the same as one table.
func (v *view) rangeTable() *tabular {
	d := counterSection(v).(rangesData)
	t := &tabular{Caption: d.Caption, Columns: append(columns("Arm"), d.Columns...), Notes: d.Notes}
	for _, g := range d.Groups {
		rows := g.Rows
		if g.More != nil {
			rows = append(slices.Clone(rows), g.More.Rows...)
		}
		for _, r := range rows {
			t.Rows = append(t.Rows, append([]string{g.Head}, r...))
		}
	}
	return t
}

// rangeGroup is an arm's rows and the number of its points without an event.
func (v *view) rangeGroup(a *armView, cols []column) (g rowGroup, quiet int) {
	all := tallies(a)
	slices.SortStableFunc(all, func(x, y results.PointCounts) int { return cmp.Compare(events(y.Counts), events(x.Counts)) })
	for _, c := range all {
		if events(c.Counts) == 0 {
			quiet++
			continue
		}
		g.Rows = append(g.Rows, []string{
			layerName(c.Layer, c.Name), plain(c.Point), count(c.Counts.Overflow), count(c.Counts.Underflow),
			count(c.Counts.Saturated), count(c.Counts.NaN), inMillion(v.share(a, c, events(c.Counts))),
		})
	}
	g.Head = a.Label() + ", " + plural(len(a.Runs), "run")
	if rest := len(g.Rows) - shownCounters; rest > 0 {
		g.Rest = plural(rest, "more point") + " of " + a.Label()
		g.More = &tabular{Caption: g.Rest, Columns: cols, Rows: g.Rows[shownCounters:]}
		g.Rows = g.Rows[:shownCounters]
	}
	return g, quiet
}

// events is the number of range events of all kinds.
func events(c results.Counts) uint64 { return c.Overflow + c.Underflow + c.Saturated + c.NaN }

// share is n as a share of the values that the arm's runs rounded at a point: a
// run that broke off counts as far as it came. NaN where their number is not known.
func (v *view) share(a *armView, c results.PointCounts, n uint64) float64 {
	for _, vol := range v.Volumes {
		if vol.Layer != c.Layer || vol.Point != c.Point || vol.Values == 0 {
			continue
		}
		values := 0.0
		for _, r := range a.Runs {
			done := 1.0
			if v.clock.steps > 0 && len(r.Steps) > 0 {
				done = float64(len(r.Steps)) / float64(v.clock.steps)
			}
			values += done * float64(vol.Values)
		}
		if values > 0 {
			return float64(n) / values
		}
	}
	return math.NaN()
}

// inMillion spells a share as a number in a million, short enough for a cell:
// "0.4", "85", "1.2k", "850k".
func inMillion(share float64) string {
	switch m := share * 1e6; {
	case math.IsNaN(m):
		return missing
	case m == 0:
		return "0"
	case m < 0.1:
		return "<0.1"
	case m < 9.95:
		return fixed(m, 1)
	case m < 999.5:
		return fixed(m, 0)
	case m < 9950:
		return fixed(m/1e3, 1) + "k"
	case m < 999500:
		return fixed(m/1e3, 0) + "k"
	}
	return "all"
}

// tallies sums an arm's counters over its runs, in order of first appearance.
func tallies(a *armView) []results.PointCounts {
	type place struct {
		layer       int
		name, point string
	}
	at := map[place]int{}
	var out []results.PointCounts
	for _, r := range a.Runs {
		for _, c := range r.Counters {
			k := place{c.Layer, c.Name, c.Point}
			i, ok := at[k]
			if !ok {
				i = len(out)
				at[k] = i
				out = append(out, results.PointCounts{Layer: c.Layer, Name: c.Name, Point: c.Point})
			}
			n := &out[i].Counts
			n.Overflow += c.Counts.Overflow
			n.Underflow += c.Counts.Underflow
			n.Saturated += c.Counts.Saturated
			n.NaN += c.Counts.NaN
		}
	}
	return out
}

// count spells a count with thin spaces between thousands.
func count(n uint64) string {
	s := strconv.FormatUint(n, 10)
	for i := len(s) - 3; i > 0; i -= 3 {
		s = s[:i] + "\u202f" + s[i:]
	}
	return s
}
