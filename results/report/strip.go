package report

import (
	"fmt"
	"math"
	"regexp"
	"slices"
	"strconv"
	"strings"

	"ulpine/results"
	"ulpine/results/report/draw"
)

// strip is one bit strip: a format with the rounding that leads into it, and
// the rounding points that share it.
type strip struct {
	Where    string // "stored", "sums", "update", joined where equal
	Format   string
	Sign     int
	Exponent int
	Integer  int // bits before the point of a fixed-point format
	Fraction int
	Random   int // bits of stochastic rounding, drawn as dots behind the strip
	How      string
}

// groups are the kinds of points that have a strip each, in order of print.
var groups = []string{"stored", "products", "sums", "update"}

// groupOf sorts a rounding point into one of the groups.
func groupOf(point string) string {
	phase, name := splitPoint(point)
	switch {
	case name == "product":
		return "products"
	case name == "sum" || name == "outer":
		return "sums"
	case phase == "update":
		return "update"
	}
	return "stored"
}

// splitPoint takes a point's name apart: "input_gradient.sum" is the point
// "sum" of phase "input gradient".
func splitPoint(point string) (phase, name string) {
	p := strings.ToLower(strings.NewReplacer("_", " ", "-", " ").Replace(plain(point)))
	phase, name, found := strings.Cut(p, ".")
	if !found {
		return phase, phase
	}
	return phase, name
}

var randomBits = regexp.MustCompile(`\br=(\d+)`)

// newStrip takes format and rounding from a setting.
func newStrip(s results.Setting) strip {
	t := strip{Format: plain(s.Format), Exponent: max(0, s.Exponent), Fraction: max(0, s.Fraction)}
	rest := s.Bits - t.Exponent - t.Fraction
	if rest > 0 {
		t.Sign, t.Integer = 1, rest-1
	}
	if m := randomBits.FindStringSubmatch(s.Rounding); m != nil {
		t.Random, _ = strconv.Atoi(m[1]) // digits only; one that overflows becomes the largest int
		t.Random = min(t.Random, 32)
	}
	var how []string
	if r := plain(s.Rounding); r != "" && r != "nearest-even" {
		how = append(how, r)
	}
	if o := plain(s.Order); o != "" && o != "sequential" {
		how = append(how, o)
	}
	t.How = strings.Join(how, ", ")
	return t
}

// bits is the width of the format.
func (s strip) bits() int { return s.Sign + s.Exponent + s.Integer + s.Fraction }

// Label says the strip in words: "stored: bf16 (1 sign, 8 exponent, 7 fraction)".
func (s strip) Label() string {
	w := s.Where + " " + s.Format
	if s.How != "" {
		w += ", " + s.How
	}
	return w
}

// Split says how the bits are divided, "1+8+7".
func (s strip) Split() string {
	parts := []string{strconv.Itoa(s.Sign), strconv.Itoa(s.Exponent + s.Integer), strconv.Itoa(s.Fraction)}
	return strings.Join(parts, "+")
}

// reused is the rounding of a point that takes over what another point has
// rounded: nothing happens there.
const reused = "reused"

// perGroup is how many strips a group shows before it counts the rest in words.
const perGroup = 2

// strips are the bit strips of an arm: the formats of each group, most used
// first, groups with the same formats together.
func strips(settings []results.Setting) []strip {
	type use struct {
		s strip
		n int
	}
	found := map[string][]use{}
	for _, set := range settings {
		if set.Rounding == reused {
			continue
		}
		g, s := groupOf(set.Point), newStrip(set)
		i := slices.IndexFunc(found[g], func(u use) bool { return u.s == s })
		if i < 0 {
			found[g] = append(found[g], use{s, 0})
			i = len(found[g]) - 1
		}
		found[g][i].n++
	}
	var out []strip
	for _, g := range groups {
		slices.SortStableFunc(found[g], func(a, b use) int { return b.n - a.n })
		for i, u := range found[g] {
			if i == perGroup {
				break
			}
			u.s.Where = g
			if rest := len(found[g]) - perGroup; i == perGroup-1 && rest > 0 {
				u.s.How = strings.TrimPrefix(fmt.Sprintf("%s, and %d more", u.s.How, rest), ", ")
			}
			out = joinStrip(out, u.s)
		}
	}
	if len(out) == 1 {
		out[0].Where = "everything"
	}
	return out
}

