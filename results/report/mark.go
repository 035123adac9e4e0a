package report

import (
	"math"

	"ulpine/results"
	"ulpine/results/report/draw"
)

// drawMark draws a verdict's mark, a disc of radius r: filled, open, half, or
// broken in two.
func drawMark(g *draw.Group, x, y, r float64, k results.VerdictKind) {
	const line = 1.6
	ring := draw.Style{Fill: draw.Paper, Line: draw.Ink, Width: line}
	switch k {
	case results.Within:
		g.Circle(x, y, r, draw.Style{Fill: draw.Ink, Line: draw.Ink, Width: line})
	case results.Worse:
		g.Circle(x, y, r, ring)
	case results.Undecided:
		g.Circle(x, y, r, ring)
		g.Sector(x, y, r, math.Pi/2, math.Pi, draw.Fill(draw.Ink))
	case results.Diverged:
		// Two halves, parted along a slanting crack.
		d, a := r*0.33, -math.Pi/3
		dx, dy := d*math.Sin(a), -d*math.Cos(a)
		for _, side := range []float64{-1, 1} {
			g.Path(ring,
				draw.Op{Kind: draw.Arc, X: x + side*dx, Y: y + side*dy, R: r, A0: a + math.Pi*(1+side)/2, Sweep: math.Pi},
				draw.Op{Kind: draw.Close})
		}
	}
}

// markGlyph is a verdict's mark as a small drawing for a line of the page.
func markGlyph(k results.VerdictKind) *draw.Figure {
	f := &draw.Figure{W: 18, H: 16}
	drawMark(&f.Group, 9, 8, 5.5, k)
	return f
}
