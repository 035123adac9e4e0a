package report

import (
	"fmt"

	"ulpine/results/report/draw"
)

// Widths of the two drawings of a figure, in pixels.
const (
	wide   = 860.0
	narrow = 372.0
)

// figureTable lists the figures in the order of the page. A figure that has too
// much to show for one drawing comes in several parts; one that has nothing to
// show comes in none.
var figureTable = []struct {
	id       string
	fileOnly bool // drawn as a file only; the page shows the same elsewhere
	draw     func(v *view, width float64) []*draw.Figure
}{
	{"bit-strips", true, stripFigure},
	{"margin-rail", false, comparisonRails},
	{"contrast-rail", false, contrastRails},
	{"grids", false, gridFigures},
	{"grid-bits", false, gridBits},
	{"stochastic-beside-nearest", false, twinFigure},
	{"training-loss", false, overview},
	{"loss-by-arm", false, panels},
	{"score-against-bits", false, frontOf(0)},
	{"score-against-bytes", false, frontOf(1)},
	{"score-against-energy", false, frontOf(2)},
	{"step-map", false, stepMap},
	{"range-map", false, rangeMap},
	{"range-by-epoch", false, epochMap},
	{"kept-signal", false, keptFigure(0)},
	{"signal-map", false, signalMap},
	{"kept-sums", false, keptFigure(1)},
	{"kept-updates", false, keptFigure(2)},
	{"update-bias", false, keptFigure(3)},
	{"gradient-direction", false, keptFigure(4)},
	{"exponents", false, exponentFigures},
	{"recall", false, recallLattice},
}

// drawFigure draws all parts of the figure of that id.
func drawFigure(v *view, id string, width float64) []*draw.Figure {
	for _, f := range figureTable {
		if f.id == id {
			parts := f.draw(v, width)
			for i, p := range parts {
				p.ID = partID(id, i)
			}
			return parts
		}
	}
	panic("report: no figure " + id)
}

// partID names part i of a figure: "margin-rail", "margin-rail-2".
func partID(id string, i int) string {
	if i == 0 {
		return id
	}
	return fmt.Sprintf("%s-%d", id, i+1)
}