// joinStrip adds a strip, or its group to a strip that is the same.
func joinStrip(out []strip, s strip) []strip {
	for i := range out {
		a, b := out[i], s
		a.Where, b.Where = "", ""
		if a == b {
			out[i].Where += ", " + s.Where
			return out
		}
	}
	return append(out, s)
}

// stripCell is the width of a bit in pixels, stripHeight the height of a strip.
const (
	stripCell   = 3.5
	stripHeight = 10.0
)

// drawStrip draws a strip at x, y (top left) with cells of a width: sign,
// exponent and fraction as filled cells, each bit one; random bits as dots. It
// returns the width used.
func drawStrip(g *draw.Group, x, y, cell float64, s strip) float64 {
	g = g.Titled(fmt.Sprintf("%s: %d bits, %d sign, %d exponent, %d fraction", s.Label(), s.bits(), s.Sign, s.Exponent+s.Integer, s.Fraction))
	x0 := x
	part := func(n int, r draw.Role, top float64) {
		var ops []draw.Op
		for range n {
			ops = append(ops, draw.RectOps(x, y+top, cell-0.8, stripHeight-top)...)
			x += cell
		}
		g.Path(draw.Fill(r), ops...)
	}
	// The parts differ in height too, so that they are told apart without colour.
	part(s.Sign, draw.Sign, 0)
	part(s.Exponent+s.Integer, draw.Exponent, 0)
	part(s.Fraction, draw.Fraction, 3)
	if s.Random > 0 {
		x += cell / 2
		for range s.Random {
			g.Circle(x+cell/2-0.4, y+stripHeight-1.3, 1.1, draw.Fill(draw.Soft))
			x += cell * 0.75
		}
	}
	return x - x0
}

// glyph is the strip as a small drawing for a line of the page.
func (s strip) glyph() *draw.Figure {
	f := &draw.Figure{H: stripHeight}
	f.W = max(1, drawStrip(&f.Group, 0, 0, stripCell, s))
	return f
}

// stripArms is the number of arms whose strips stand in one figure.
const stripArms = 16

// stripFigure draws the bit strips of all arms, for figure files; on the page
// they stand in the verdict table.
func stripFigure(v *view, width float64) []*draw.Figure {
	var out []*draw.Figure
	for i := 0; i < len(v.arms); i += stripArms {
		out = append(out, stripPart(v.arms[i:min(i+stripArms, len(v.arms))], width))
	}
	return out
}

func stripPart(arms []*armView, width float64) *draw.Figure {
	const row = 17.0
	f := &draw.Figure{Title: "Bit strips: the formats of each arm", W: width}
	y := 6.0
	left := math.Min(230, width*0.3)
	var desc []string
	for _, a := range arms {
		for i, l := range draw.Wrap(a.Label(), 11.5, true, left-14, max(1, len(a.Strips))) {
			f.Text(0, y+11+row*float64(i), l, draw.Type{Size: 11.5, Bold: true})
		}
		for i, s := range a.Strips {
			top := y + row*float64(i)
			end := left + drawStrip(&f.Group, left, top+2, stripCell, s)
			f.Text(end+10, top+11, s.Label()+" ("+s.Split()+")", draw.Type{Size: 10.5, Role: draw.Soft, Max: width - end - 12})
		}
		y += row*float64(max(1, len(a.Strips))) + 8
		desc = append(desc, a.Label()+": "+stripWords(a.Strips)+".")
	}
	f.H, f.Desc = y, strings.Join(desc, " ")
	return f
}

// stripWords are an arm's strips in one line.
func stripWords(s []strip) string {
	if len(s) == 0 {
		return "no settings recorded"
	}
	words := make([]string, len(s))
	for i := range s {
		words[i] = s[i].Label()
	}
	return strings.Join(words, "; ")
}
