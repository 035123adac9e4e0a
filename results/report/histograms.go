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

// seen is one histogram with the format that it is held against.
type seen struct {
	results.Histogram
	arm       *armView
	replicate uint64
	format    string
	limits    *results.Range // nil: the format's range is not known
}

// shownHistograms is the number of points of a run that are drawn and listed;
// quietHistograms the same where nothing lies outside any range.
const (
	shownHistograms = 6
	quietHistograms = 3
)

// shownHistograms are, run by run, the points with the largest share of values
// outside their range, then those of the narrowest ranges, in the order of
// computation; hidden counts the others.
func (v *view) shownHistograms() (shown []seen, hidden int) {
	all := v.histograms()
	for from := 0; from < len(all); {
		to := from + 1
		for to < len(all) && all[to].arm == all[from].arm && all[to].replicate == all[from].replicate {
			to++
		}
		run := all[from:to]
		order := make([]int, len(run))
		for i := range order {
			order[i] = i
		}
		slices.SortStableFunc(order, func(a, b int) int {
			return cmp.Or(cmp.Compare(run[b].share(), run[a].share()), cmp.Compare(run[a].binades(), run[b].binades()))
		})
		most := shownHistograms
		if run[order[0]].share() == 0 {
			most = quietHistograms
		}
		order = order[:min(len(order), most)]
		slices.Sort(order)
		for _, i := range order {
			shown = append(shown, run[i])
		}
		hidden += len(run) - len(order)
		from = to
	}
	return shown, hidden
}

// share is the share of values outside the range of the format.
func (s *seen) share() float64 {
	below, above := s.outside()
	return float64(below+above) / float64(total(&s.Histogram))
}

// binades is the width of the format's range; of one that is not known, as wide as any.
func (s *seen) binades() int {
	if s.limits == nil {
		return math.MaxInt
	}
	return s.limits.Largest - s.limits.Least
}

// histograms are those of the last epoch of every point, arm by arm.
func (v *view) histograms() []seen {
	var out []seen
	for i := range v.Diagnoses {
		d := &v.Diagnoses[i]
		k := slices.IndexFunc(v.arms, func(a *armView) bool { return a.Slug == d.Arm })
		if k < 0 {
			continue
		}
		for _, h := range d.Histograms {
			if total(&h) == 0 {
				continue
			}
			at := slices.IndexFunc(out, func(s seen) bool {
				return s.arm == v.arms[k] && s.replicate == d.Replicate && s.Layer == h.Layer && s.Point == h.Point
			})
			if at >= 0 {
				if h.Epoch > out[at].Epoch {
					out[at].Histogram = h
				}
				continue
			}
			s := seen{Histogram: h, arm: v.arms[k], replicate: d.Replicate}
			v.measure(&s)
			out = append(out, s)
		}
	}
	return out
}

// measure finds the format at the histogram's point, and its range.
func (v *view) measure(s *seen) {
	for _, x := range s.arm.Settings {
		if x.Layer == s.Layer && x.Point == s.Point {
			s.format = plain(x.Format)
		}
	}
	for i := range v.Ranges {
		if plain(v.Ranges[i].Format) == s.format {
			s.limits = &v.Ranges[i]
		}
	}
}

// total is the number of values in a histogram.
func total(h *results.Histogram) uint64 {
	n := h.Zeros + h.NotFinite
	for _, c := range h.Counts {
		n += c
	}
	return n
}

// outside are the values below the least and above the largest value of the
// format, by exponent: values within the last binade of rounding to zero or
// beyond the largest fraction are not told apart.
func (s *seen) outside() (below, above uint64) {
	if s.limits == nil {
		return 0, 0
	}
	for i, c := range s.Counts {
		switch e := s.Lowest + i; {
		case e < s.limits.Least:
			below += c
		case e > s.limits.Largest:
			above += c
		}
	}
	return below, above
}

// words counts what falls outside.
func (s *seen) words() string {
	n := float64(total(&s.Histogram))
	share := func(c uint64) string { return significant(100*float64(c)/n, 2) + " %" }
	out := []string{share(s.Zeros) + " zeros"}
	if s.limits == nil {
		out = append(out, "range not recorded")
	} else {
		below, above := s.outside()
		out = append([]string{share(below) + " below", share(above) + " above"}, out...)
	}
	if s.NotFinite > 0 {
		out = append(out, share(s.NotFinite)+" not finite")
	}
	return strings.Join(out, ", ")
}

