package report

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"ulpine/results"
	"ulpine/results/report/draw"
)

// railClear is the height of the words above a narrow rail.
const railClear = 34.0

// railRows is the number of comparisons on one rail; more go on further ones,
// so that a rail fits on a printed page.
const railRows = 20

// rail is the layout of one margin rail: rows of comparisons over one scale of
// differences, the margin a post, the noise floor a hatched band.
type rail struct {
	v      *view
	rows   []*results.Comparison
	width  float64
	narrow bool
	left   float64 // of the rail, pixels
	right  float64
	top    float64
	row    float64 // height of one row
	scale  draw.Scale
	folded float64 // half-width of the linear part, in printed units; 0: linear throughout
}

// comparisonRails draws the arms against the baseline.
func comparisonRails(v *view, width float64) []*draw.Figure {
	return rails(v, v.Comparisons, "Paired differences to the baseline on one margin rail", width)
}

// contrastRails draws the arms that the plan compares with each other.
func contrastRails(v *view, width float64) []*draw.Figure {
	return rails(v, v.Contrasts, "Contrasts: arms against each other on one margin rail", width)
}

// rails spreads comparisons over as many rails as they need. All of them share
// one scale, so that rows of different rails can be compared.
func rails(v *view, cs []results.Comparison, title string, width float64) []*draw.Figure {
	var out []*draw.Figure
	scale := railDomain(v, cs)
	for i := 0; i < len(cs); i += railRows {
		r := &rail{v: v, width: width, narrow: width < 600}
		for k := i; k < min(i+railRows, len(cs)); k++ {
			r.rows = append(r.rows, &cs[k])
		}
		out = append(out, r.draw(title, scale))
	}
	return out
}

// railDomain is the range of values a rail shows, in printed units, and the
// largest margin on it.
type domain struct{ lo, hi, margin float64 }

// railDomain takes in everything that will be drawn, and enough on either side
// of the margin that a rail of small differences still shows the post.
func railDomain(v *view, cs []results.Comparison) domain {
	var d domain
	take := func(x float64) {
		x = v.words.scale(x)
		if !math.IsNaN(x) && !math.IsInf(x, 0) {
			d.lo, d.hi = math.Min(d.lo, x), math.Max(d.hi, x)
		}
	}
	for _, c := range cs {
		m := v.words.scale(c.Margin)
		if m > 0 && !math.IsInf(m, 0) {
			d.margin = math.Max(d.margin, m)
		}
		take(c.Mean)
		take(c.Low)
		take(c.High)
		for _, x := range c.Differences {
			take(x)
		}
	}
	take(v.NoiseLow)
	take(v.NoiseHigh)
	d.lo, d.hi = math.Min(d.lo, -1.5*d.margin), math.Max(d.hi, d.margin)
	if d.lo == d.hi { // no margin and no difference: any range around zero will do
		d.lo, d.hi = -1, 1
	}
	pad := (d.hi - d.lo) * 0.04
	d.lo, d.hi = d.lo-pad, d.hi+pad
	return d
}

// foldBeyond is how many margins a rail shows before it turns logarithmic.
const foldBeyond = 12

// fold is the half-width of the linear part of a rail over the domain, two
// margins; 0 when all of it is linear.
func (d domain) fold() float64 {
	if far := math.Max(-d.lo, d.hi); d.margin > 0 && far > foldBeyond*d.margin {
		return 2 * d.margin
	}
	return 0
}

// scale maps the domain to p0..p1, linear within +-fold.
func (d domain) scale(fold, p0, p1 float64) draw.Scale {
	if fold > 0 {
		return draw.SymLog{Lo: d.lo, Hi: d.hi, Linear: fold, Decade: 0.5, P0: p0, P1: p1}
	}
	return draw.Linear{Lo: d.lo, Hi: d.hi, P0: p0, P1: p1}
}

// draw lays the rail out. Wide: names left, numbers right, the rail between.
// Narrow: both above the rail, which takes the whole width.
func (r *rail) draw(title string, d domain) *draw.Figure {
	r.left, r.right, r.top, r.row = 226, r.width-176, 30, 38
	if r.narrow {
		r.left, r.right, r.row = 12, r.width-12, 62
	}
	r.folded = d.fold()
	r.scale = d.scale(r.folded, r.left+9, r.right-9) // room for a mark at either end
	bottom := r.top + r.row*float64(len(r.rows))
	f := &draw.Figure{Title: title, W: r.width, H: bottom + 52}
	f.Desc = r.describe()
	r.ground(&f.Group, bottom)
	for i, c := range r.rows {
		r.comparison(&f.Group, r.top+r.row*float64(i), i, c)
	}
	return f
}

