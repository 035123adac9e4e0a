package report

import (
	"cmp"
	"math"
	"slices"
	"strconv"

	"ulpine/results/report/draw"
)

// numberPoints writes the arms' numbers beside their marks, on the first side
// that is free; where none is, the mark's title has to do.
func numberPoints(groups []*draw.Group, p frame, arms []*armView, places []draw.Point) {
	var taken []draw.Box
	for _, q := range places {
		taken = append(taken, draw.Box{X0: q.X - 5, Y0: q.Y - 5, X1: q.X + 5, Y1: q.Y + 5})
	}
	for i, a := range arms {
		words := strconv.Itoa(a.Number)
		if a.Number == 0 { // the baseline has no number
			words = draw.Fit(a.Label(), 9.5, false, 60)
		}
		w := draw.Width(words, 9.5, false)
		for _, side := range []draw.Point{{X: 7, Y: 3.4}, {X: -7 - w, Y: 3.4}, {X: -w / 2, Y: -8}, {X: -w / 2, Y: 15}} {
			t := draw.Text{X: places[i].X + side.X, Y: places[i].Y + side.Y, S: words, Size: 9.5}
			b := t.Box()
			free := b.X0 > p.x0 && b.X1 < p.x1 && b.Y0 > 2
			for k, o := range taken {
				free = free && (k == i || b.Overlap(o) == 0)
			}
			if free {
				groups[i].Text(t.X, t.Y, words, draw.Type{Size: t.Size, Role: draw.Soft})
				taken = append(taken, b)
				break
			}
		}
	}
}

// sideways parts arms of (nearly) the same expense by a few pixels where their
// intervals would hide each other. The best of them stays where it belongs: it is
// the one on which a step of the Pareto set may stand.
func (v *view) sideways(e *expense, p frame, arms []*armView) []float64 {
	const step, most, clear = 9.0, 27.0, 6.0 // pixels
	byScore := make([]int, len(arms))
	for i := range byScore {
		byScore[i] = i
	}
	slices.SortStableFunc(byScore, func(a, b int) int { return cmp.Compare(v.gain(arms[b]), v.gain(arms[a])) })
	out := make([]float64, len(arms))
	type stretch struct{ column, place int } // of the axis; steps beside it
	taken := map[stretch][]draw.Box{}
	for _, i := range byScore {
		x, _, _ := e.of(v, arms[i])
		low, high := v.frontBounds(arms[i])
		b := draw.Box{X1: 1, Y0: p.y.At(arms[i].Score.Mean) - clear, Y1: p.y.At(arms[i].Score.Mean) + clear}
		for _, end := range []float64{p.y.At(low), p.y.At(high)} {
			if !math.IsNaN(end) {
				b.Y0, b.Y1 = math.Min(b.Y0, end-1), math.Max(b.Y1, end+1)
			}
		}
		at := stretch{column: int(math.Round(p.x.At(x) / step))}
		for n := 0; ; n++ {
			at.place = (n + 1) / 2 // 0, -1, +1, -2, +2 ... steps
			if n%2 == 1 {
				at.place = -at.place
			}
			hidden := slices.ContainsFunc(taken[at], func(o draw.Box) bool { return b.Overlap(o) > 0 })
			if !hidden || math.Abs(step*float64(at.place)) >= most {
				break
			}
		}
		taken[at] = append(taken[at], b)
		out[i] = step * float64(at.place)
	}
	return out
}
