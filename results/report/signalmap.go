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

// signalCell is what one rounding point of one layer left of its values.
type signalCell struct {
	results.Quality          // of the last epoch looked at
	epochs          []string // of all of them, in words
}

// signalBlock is one diagnosed run: its layers with their points.
type signalBlock struct {
	arm       *armView
	replicate uint64
	layers    []int
	cells     map[int][]*signalCell
}

// signalBlocks are the diagnosed runs in which anything was rounded off.
func (v *view) signalBlocks() []signalBlock {
	var out []signalBlock
	for i := range v.Diagnoses {
		d := &v.Diagnoses[i]
		at := slices.IndexFunc(v.arms, func(a *armView) bool { return a.Slug == d.Arm })
		if at < 0 {
			continue
		}
		b := signalBlock{arm: v.arms[at], replicate: d.Replicate, cells: map[int][]*signalCell{}}
		for _, q := range d.Qualities {
			if q.Kind == results.SignalToNoise {
				b.take(q)
			}
		}
		b.leaveOutExact()
		if len(b.layers) > 0 {
			out = append(out, b)
		}
	}
	return out
}

// take adds a figure to its cell.
func (b *signalBlock) take(q results.Quality) {
	row, known := b.cells[q.Layer]
	if !known {
		b.layers = append(b.layers, q.Layer)
		slices.SortFunc(b.layers, cmp.Compare[int])
	}
	i := slices.IndexFunc(row, func(c *signalCell) bool { return c.At == q.At })
	if i < 0 {
		i = len(row)
		row = append(row, &signalCell{Quality: q})
	}
	if q.Epoch >= row[i].Epoch {
		row[i].Quality = q
	}
	row[i].epochs = append(row[i].epochs, fmt.Sprintf("%s in epoch %d", decibelWords(q.Value), q.Epoch))
	b.cells[q.Layer] = row
}

// leaveOutExact drops layers that never rounded anything off, such as ReLU.
func (b *signalBlock) leaveOutExact() {
	b.layers = slices.DeleteFunc(b.layers, func(l int) bool {
		return !slices.ContainsFunc(b.cells[l], func(c *signalCell) bool { return !math.IsInf(c.Value, 1) })
	})
}

func (b *signalBlock) height() float64 { return blockHead + cellPitch*float64(len(b.layers)) + 8 }

// signalMap draws the signal to rounding noise of every point of every layer.
func signalMap(v *view, width float64) []*draw.Figure {
	m := &mapLayout{v: v, at: mapStations(v), width: width, narrow: width < 600, left: 200, line: 62}
	if m.narrow {
		m.left = 30
	}
	blocks := v.signalBlocks()
	if len(m.at) == 0 || len(blocks) == 0 {
		return nil
	}
	m.columns()
	var out []*draw.Figure
	for i := 0; i < len(blocks); {
		j, h := i, 0.0
		for j < len(blocks) && (j == i || h+blocks[j].height() < 900) {
			h += blocks[j].height()
			j++
		}
		out = append(out, m.signalPart(blocks[i:j], h))
		i = j
	}
	return out
}

// signalPart is one figure: the track above, blocks below.
func (m *mapLayout) signalPart(blocks []signalBlock, height float64) *draw.Figure {
	first := m.line + 68
	if m.narrow {
		first = m.line + 72
	}
	f := &draw.Figure{Title: "Signal to rounding noise, by layer and rounding point", W: m.width, H: first + height + 4}
	m.track(&f.Group, first-4)
	var said []string
	y := first
	for i := range blocks {
		said = append(said, m.signalBlock(&f.Group, y, &blocks[i]))
		y += blocks[i].height()
	}
	f.Desc = strings.Join(said, " ")
	return f
}

// signalBlock draws a run and returns it in words.
func (m *mapLayout) signalBlock(g *draw.Group, y float64, b *signalBlock) string {
	g = g.Sub("arm", draw.Attr{Name: "arm", Value: b.arm.Slug})
	g.Text(0, y+15, b.arm.Label(), draw.Type{Size: 11.5, Bold: true, Max: m.width})
	var said []string
	for i, layer := range b.layers {
		top := y + blockHead + cellPitch*float64(i)
		name := layerName(layer, b.cells[layer][0].Name)
		switch {
		case layer < 0 && m.narrow:
			name = "i/l"
		case layer < 0:
			name = "input and loss"
		case m.narrow:
			name = fmt.Sprint(layer + 1)
		}
		g.Text(m.left-12, top+14, name, draw.Type{Size: 10.5, Anchor: draw.End, Role: draw.Soft, Max: m.left - 14})
		for _, c := range b.cells[layer] {
			if k := slices.Index(m.at, stationOf(c.At)); k >= 0 {
				m.signalCell(g, m.xs[k], top, c)
				said = append(said, fmt.Sprintf("%s %s %s", layerName(layer, c.Name), plain(c.At), decibelWords(c.Value)))
			}
		}
	}
	return fmt.Sprintf("%s, replicate %d: %s.", b.arm.Label(), b.replicate, strings.Join(said, ", "))
}

// signalCell draws one point, filled from below as it is noisy, its decibels in it.
func (m *mapLayout) signalCell(g *draw.Group, x, top float64, c *signalCell) {
	w := math.Min(28, m.pitch-2)
	t := g.Titled(fmt.Sprintf("%s, %s: %s", layerName(c.Layer, c.Name), plain(c.At), strings.Join(c.epochs, ", ")))
	k := &keptKinds[0]
	if full := k.lost(c.Value); full > 0 {
		h := math.Max(1.5, cellHeight*full)
		t.Rect(x-w/2, top+cellHeight-h, w, h, draw.Fill(draw.Fraction).With(0.75))
	}
	t.Rect(x-w/2, top, w, cellHeight, draw.Line(draw.Faint, 1))
	if m.narrow {
		return
	}
	words := "exact"
	switch {
	case math.IsNaN(c.Value):
		words = missing
	case !math.IsInf(c.Value, 1):
		words = fixed(c.Value, 0)
	}
	size := 9.0
	for size > 7 && draw.Width(words, size, true) > w-2 {
		size -= 0.5
	}
	t.Text(x, top+13.5, words, draw.Type{Size: size, Anchor: draw.Middle, Bold: words != "exact"})
}