// head names a histogram: its layer by number and kind, the table has the rest.
func (s *seen) head() string {
	h := plain(s.Point)
	if s.Layer >= 0 {
		h = strings.Join(firstWords(layerName(s.Layer, s.Name), 2), " ") + ", " + h
	}
	if s.Epoch > 0 {
		h += fmt.Sprintf(", epoch %d", s.Epoch)
	}
	return h
}

// firstWords are at most n words of s.
func firstWords(s string, n int) []string {
	words := strings.Fields(s)
	return words[:min(len(words), n)]
}

// histogramSection is left out when nothing was recorded.
func histogramSection(v *view) any {
	t := v.histogramTable()
	if t == nil {
		return nil
	}
	return figureWith{
		Figure:  figureHTML(v, "exponents", "Columns: values by binary exponent, as shares of all values at the point, before they are rounded. Below them the range of the format as a ruler: its thin part holds subnormal numbers; an end without a stroke goes on to the power of two beside it. What lies outside it is hatched and counted in words.", false),
		Caption: t.Caption, Table: t,
	}
}

// histogramTable counts what lies outside the range; nil when nothing was recorded.
func (v *view) histogramTable() *tabular {
	all, hidden := v.shownHistograms()
	if len(all) == 0 {
		return nil
	}
	t := &tabular{
		Caption: "Values at a rounding point, before rounding, against its format",
		Columns: columns("Arm and replicate", "layer", "point", "format", "#values", "#below the least", "#above the largest", "#zeros", "#not finite"),
	}
	for i := range all {
		s := &all[i]
		below, above := s.outside()
		row := []string{
			fmt.Sprintf("%s, %d", s.arm.Label(), s.replicate), layerName(s.Layer, s.Name), plain(s.Point), orMissing(s.format),
			count(total(&s.Histogram)), count(below), count(above), count(s.Zeros), count(s.NotFinite),
		}
		if s.limits == nil {
			row[5], row[6] = missing, missing
		}
		t.Rows = append(t.Rows, row)
	}
	if hidden > 0 {
		t.Notes = append(t.Notes, fmt.Sprintf("Of each run the %d points with the largest share of values outside their range, or, where there are none, %d of its narrowest formats; numbers/histograms.csv has the other %s too.",
			shownHistograms, quietHistograms, plural(hidden, "histogram")))
	}
	return t
}

// exponentFigures draws histograms as small plots in three columns.
func exponentFigures(v *view, width float64) []*draw.Figure {
	all, _ := v.shownHistograms()
	var out []*draw.Figure
	for i := 0; i < len(all); i += panelsPerFigure {
		out = append(out, exponentPart(all[i:min(i+panelsPerFigure, len(all))], width))
	}
	return out
}

// exponentPart is one figure of histograms.
func exponentPart(all []seen, width float64) *draw.Figure {
	columns := min(3, len(all))
	if width < 600 {
		columns = 1
	}
	const head, plot, foot = 46.0, 96.0, 62.0
	cell := width / float64(columns)
	if columns == 1 {
		cell = math.Min(width, 420)
	}
	rows := (len(all) + columns - 1) / columns
	f := &draw.Figure{Title: "Exponents of values against the range of their format", W: width, H: float64(rows) * (head + plot + foot)}
	var said []string
	for i := range all {
		s := &all[i]
		x, y := cell*float64(i%columns), (head+plot+foot)*float64(i/columns)
		f.Group.Text(x+2, y+12, s.arm.Label(), draw.Type{Size: 11, Bold: true, Max: cell - 16})
		f.Group.Text(x+2, y+26, s.head(), draw.Type{Size: 10.5, Role: draw.Soft, Max: cell - 16})
		f.Group.Text(x+2, y+39, s.words(), draw.Type{Size: 10.5, Max: cell - 16})
		p := frame{x0: x + 6, y0: y + head, x1: x + cell - 18, y1: y + head + plot}
		drawExponents(f.Sub("arm", draw.Attr{Name: "arm", Value: s.arm.Slug}), p, s)
		said = append(said, s.arm.Label()+", "+s.head()+": "+s.words()+".")
	}
	f.Desc = strings.Join(said, " ")
	return f
}