// describe says what the figure shows to those who do not see it.
func (r *rail) describe() string {
	var b strings.Builder
	for _, c := range r.rows {
		fmt.Fprintf(&b, "%s: %s, mean %s%s, interval %s, n = %d. ", r.v.pairName(c), verdictWords(c.Verdict),
			r.v.words.diff(c.Mean), r.v.words.unit(), r.v.words.interval(c.Low, c.High), c.N)
	}
	return strings.TrimSpace(b.String())
}

// ground draws what all rows share: noise floor, grid, zero, axis.
func (r *rail) ground(g *draw.Group, bottom float64) {
	if lo, hi := r.v.words.scale(r.v.NoiseLow), r.v.words.scale(r.v.NoiseHigh); hi > lo {
		s := g.Titled("noise floor: " + plain(r.v.NoiseFrom))
		x0, x1 := r.scale.At(lo), r.scale.At(hi)
		s.Rect(x0, r.top, x1-x0, bottom-r.top, draw.Fill(draw.Floor).With(0.12))
		s.Hatch(x0, r.top, x1-x0, bottom-r.top, 6, draw.Line(draw.Floor, 0.9).With(0.75))
	}
	r.ticks(g, bottom)
	g.Line(r.left, bottom, r.right, bottom, draw.Line(draw.Ink, 1))
	if zero := r.scale.At(0); zero >= r.left && zero <= r.right {
		g.Line(zero, r.top-6, zero, bottom, draw.Line(draw.Ink, 1.2))
		g.Text(zero+4, r.top-10, "no difference", draw.Type{Size: 10.5, Role: draw.Soft})
	}
	if r.folded > 0 { // where the scale turns logarithmic, a reader must see it
		for _, x := range []float64{r.scale.At(-r.folded), r.scale.At(r.folded)} {
			if x > r.left && x < r.right {
				g.Line(x, r.top, x, bottom+8, draw.Line(draw.Soft, 1).Dashed(2, 3))
			}
		}
	}
	r.axisWords(g, bottom)
}

// tickGap is the least distance of two labels of the axis, pixels; closer ones
// read as one number.
const tickGap = 12.0

// ticks draws grid and axis labels. Where labels would come close, the tick
// stands without one; zero and the ends of the linear part keep theirs.
func (r *rail) ticks(g *draw.Group, bottom float64) {
	ticks := r.scale.Ticks(int((r.right - r.left) / 60))
	rank := func(t float64) int {
		switch {
		case t == 0:
			return 0
		case r.folded > 0 && math.Abs(math.Abs(t)-r.folded) < 1e-9*r.folded:
			return 1
		}
		return 2
	}
	slices.SortStableFunc(ticks, func(a, b float64) int { return rank(a) - rank(b) })
	var taken []draw.Box
	for _, t := range ticks {
		x := r.scale.At(t)
		if x < r.left-1 || x > r.right+1 {
			continue
		}
		g.Line(x, r.top, x, bottom, draw.Line(draw.Faint, 0.8))
		g.Line(x, bottom, x, bottom+4, draw.Line(draw.Ink, 1))
		words := draw.TickLabel(t)
		w := draw.Width(words, 10.5, false)
		b := draw.Box{X0: x - (w+tickGap)/2, X1: x + (w+tickGap)/2, Y1: 1}
		if !slices.ContainsFunc(taken, func(o draw.Box) bool { return b.Overlap(o) > 0 }) {
			g.Text(x, bottom+16, words, draw.Type{Size: 10.5, Anchor: draw.Middle, Role: draw.Soft})
			taken = append(taken, b)
		}
	}
}

// axisWords says what the axis shows, with its unit and its good direction.
func (r *rail) axisWords(g *draw.Group, bottom float64) {
	unit := r.v.words.unitWords()
	if unit != "" {
		unit = ", " + unit
	}
	words := plain(r.v.Metric) + ": difference" + unit + "; to the right is better"
	mid := (r.left + r.right) / 2
	if r.narrow {
		mid = r.width / 2
	}
	limit := 2 * math.Min(mid, r.width-mid)
	g.Text(mid, bottom+32, words, draw.Type{Size: 10.5, Anchor: draw.Middle, Max: limit})
	if r.folded > 0 {
		g.Text(mid, bottom+46, "linear between the dotted lines, logarithmic outside them",
			draw.Type{Size: 10, Anchor: draw.Middle, Role: draw.Soft, Max: limit})
	}
}

