package report

import (
	"fmt"
	"math"
	"strings"

	"ulpine/results"
	"ulpine/results/report/draw"
)

// recall is how often one class is found by one arm.
type recall struct {
	Class     string
	Mean      estimate // over replicates
	Worst     *results.Run
	Hit, Of   uint64 // of the worst replicate
	Low, High float64
}

// Rate is the recall in the worst replicate.
func (r recall) Rate() float64 {
	if r.Of == 0 {
		return math.NaN()
	}
	return float64(r.Hit) / float64(r.Of)
}

// confused reports whether a run has a confusion matrix of its stated size.
func confused(r *results.Run) bool {
	return r.Classes > 0 && len(r.Confusion) == r.Classes*r.Classes
}

// recalls are an arm's recalls by class; nil when no run was counted.
func (v *view) recalls(a *armView) []recall {
	classes := 0
	for _, r := range a.Runs {
		if confused(r) {
			classes = max(classes, r.Classes)
		}
	}
	out := make([]recall, classes)
	for c := range out {
		out[c] = v.recallOf(a, c)
	}
	return out
}

// recallOf is an arm's recall of one class over its replicates. With equal rates
// the first replicate counts as the worst.
func (v *view) recallOf(a *armView, class int) recall {
	out := recall{Class: v.class(class), Low: math.NaN(), High: math.NaN()}
	var rates []float64
	for _, r := range a.Runs {
		hit, of := classCount(r, class)
		if of == 0 {
			continue
		}
		rates = append(rates, float64(hit)/float64(of))
		if out.Worst == nil || float64(hit)/float64(of) < out.Rate() {
			out.Worst, out.Hit, out.Of = r, hit, of
		}
	}
	out.Mean = tInterval(rates, v.Confidence)
	if out.Worst != nil {
		out.Low, out.High = results.ExactRate(out.Hit, out.Of, v.Confidence)
	}
	return out
}

// classCount is how many test examples of a class a run named rightly, of how many.
func classCount(r *results.Run, class int) (hit, of uint64) {
	if !confused(r) || class >= r.Classes {
		return 0, 0
	}
	row := r.Confusion[class*r.Classes : (class+1)*r.Classes]
	for _, n := range row {
		of += n
	}
	return row[class], of
}

// class is the name of a class.
func (v *view) class(i int) string {
	if i < len(v.Classes) && plain(v.Classes[i]) != "" {
		return plain(v.Classes[i])
	}
	return fmt.Sprintf("class %d", i)
}

// pooled adds the confusion matrices of an arm's runs that have the same size.
func pooled(a *armView) (sum []uint64, classes, n int) {
	for _, r := range a.Runs {
		if !confused(r) {
			continue
		}
		if sum == nil {
			classes, sum = r.Classes, make([]uint64, r.Classes*r.Classes)
		}
		if r.Classes == classes {
			for i, x := range r.Confusion {
				sum[i] += x
			}
			n++
		}
	}
	return sum, classes, n
}

// latticeRows and latticeClasses bound one recall figure.
const (
	latticeRows    = 18
	latticeClasses = 10
)

// recallLattice draws, for each arm (rows) and class (columns), the mean recall
// with its interval and the worst replicate, all on one scale.
func recallLattice(v *view, width float64) []*draw.Figure {
	var arms []*armView
	var all [][]recall
	classes := 0
	for _, a := range v.arms {
		if r := v.recalls(a); len(r) > 0 {
			arms, all, classes = append(arms, a), append(all, r), max(classes, len(r))
		}
	}
	perFigure := latticeClasses
	if width < 600 {
		perFigure = 3
	}
	// Eleven classes become six and five, not ten and one.
	groups := (classes + perFigure - 1) / perFigure
	var out []*draw.Figure
	for g := range groups {
		from, to := g*classes/groups, (g+1)*classes/groups
		for i := 0; i < len(arms); i += latticeRows {
			j := min(i+latticeRows, len(arms))
			out = append(out, lattice(v, arms[i:j], all[i:j], from, to, width))
		}
	}
	return out
}

