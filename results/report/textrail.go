package report

import (
	"math"
	"strings"

	"ulpine/results"
)

// textRail draws intervals as text: a post at the margin, a stroke at zero.
type textRail struct {
	v     *view
	cells int
	d     domain
	fold  float64 // see rail
}

// newTextRail makes a rail with the same scale as the drawn one.
func newTextRail(v *view, cs []results.Comparison, cells int) *textRail {
	d := railDomain(v, cs)
	return &textRail{v: v, cells: max(cells, 12), d: d, fold: d.fold()}
}

// at is the cell of a value in the metric's own unit; -1 when it has none.
func (r *textRail) at(v float64) int {
	return r.cell(r.v.words.scale(v))
}

// cell is the cell of a value in printed units.
func (r *textRail) cell(v float64) int {
	x := r.d.scale(r.fold, 0, float64(r.cells-1)).At(v)
	if math.IsNaN(x) {
		return -1
	}
	return int(math.Round(math.Max(0, math.Min(float64(r.cells-1), x))))
}

// head names the post and the zero above the rail.
func (r *textRail) head() string {
	line := []rune(strings.Repeat(" ", r.cells))
	if z := r.at(0); z >= 0 {
		line[z] = '0'
	}
	if r.d.margin > 0 {
		m := r.d.margin
		word := []rune(fixed(-m, marginDigits(m)))
		p := r.cell(-m) - len(word)/2
		for i, c := range word {
			// The zero keeps its place and a blank before it.
			if k := p + i; k >= 0 && k < len(line) && line[k] == ' ' && k != r.at(0)-1 {
				line[k] = c
			}
		}
	}
	return string(line)
}

// draw is one interval on the rail.
func (r *textRail) draw(c *results.Comparison) string {
	line := []rune(strings.Repeat("·", r.cells))
	put := func(v float64, c rune) {
		if k := r.at(v); k >= 0 {
			line[k] = c
		}
	}
	put(0, '│') // later marks cover earlier ones: the mean is always seen
	if c.Margin > 0 {
		put(-c.Margin, '┃')
	}
	if lo, hi := r.at(c.Low), r.at(c.High); lo >= 0 && hi >= lo {
		for k := lo; k <= hi; k++ {
			switch line[k] {
			case '·':
				line[k] = '━'
			case '│':
				line[k] = '┿'
			case '┃':
				line[k] = '╋'
			}
		}
	}
	put(c.Mean, []rune(verdictMark(c.Verdict.Kind))[0])
	return string(line)
}

// legend explains marks and rail.
func (r *textRail) legend() string {
	s := "┃ margin, │ no difference, ━ interval (uncorrected; verdicts are Holm-corrected), to the right is better"
	if r.fold > 0 {
		s += "; logarithmic beyond two margins"
	}
	return s
}
