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

// leastShare is where the cells of the range map begin to fill.
const leastShare = 1e-7

// fullness is how far a share of values fills a cell, 0 to 1, logarithmically
// over the seven decades below one. A share that is not known shows at a half.
func fullness(share float64) float64 {
	if math.IsNaN(share) {
		return 0.5
	}
	return math.Max(0, math.Min(1, 1-math.Log10(share)/math.Log10(leastShare)))
}

// mapCell is what happened at one point of one layer.
type mapCell struct {
	results.PointCounts
	under, over float64 // shares of the values; NaN: not known
}

// rangeMap draws, arm by arm, how much left the range of its format at each
// point of each layer. Arms without an event are left out.
func rangeMap(v *view, width float64) []*draw.Figure {
	m := &mapLayout{v: v, at: mapStations(v), width: width, narrow: width < 600}
	var blocks []rangeBlock
	for _, a := range v.arms {
		if b := v.rangeBlock(a); len(b.layers) > 0 {
			blocks = append(blocks, b)
		}
	}
	if len(m.at) == 0 || len(blocks) == 0 {
		return nil
	}
	m.left, m.line = 200, 62
	if m.narrow {
		m.left = 30
	}
	m.columns()
	var out []*draw.Figure
	// Blocks go on one figure as long as it fits on a printed page.
	for i := 0; i < len(blocks); {
		j, h := i, 0.0
		for j < len(blocks) && (j == i || h+blocks[j].height() < 900) {
			h += blocks[j].height()
			j++
		}
		out = append(out, m.rangePart(blocks[i:j], h))
		i = j
	}
	return out
}

// rangeBlock is one arm of the range map: its layers with their cells.
type rangeBlock struct {
	arm    *armView
	layers []int
	names  map[int]string
	cells  map[int][]mapCell
}

const (
	cellHeight = 20.0
	cellPitch  = 23.0 // from one layer to the next
	blockHead  = 26.0 // the arm's name
)

func (b *rangeBlock) height() float64 { return blockHead + cellPitch*float64(len(b.layers)) + 8 }

// rangeBlock gathers the cells of an arm's layers in which something left its
// range.
func (v *view) rangeBlock(a *armView) rangeBlock {
	b := rangeBlock{arm: a, names: map[int]string{}, cells: map[int][]mapCell{}}
	all := tallies(a)
	eventful := map[int]bool{} // layers in which something left its range
	for _, c := range all {
		if events(c.Counts) > 0 {
			eventful[c.Layer] = true
		}
	}
	for _, c := range all {
		if !eventful[c.Layer] {
			continue
		}
		over := c.Counts.Overflow + c.Counts.Saturated + c.Counts.NaN
		cell := mapCell{PointCounts: c}
		if over > 0 {
			cell.over = v.share(a, c, over)
		}
		if c.Counts.Underflow > 0 {
			cell.under = v.share(a, c, c.Counts.Underflow)
		}
		if b.cells[c.Layer] == nil {
			b.layers = append(b.layers, c.Layer)
		}
		b.names[c.Layer] = layerName(c.Layer, c.Name)
		if c.Layer < 0 {
			b.names[c.Layer] = "input and loss"
		}
		b.cells[c.Layer] = append(b.cells[c.Layer], cell)
	}
	slices.SortFunc(b.layers, cmp.Compare[int])
	return b
}

// rangePart is one figure of the range map: the track above, blocks below.
func (m *mapLayout) rangePart(blocks []rangeBlock, height float64) *draw.Figure {
	first := m.line + 68
	if m.narrow {
		first = m.line + 72
	}
	f := &draw.Figure{Title: "What left the range of its format, by layer and rounding point", W: m.width, H: first + height + 4}
	m.track(&f.Group, first-4)
	var desc []string
	y := first
	for _, b := range blocks {
		desc = append(desc, m.block(&f.Group, y, b))
		y += b.height()
	}
	f.Desc = strings.Join(desc, " ")
	return f
}