// drawExponents draws one histogram over its ruler.
func drawExponents(g *draw.Group, p frame, s *seen) {
	lo, hi := s.Lowest, s.Lowest+len(s.Counts)
	if s.limits != nil { // a ruler much longer than what is measured is cut
		lo = min(lo, max(s.limits.Least, lo-rulerBeyond))
		hi = max(hi, min(s.limits.Largest+1, hi+rulerBeyond))
	}
	// An exponent's column spans its binade.
	scale := draw.Linear{Lo: float64(lo) - 0.5, Hi: float64(hi) + 0.5, P0: p.x0, P1: p.x1}
	most := uint64(1)
	for _, c := range s.Counts {
		most = max(most, c)
	}
	for i, c := range s.Counts {
		if c == 0 {
			continue
		}
		e := s.Lowest + i
		x0, x1 := scale.At(float64(e)), scale.At(float64(e+1))
		h := math.Max(1, (p.y1-p.y0)*float64(c)/float64(most))
		t := g.Titled(fmt.Sprintf("2^%d: %s of %s values", e, count(c), count(total(&s.Histogram))))
		if s.limits != nil && (e < s.limits.Least || e > s.limits.Largest) {
			t.Rect(x0, p.y1-h, x1-x0, h, draw.Fill(draw.Post).With(0.18))
			t.Hatch(x0, p.y1-h, x1-x0, h, 4, draw.Line(draw.Post, 1))
			continue
		}
		t.Rect(x0, p.y1-h, math.Max(0.8, x1-x0-0.6), h, draw.Fill(draw.Arm))
	}
	g.Line(p.x0, p.y1, p.x1, p.y1, draw.Line(draw.Ink, 1))
	last := math.Inf(-1)
	for _, t := range scale.Ticks(max(2, int((p.x1-p.x0)/52))) {
		words := "2^" + draw.TickLabel(t)
		w := draw.Width(words, 10, false)
		x := scale.At(t)
		if t != math.Trunc(t) || x-w/2 < last+4 || x-w/2 < p.x0-6 || x+w/2 > p.x1+16 {
			continue
		}
		g.Line(x, p.y1, x, p.y1+4, draw.Line(draw.Ink, 1))
		g.Text(x, p.y1+15, words, draw.Type{Size: 10, Anchor: draw.Middle, Role: draw.Soft})
		last = x + w/2
	}
	if s.limits == nil {
		return
	}
	drawRuler(g, p, scale, s, lo, hi)
}

// rulerBeyond is how many binades of its range a ruler shows beyond the values.
const rulerBeyond = 14

// drawRuler draws the range of the format between exponents lo and hi: subnormal
// numbers thin, normal ones thick. An end beyond them has no stroke but its exponent.
func drawRuler(g *draw.Group, p frame, scale draw.Linear, s *seen, lo, hi int) {
	y := p.y1 + 25
	place := func(e int) float64 { return scale.At(float64(max(lo, min(hi, e)))) }
	least, normal, largest := place(s.limits.Least), place(s.limits.Normal), place(s.limits.Largest+1)
	g.Rect(least, y+2, normal-least, 4, draw.Fill(draw.Fraction))
	g.Rect(normal, y, largest-normal, 8, draw.Fill(draw.Exponent))
	for _, e := range []int{s.limits.Least, s.limits.Normal, s.limits.Largest + 1} {
		if e >= lo && e <= hi {
			g.Line(place(e), y-3, place(e), y+11, draw.Line(draw.Ink, 1))
		}
	}
	// The ends' words, then the format's name between them.
	left, right := p.x0, p.x1
	if s.limits.Least < lo {
		words := fmt.Sprintf("← 2^%s", draw.TickLabel(float64(s.limits.Least)))
		g.Text(p.x0, y+22, words, draw.Type{Size: 9.5, Role: draw.Soft})
		left += draw.Width(words, 9.5, false) + 6
	}
	if s.limits.Largest+1 > hi {
		words := fmt.Sprintf("2^%s →", draw.TickLabel(float64(s.limits.Largest+1)))
		g.Text(p.x1, y+22, words, draw.Type{Size: 9.5, Anchor: draw.End, Role: draw.Soft})
		right -= draw.Width(words, 9.5, false) + 6
	}
	words := draw.Fit(s.format, 10, false, right-left)
	half := draw.Width(words, 10, false) / 2
	g.Text(math.Max(left+half, math.Min(right-half, (least+largest)/2)), y+22, words, draw.Type{Size: 10, Anchor: draw.Middle})
}