// comparison draws one row, its top edge at y.
func (r *rail) comparison(g *draw.Group, y float64, i int, c *results.Comparison) {
	at := y + r.row/2 - 2
	if r.narrow {
		at = y + 44
	}
	g = g.Sub("arm", draw.Attr{Name: "arm", Value: c.Arm})
	if r.narrow { // the words above the rail stand on clean ground
		g.Rect(0, y, r.width, railClear, draw.Fill(draw.Paper))
	}
	r.names(g, y, at, c)
	g.Line(r.left, at, r.right, at, draw.Line(draw.Faint, 1))
	r.post(g, y, i, c)
	// Replicates are short strokes below the bar rather than dots on it: strokes
	// stay countable where they lie close.
	for k, d := range c.Differences {
		x := r.scale.At(r.v.words.scale(d))
		if k < len(c.Replicates) {
			t := g.Titled(fmt.Sprintf("replicate %d: %s%s", c.Replicates[k], r.v.words.diff(d), r.v.words.unit()))
			t.Line(x, at+6.5, x, at+13, draw.Line(draw.Soft, 1.3))
		}
	}
	words := g.Titled(fmt.Sprintf("%s: %s, mean %s%s, interval %s, n = %d", r.v.pairName(c), verdictWords(c.Verdict),
		r.v.words.diff(c.Mean), r.v.words.unit(), r.v.words.interval(c.Low, c.High), c.N))
	// Without an interval the ends are NaN, and the kit leaves the bar out.
	lo, hi := r.clamp(c.Low), r.clamp(c.High)
	words.Line(lo, at, hi, at, draw.Line(draw.Arm, 5))
	for _, x := range []float64{lo, hi} {
		words.Line(x, at-5, x, at+5, draw.Line(draw.Arm, 1.5))
	}
	drawMark(words, r.scale.At(r.v.words.scale(c.Mean)), at, 5.2, c.Verdict.Kind)
}

// clamp is the pixel of a bound; what lies outside the rail ends at its edge.
func (r *rail) clamp(v float64) float64 {
	x := r.scale.At(r.v.words.scale(v))
	if math.IsNaN(x) {
		return x
	}
	return math.Max(r.left, math.Min(r.right, x))
}

// post draws the margin through the row; the first row carries its name.
func (r *rail) post(g *draw.Group, y float64, i int, c *results.Comparison) {
	m := r.v.words.scale(c.Margin)
	if !(m > 0) {
		return
	}
	x, top := r.scale.At(-m), y
	if i == 0 {
		top = r.top - 6
		g.Text(x-4, r.top-10, "margin "+fixed(-m, marginDigits(m)), draw.Type{Size: 10.5, Anchor: draw.End, Role: draw.Post, Bold: true})
	} else if r.rows[i-1].Margin != c.Margin { // contrasts may have margins of their own
		g.Text(x-6, y+r.row-5, fixed(-m, marginDigits(m)), draw.Type{Size: 10, Anchor: draw.End, Role: draw.Post, Bold: true})
	}
	foot := draw.Line(draw.Post, 4)
	if r.narrow {
		if i == 0 {
			g.Line(x, top, x, y, foot)
		}
		top = y + railClear
	}
	g.Line(x, top, x, y+r.row, foot)
}

// marginDigits are enough decimals to spell a margin as its author did.
func marginDigits(m float64) int {
	for d := range 8 {
		p := math.Pow(10, float64(d))
		if math.Abs(m*p-math.Round(m*p)) < 1e-9*m*p {
			return d
		}
	}
	return 8
}

// names writes the row's arm at the left and its numbers at the right, or both
// above the rail where it is narrow.
func (r *rail) names(g *draw.Group, y, at float64, c *results.Comparison) {
	numbers := r.v.words.diff(c.Mean) + " " + r.v.words.interval(c.Low, c.High)
	if math.IsNaN(c.Mean) {
		numbers = "no mean"
	} else if math.IsNaN(c.Low) {
		numbers = r.v.words.diff(c.Mean) + ", no interval"
	}
	rest := verdictWords(c.Verdict)
	if c.Verdict.Kind == results.Undecided { // the pairs it needs stand in the verdict table
		rest = "undecided"
	}
	rest += fmt.Sprintf(", n = %d", c.N)
	if r.narrow {
		g.Text(12, y+14, r.v.pairName(c), draw.Type{Size: 11.5, Bold: true, Max: r.width - 24})
		g.Text(12, y+29, numbers+", "+rest, draw.Type{Size: 10.5, Role: draw.Soft, Max: r.width - 24})
		return
	}
	lines := draw.Wrap(r.v.pairName(c), 11.5, true, r.left-24, 2)
	for k, l := range lines {
		g.Text(0, at+4-7*float64(len(lines)-1)+14*float64(k), l, draw.Type{Size: 11.5, Bold: true})
	}
	g.Text(r.right+14, at-3, numbers, draw.Type{Size: 11, Max: r.width - r.right - 14})
	g.Text(r.right+14, at+11, rest, draw.Type{Size: 10.5, Role: draw.Soft, Max: r.width - r.right - 14})
}
