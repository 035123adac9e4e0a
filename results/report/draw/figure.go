package draw

import "math"

// Figure is a drawing of W x H pixels with a name and a description for readers
// who do not see it.
type Figure struct {
	ID    string // file name and element id: lower-case letters, digits, hyphens
	Title string
	Desc  string
	W, H  float64
	// Data are attributes of the SVG element for the page's script.
	Data []Attr
	Group
}

// Attr is an attribute data-NAME.
type Attr struct{ Name, Value string }

// Mark is one thing drawn: *Path, *Text or *Group.
type Mark interface{ mark() }

// Group holds marks that belong together.
type Group struct {
	Class string // for the page's script; empty: none
	Data  []Attr
	Title string // shown when pointed at
	Marks []Mark
}

// Style is how a path is painted. The zero value paints nothing.
type Style struct {
	Fill    Role
	Line    Role
	Width   float64   // of the line, pixels; 0: 1
	Dash    []float64 // nil: solid
	Opacity float64   // of the whole path, 0: opaque
}

// Fill paints an area.
func Fill(r Role) Style { return Style{Fill: r} }

// Line draws a line.
func Line(r Role, width float64) Style { return Style{Line: r, Width: width} }

// With returns s at an opacity of 0..1.
func (s Style) With(opacity float64) Style { s.Opacity = opacity; return s }

// Dashed returns s with a dash pattern.
func (s Style) Dashed(dash ...float64) Style { s.Dash = dash; return s }

// Path is a sequence of lines and arcs.
type Path struct {
	Ops   []Op
	Style Style
	Title string
}

// OpKind tells the steps of a path apart.
type OpKind uint8

// The steps of a path.
const (
	Move  OpKind = iota // to X, Y
	To                  // a straight line to X, Y
	Arc                 // around X, Y: radius R, from angle A0 through Sweep radians, clockwise on the screen
	Close               // back to the last Move
)

// Op is one step of a path.
type Op struct {
	Kind         OpKind
	X, Y         float64
	R, A0, Sweep float64
}

// Point is a place in a figure, y downwards.
type Point struct{ X, Y float64 }

// finite reports whether all values can be drawn.
func finite(v ...float64) bool {
	for _, x := range v {
		if math.IsNaN(x) || math.IsInf(x, 0) {
			return false
		}
	}
	return true
}

func (*Path) mark()  {}
func (*Text) mark()  {}
func (*Group) mark() {}

// Sub adds a group and returns it.
func (g *Group) Sub(class string, data ...Attr) *Group {
	s := &Group{Class: class, Data: data}
	g.Marks = append(g.Marks, s)
	return s
}

// Titled adds a group whose marks show a title when pointed at.
func (g *Group) Titled(title string) *Group {
	s := &Group{Title: title}
	g.Marks = append(g.Marks, s)
	return s
}

// Path adds a path; nothing when a coordinate is not finite.
func (g *Group) Path(s Style, ops ...Op) {
	for _, o := range ops {
		if !finite(o.X, o.Y, o.R, o.A0, o.Sweep) {
			return
		}
	}
	if len(ops) > 0 {
		g.Marks = append(g.Marks, &Path{Ops: ops, Style: s})
	}
}

// Line adds a straight line.
func (g *Group) Line(x1, y1, x2, y2 float64, s Style) {
	g.Path(s, Op{Kind: Move, X: x1, Y: y1}, Op{Kind: To, X: x2, Y: y2})
}

// Rect adds a rectangle; nothing when it has no area.
func (g *Group) Rect(x, y, w, h float64, s Style) {
	if !(w > 0) || !(h > 0) {
		return
	}
	g.Path(s, RectOps(x, y, w, h)...)
}

// RectOps is a rectangle as steps of a path.
func RectOps(x, y, w, h float64) []Op {
	return []Op{
		{Kind: Move, X: x, Y: y},
		{Kind: To, X: x + w, Y: y},
		{Kind: To, X: x + w, Y: y + h},
		{Kind: To, X: x, Y: y + h},
		{Kind: Close},
	}
}

// Circle adds a circle.
func (g *Group) Circle(x, y, r float64, s Style) {
	g.Sector(x, y, r, 0, 2*math.Pi, s)
}

// Sector adds the part of a circle that starts at angle a0 (0: to the right)
// and sweeps clockwise; it is filled to its chord.
func (g *Group) Sector(x, y, r, a0, sweep float64, s Style) {
	g.Path(s, Op{Kind: Arc, X: x, Y: y, R: r, A0: a0, Sweep: sweep})
}

// Polyline adds a line through the points, broken where one is not finite; a
// point alone between two gaps becomes a dot.
func (g *Group) Polyline(pts []Point, s Style) {
	var ops []Op
	for i := 0; i < len(pts); {
		j := i
		for j < len(pts) && finite(pts[j].X, pts[j].Y) {
			j++
		}
		switch {
		case j == i+1:
			g.Circle(pts[i].X, pts[i].Y, math.Max(1.2, s.Width*0.8), Style{Fill: s.Line, Opacity: s.Opacity})
		case j > i:
			ops = append(ops, Op{Kind: Move, X: pts[i].X, Y: pts[i].Y})
			for _, p := range pts[i+1 : j] {
				ops = append(ops, Op{Kind: To, X: p.X, Y: p.Y})
			}
		}
		i = j + 1
	}
	g.Path(s, ops...)
}

// Band adds the area between two lines over the same x, broken where either is
// not finite.
func (g *Group) Band(x, lo, hi []float64, s Style) {
	var ops []Op
	for i := 0; i < len(x); {
		j := i
		for j < len(x) && finite(x[j], lo[j], hi[j]) {
			j++
		}
		if j > i+1 {
			ops = append(ops, Op{Kind: Move, X: x[i], Y: hi[i]})
			for k := i + 1; k < j; k++ {
				ops = append(ops, Op{Kind: To, X: x[k], Y: hi[k]})
			}
			for k := j - 1; k >= i; k-- {
				ops = append(ops, Op{Kind: To, X: x[k], Y: lo[k]})
			}
			ops = append(ops, Op{Kind: Close})
		}
		i = j + 1
	}
	g.Path(s, ops...)
}

// Hatch fills a rectangle with lines rising to the right, gap pixels apart.
func (g *Group) Hatch(x, y, w, h, gap float64, s Style) {
	if !finite(x, y, w, h) || !(w > 0) || !(h > 0) {
		return
	}
	var ops []Op
	// The line of offset d runs from (x+d, y+h) up to (x+d+h, y), cut to the rectangle.
	for d := gap*math.Ceil(-h/gap) + gap/2; d < w; d += gap {
		x1, x2 := math.Max(0, d), math.Min(w, d+h)
		if x2-x1 < 0.5 {
			continue
		}
		ops = append(ops,
			Op{Kind: Move, X: x + x1, Y: y + h - (x1 - d)},
			Op{Kind: To, X: x + x2, Y: y + h - (x2 - d)})
	}
	g.Path(s, ops...)
}