// lattice draws the classes from..to of some arms.
func lattice(v *view, arms []*armView, all [][]recall, from, to int, width float64) *draw.Figure {
	left, row, top := 206.0, 26.0, 40.0
	small := width < 600
	if small {
		left, row = 8, 42
	}
	cell := (width - left - 8) / float64(to-from)
	lo := leastRecall(all)
	f := &draw.Figure{Title: "Recall by class", W: width, H: top + row*float64(len(arms)) + 30}
	var desc strings.Builder
	bottom := top + row*float64(len(arms))
	for c := from; c < to; c++ {
		x := left + cell*float64(c-from)
		latticeColumn(&f.Group, lo, x, cell, top, bottom, v.class(c))
	}
	for i, a := range arms {
		y := top + row*float64(i)
		at := y + row/2
		g := f.Sub("arm", draw.Attr{Name: "arm", Value: a.Slug})
		if small {
			at = y + 29
			g.Text(left, y+14, a.Label(), draw.Type{Size: 11.5, Bold: true, Max: width - 16})
		} else {
			g.Text(0, at+4, a.Label(), draw.Type{Size: 11.5, Bold: true, Max: left - 16})
		}
		fmt.Fprintf(&desc, "%s: ", a.Label())
		for c := from; c < min(to, len(all[i])); c++ {
			latticeCell(g, lo, left+cell*float64(c-from), cell, at, a, all[i][c])
			fmt.Fprintf(&desc, "%s %s, worst %s; ", all[i][c].Class, percentage3(all[i][c].Mean.Mean), percentage3(all[i][c].Rate()))
		}
	}
	f.Text(left+(width-left)/2, bottom+26, fmt.Sprintf("recall from %s to 100 %%: mean with interval (disc), worst replicate (stroke)", draw.TickLabel(100*lo)), draw.Type{Size: 10.5, Anchor: draw.Middle, Role: draw.Soft, Max: width - left - 4})
	f.Desc = strings.TrimSpace(desc.String())
	return f
}

// percentage3 spells a share with three significant digits.
func percentage3(v float64) string {
	if math.IsNaN(v) {
		return missing
	}
	return fixed(100*v, 1) + " %"
}

// leastRecall is where the scale begins: at a round share below all recalls.
func leastRecall(all [][]recall) float64 {
	least := 1.0
	for _, rs := range all {
		for _, r := range rs {
			for _, v := range []float64{r.Mean.Low, r.Mean.Mean, r.Rate()} {
				if v < least { // false for NaN
					least = v
				}
			}
		}
	}
	for _, round := range []float64{0.9, 0.8, 0.6, 0.4, 0.2} {
		if least > round {
			return round
		}
	}
	return 0
}

// latticeScale leaves a margin on both sides of a column.
func latticeScale(lo, x, cell float64) draw.Linear {
	return draw.Linear{Lo: lo, Hi: 1, P0: x + 6, P1: x + cell - 8}
}

// latticeColumn draws a class's head, its grid at the ends and the middle of the
// scale, and its axis.
func latticeColumn(g *draw.Group, lo, x, cell, top, bottom float64, class string) {
	s := latticeScale(lo, x, cell)
	lines := draw.Wrap(class, 11, false, cell-8, 2)
	for i, l := range lines {
		g.Text(x+cell/2-1, top-9-13*float64(len(lines)-1-i), l, draw.Type{Anchor: draw.Middle})
	}
	for _, t := range []float64{lo, (lo + 1) / 2, 1} {
		g.Line(s.At(t), top, s.At(t), bottom, draw.Line(draw.Faint, 0.9))
	}
	g.Line(s.At(lo), bottom, s.At(1), bottom, draw.Line(draw.Ink, 1))
	if cell > 52 {
		g.Text(s.At(lo), bottom+12, draw.TickLabel(100*lo), draw.Type{Size: 9.5, Anchor: draw.Middle, Role: draw.Soft})
		g.Text(s.At(1)+4, bottom+12, "100", draw.Type{Size: 9.5, Anchor: draw.End, Role: draw.Soft})
	}
}

// latticeCell draws one arm's recall of one class.
func latticeCell(g *draw.Group, lo, x, cell, at float64, a *armView, r recall) {
	s := latticeScale(lo, x, cell)
	t := g.Titled(fmt.Sprintf("%s, %s: mean recall %s [%s, %s], n = %d; worst replicate %d of %d", a.Label(), r.Class,
		percentage3(r.Mean.Mean), percentage3(r.Mean.Low), percentage3(r.Mean.High), r.Mean.N, r.Hit, r.Of))
	role := draw.Arm
	if a.Number == 0 {
		role = draw.Base
	}
	hold := func(v float64) float64 { return s.At(math.Max(lo, math.Min(1, v))) }
	t.Line(s.P0, at, s.P1, at, draw.Line(draw.Faint, 0.9))
	t.Line(hold(r.Mean.Low), at, hold(r.Mean.High), at, draw.Line(role, 3.5))
	t.Circle(s.At(r.Mean.Mean), at, 3.4, draw.Style{Fill: role, Line: draw.Paper, Width: 0.8})
	if !math.IsNaN(r.Rate()) {
		t.Line(s.At(r.Rate()), at-6, s.At(r.Rate()), at+6, draw.Line(draw.Ink, 1.6))
	}
}