// block draws an arm and returns it in words.
func (m *mapLayout) block(g *draw.Group, y float64, b rangeBlock) string {
	g = g.Sub("arm", draw.Attr{Name: "arm", Value: b.arm.Slug})
	g.Text(0, y+15, b.arm.Label(), draw.Type{Size: 11.5, Bold: true, Max: m.width})
	var said []string
	for i, layer := range b.layers {
		top := y + blockHead + cellPitch*float64(i)
		name := b.names[layer]
		if m.narrow { // the names stand in the table below
			name = "i/l"
			if layer >= 0 {
				name = fmt.Sprint(layer + 1)
			}
		}
		g.Text(m.left-12, top+14, name, draw.Type{Size: 10.5, Anchor: draw.End, Role: draw.Soft, Max: m.left - 14})
		for _, c := range b.cells[layer] {
			k := slices.Index(m.at, stationOf(c.Point))
			if k < 0 {
				continue
			}
			m.cell(g, m.xs[k], top, c)
			if n := events(c.Counts); n > 0 {
				said = append(said, fmt.Sprintf("%s %s %d", b.names[layer], plain(c.Point), n))
			}
		}
	}
	return b.arm.Label() + ", events: " + strings.Join(said, ", ") + "."
}

// cell draws one point: filled from below with what became zero, from above
// with what was too large.
func (m *mapLayout) cell(g *draw.Group, x, top float64, c mapCell) {
	w := math.Min(28, m.pitch-2)
	t := g.Titled(fmt.Sprintf("%s, %s: %s", layerName(c.Layer, c.Name), plain(c.Point), eventWords(c)))
	if c.Counts.Underflow > 0 {
		h := math.Max(1.5, cellHeight*fullness(c.under))
		t.Rect(x-w/2, top+cellHeight-h, w, h, draw.Fill(draw.Fraction).With(0.75))
	}
	over := c.Counts.Overflow + c.Counts.Saturated + c.Counts.NaN
	if over > 0 {
		h := math.Max(1.5, cellHeight*fullness(c.over))
		t.Rect(x-w/2, top, w, h, draw.Fill(draw.Post).With(0.75))
	}
	t.Rect(x-w/2, top, w, cellHeight, draw.Line(draw.Faint, 1))
	if events(c.Counts) == 0 || m.narrow {
		return
	}
	words := inMillion(c.under + c.over)
	if math.IsNaN(c.under + c.over) { // shares are not known: the count itself
		words = shortCount(events(c.Counts))
	}
	size := 9.0
	for size > 7 && draw.Width(words, size, true) > w-2 {
		size -= 0.5
	}
	if over > 0 { // on the darker fill the words need a ground
		ww := draw.Width(words, size, true)
		t.Rect(x-ww/2-1, top+cellHeight/2-5, ww+2, 10, draw.Fill(draw.Paper).With(0.8))
	}
	t.Text(x, top+13.5, words, draw.Type{Size: size, Anchor: draw.Middle, Bold: true})
}

// eventWords spells the events of a cell.
func eventWords(c mapCell) string {
	var out []string
	for _, e := range []struct {
		n    uint64
		what string
	}{
		{c.Counts.Overflow, "overflowed"},
		{c.Counts.Saturated, "saturated"},
		{c.Counts.Underflow, "underflowed to zero"},
		{c.Counts.NaN, "became not a number"},
	} {
		if e.n > 0 {
			out = append(out, count(e.n)+" "+e.what)
		}
	}
	if len(out) == 0 {
		return "nothing left the range"
	}
	if s := c.under + c.over; !math.IsNaN(s) {
		out = append(out, inMillion(s)+" in a million")
	}
	return strings.Join(out, ", ")
}

// shortCount spells a count in at most four characters.
func shortCount(n uint64) string {
	for _, u := range []struct {
		size uint64
		mark string
	}{{1e12, "T"}, {1e9, "G"}, {1e6, "M"}, {1e3, "k"}} {
		if n >= u.size {
			return fmt.Sprintf("%d%s", n/u.size, u.mark)
		}
	}
	return fmt.Sprint(n)
}
