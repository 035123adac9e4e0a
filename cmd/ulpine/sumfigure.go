package main

import (
	"fmt"
	"io"
	"math"
	"strings"

	"ulpine/results/report/draw"
)

// The frame of the figure, pixels.
const (
	figureWidth, figureHeight = 760.0, 400.0
	plotLeft, plotTop         = 64.0, 56.0
	plotRight, plotBottom     = 560.0, 350.0
)

// draw draws computed / exact against length, a line an accumulator, named at its
// end; a ring marks where it stalls.
func (s *sumStudy) draw(w io.Writer) error {
	f := &draw.Figure{
		ID: "sum", Title: "Where does each accumulator stall?", W: figureWidth, H: figureHeight,
		Desc: fmt.Sprintf("Computed over exact sum of %s against the number of terms, up to %d.", s.source.name(), s.length),
	}
	f.Text(0, 16, f.Title, draw.Type{Size: 15, Bold: true})
	f.Text(0, 34, fmt.Sprintf("%s: computed sum / exact sum. A ring marks the last term that changed the sum.", s.source.name()),
		draw.Type{Size: 11, Role: draw.Soft, Max: figureWidth})
	x := draw.Log{Lo: 1, Hi: float64(max(s.length, 2)), P0: plotLeft, P1: plotRight}
	lo, hi := s.bounds()
	y := draw.Linear{Lo: lo, Hi: hi, P0: plotBottom, P1: plotTop}
	s.axes(f, x, y)
	s.lines(f, x, y)
	return f.WriteFile(w)
}

// bounds are the limits of the ratio's axis, 1 among them.
func (s *sumStudy) bounds() (lo, hi float64) {
	lo, hi = 1, 1
	for _, a := range s.all {
		for _, r := range a.ratio {
			if !math.IsNaN(r) && !math.IsInf(r, 0) {
				lo, hi = math.Min(lo, r), math.Max(hi, r)
			}
		}
	}
	pad := math.Max(0.02, (hi-lo)*0.06)
	if lo >= 0 && lo < 0.3 {
		return 0, hi + pad
	}
	return lo - pad, hi + pad
}

func (s *sumStudy) axes(f *draw.Figure, x, y draw.Scale) {
	grid := f.Sub("")
	ticks := y.Ticks(6)
	for i, label := range draw.TickLabels(ticks) {
		at := y.At(ticks[i])
		grid.Line(plotLeft, at, plotRight, at, draw.Line(draw.Faint, 1))
		f.Text(plotLeft-8, at+4, label, draw.Type{Anchor: draw.End, Role: draw.Soft})
	}
	grid.Line(plotLeft, y.At(1), plotRight, y.At(1), draw.Line(draw.Base, 1.5).Dashed(5, 3))
	ticks = x.Ticks(7)
	for i, label := range draw.TickLabels(ticks) {
		f.Text(x.At(ticks[i]), plotBottom+18, label, draw.Type{Anchor: draw.Middle, Role: draw.Soft})
	}
	f.Text((plotLeft+plotRight)/2, plotBottom+38, "number of terms", draw.Type{Anchor: draw.Middle, Role: draw.Soft})
}

// lines draws the accumulators and names them at their ends.
func (s *sumStudy) lines(f *draw.Figure, x, y draw.Scale) {
	want := make([]float64, len(s.all))
	for i, a := range s.all {
		pts := make([]draw.Point, len(s.lengths))
		want[i] = math.NaN()
		for n, length := range s.lengths {
			pts[n] = draw.Point{X: x.At(float64(length)), Y: y.At(a.ratio[n])}
			if r := a.ratio[n]; !math.IsNaN(r) && !math.IsInf(r, 0) {
				want[i] = pts[n].Y
			}
		}
		line := draw.Line(draw.SeriesRole(i), 2)
		if i%2 == 1 {
			line = line.Dashed(7, 3)
		}
		f.Polyline(pts, line)
		if a.stalled(s.length) {
			f.Circle(x.At(float64(a.last)), y.At(s.ratioAt(a)), 4.5, draw.Line(draw.SeriesRole(i), 1.5))
		}
	}
	for i, at := range draw.Spread(want, 28, plotTop, plotBottom) {
		a := s.all[i]
		f.Line(plotRight+2, want[i], plotRight+12, at, draw.Line(draw.SeriesRole(i), 1))
		f.Text(plotRight+16, at, a.label, draw.Type{Role: draw.SeriesRole(i), Bold: true, Max: figureWidth - plotRight - 16})
		end, _, _ := strings.Cut(a.verdict(s.length), ":")
		f.Text(plotRight+16, at+12, end, draw.Type{Size: 10, Role: draw.Soft, Max: figureWidth - plotRight - 16})
	}
}

// ratioAt is the ratio where the accumulator stalls, between the lengths around it.
func (s *sumStudy) ratioAt(a *accumulator) float64 {
	for n := 1; n < len(s.lengths); n++ {
		if s.lengths[n] < a.last {
			continue
		}
		lo, hi := math.Log2(float64(s.lengths[n-1])), math.Log2(float64(s.lengths[n]))
		f := (math.Log2(float64(a.last)) - lo) / (hi - lo)
		return a.ratio[n-1] + f*(a.ratio[n]-a.ratio[n-1])
	}
	return a.ratio[len(a.ratio)-1]
}
