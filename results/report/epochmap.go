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

// epochRow is one rounding point of one diagnosed run, epoch by epoch.
type epochRow struct {
	arm       *armView
	replicate uint64
	place     results.PointCounts // counts summed over the epochs
	epochs    []results.Counts
	looked    []uint64 // values that the counts of an epoch are of; 0: all
}

// epochRowsOf are the points of diagnosed runs at which something left its
// range, most events first within a run.
func (v *view) epochRowsOf() []epochRow {
	var out []epochRow
	for _, d := range v.Diagnoses {
		k := slices.IndexFunc(v.arms, func(a *armView) bool { return a.Slug == d.Arm })
		if k < 0 {
			continue
		}
		from := len(out)
		for _, e := range d.Epochs {
			if e.Epoch < 1 {
				continue
			}
			i := slices.IndexFunc(out[from:], func(r epochRow) bool { return r.place.Layer == e.Layer && r.place.Point == e.Point })
			if i < 0 {
				i = len(out) - from
				p := e.PointCounts
				p.Counts = results.Counts{}
				out = append(out, epochRow{arm: v.arms[k], replicate: d.Replicate, place: p})
			}
			r := &out[from+i]
			for len(r.epochs) < e.Epoch {
				r.epochs, r.looked = append(r.epochs, results.Counts{}), append(r.looked, 0)
			}
			r.looked[e.Epoch-1] += e.Values
			for _, sum := range []*results.Counts{&r.epochs[e.Epoch-1], &r.place.Counts} {
				sum.Overflow += e.Counts.Overflow
				sum.Underflow += e.Counts.Underflow
				sum.Saturated += e.Counts.Saturated
				sum.NaN += e.Counts.NaN
			}
		}
		out = append(out[:from], slices.DeleteFunc(out[from:], func(r epochRow) bool { return events(r.place.Counts) == 0 })...)
		slices.SortStableFunc(out[from:], func(a, b epochRow) int { return cmp.Compare(events(b.place.Counts), events(a.place.Counts)) })
	}
	return out
}

// rowsPerEpochMap is the number of points on one figure.
const rowsPerEpochMap = 36

// epochMap draws how range events come and go over the epochs of a run.
func epochMap(v *view, width float64) []*draw.Figure {
	rows := v.epochRowsOf()
	n := 0
	for _, r := range rows {
		n = max(n, len(r.epochs))
	}
	var out []*draw.Figure
	for i := 0; i < len(rows); i += rowsPerEpochMap {
		out = append(out, v.epochPart(rows[i:min(i+rowsPerEpochMap, len(rows))], max(n, v.clock.epochs), width))
	}
	return out
}

// epochPart is one figure of the epoch map.
func (v *view) epochPart(rows []epochRow, epochs int, width float64) *draw.Figure {
	const pitch, head, top = 17.0, 24.0, 14.0
	left := 300.0
	if width < 600 {
		left = 150
	}
	f := &draw.Figure{Title: "What left the range of its format, epoch by epoch", W: width}
	y := top
	cell := math.Min(30, (width-left-8)/float64(epochs))
	var said []string
	for i, r := range rows {
		if i == 0 || rows[i-1].arm != r.arm || rows[i-1].replicate != r.replicate {
			f.Group.Text(0, y+14, fmt.Sprintf("%s, replicate %d", r.arm.Label(), r.replicate), draw.Type{Size: 11.5, Bold: true, Max: width})
			y += head
		}
		g := f.Sub("arm", draw.Attr{Name: "arm", Value: r.arm.Slug})
		name := layerName(r.place.Layer, r.place.Name) + ", " + plain(r.place.Point)
		short := strings.Join(firstWords(layerName(r.place.Layer, r.place.Name), 2), " ") + ", " + plain(r.place.Point)
		if r.place.Layer < 0 { // input and loss have one point each
			short = plain(r.place.Point)
		}
		g.Text(left-10, y+11, short, draw.Type{Size: 10.5, Anchor: draw.End, Role: draw.Soft, Max: left - 12})
		for e := range epochs {
			v.epochCell(g, left+cell*float64(e), y, cell-1.5, pitch-2.5, &r, e)
		}
		said = append(said, fmt.Sprintf("%s, %s: %d events.", r.arm.Label(), name, events(r.place.Counts)))
		y += pitch
	}
	last := math.Inf(-1)
	for e := range epochs {
		words := fmt.Sprint(e + 1)
		x, w := left+cell*(float64(e)+0.5), draw.Width(words, 10, false)
		if x-w/2 > last+5 {
			f.Group.Text(x, y+12, words, draw.Type{Size: 10, Anchor: draw.Middle, Role: draw.Soft})
			last = x + w/2
		}
	}
	f.Group.Text(left, y+27, "epoch", draw.Type{Size: 10.5})
	f.H, f.Desc = y+34, strings.Join(said, " ")
	return f
}

// epochCell draws one epoch of one point, as a cell of the range map.
func (v *view) epochCell(g *draw.Group, x, y, w, h float64, r *epochRow, e int) {
	if !r.sees(e) {
		return
	}
	var c results.Counts
	if e < len(r.epochs) {
		c = r.epochs[e]
	}
	over := c.Overflow + c.Saturated + c.NaN
	cell := mapCell{PointCounts: results.PointCounts{Counts: c}, under: v.epochShare(r, e, c.Underflow), over: v.epochShare(r, e, over)}
	t := g.Titled(fmt.Sprintf("epoch %d: %s", e+1, eventWords(cell)))
	if c.Underflow > 0 {
		k := math.Max(1.5, h*fullness(cell.under))
		t.Rect(x, y+h-k, w, k, draw.Fill(draw.Fraction).With(0.75))
	}
	if over > 0 {
		t.Rect(x, y, w, math.Max(1.5, h*fullness(cell.over)), draw.Fill(draw.Post).With(0.75))
	}
	t.Rect(x, y, w, h, draw.Line(draw.Faint, 1))
}

// sees reports whether an epoch was looked at: samples may pass some by, but where
// all values are counted an epoch without a count saw no event.
func (r *epochRow) sees(e int) bool {
	sampled := slices.ContainsFunc(r.looked, func(n uint64) bool { return n > 0 })
	return !sampled || e < len(r.looked) && r.looked[e] > 0
}

// epochShare is n as a share of the values looked at in an epoch, or of all that
// the point rounds in it.
func (v *view) epochShare(r *epochRow, e int, n uint64) float64 {
	if n == 0 {
		return 0
	}
	if r.looked[e] > 0 {
		return float64(n) / float64(r.looked[e])
	}
	for _, vol := range v.Volumes {
		if vol.Layer == r.place.Layer && vol.Point == r.place.Point && vol.Values > 0 && v.clock.epochs > 0 {
			return float64(n) * float64(v.clock.epochs) / float64(vol.Values)
		}
	}
	return math.NaN()
}
