package draw

import (
	"image/png"
	"io"
	"math"

	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/vgimg"
)

// WritePNG writes the figure in the light theme at scale dots a pixel (2 is
// good for a screen, 3 for print), with a margin.
func (f *Figure) WritePNG(w io.Writer, scale float64) error {
	return f.writePNG(w, &Light, FilePad, scale)
}

// WritePlainPNG writes the figure for a paper: on white, without a margin.
func (f *Figure) WritePlainPNG(w io.Writer, scale float64) error {
	return f.writePNG(w, &White, 0, scale)
}

func (f *Figure) writePNG(w io.Writer, theme *Theme, pad, scale float64) error {
	ground, _ := theme.Colour(Paper)
	// One pixel of the figure is one vg point, and 72 points are an inch.
	c := vgimg.NewWith(
		vgimg.UseWH(vg.Length(f.W+2*pad), vg.Length(f.H+2*pad)),
		vgimg.UseDPI(int(math.Round(72*scale))),
		vgimg.UseBackgroundColor(ground),
	)
	c.Translate(vg.Point{X: vg.Length(pad), Y: vg.Length(pad)})
	r := raster{c, f.H, theme}
	r.marks(f.Marks)
	return png.Encode(w, c.Image())
}

// raster paints marks on a canvas whose y axis points up.
type raster struct {
	c     vg.Canvas
	h     float64
	theme *Theme
}

func (r raster) marks(ms []Mark) {
	for _, m := range ms {
		switch m := m.(type) {
		case *Group:
			r.marks(m.Marks)
		case *Path:
			r.path(m)
		case *Text:
			r.text(m)
		}
	}
}

// at is a place of the figure on the canvas.
func (r raster) at(x, y float64) vg.Point {
	return vg.Point{X: vg.Length(x), Y: vg.Length(r.h - y)}
}

func (r raster) path(p *Path) {
	var v vg.Path
	// Angles turn the other way where y points up.
	for _, o := range p.Ops {
		switch o.Kind {
		case Move:
			v.Move(r.at(o.X, o.Y))
		case To:
			v.Line(r.at(o.X, o.Y))
		case Close:
			v.Close()
		case Arc:
			s, c := math.Sincos(o.A0)
			v.Move(r.at(o.X+o.R*c, o.Y+o.R*s))
			v.Arc(r.at(o.X, o.Y), vg.Length(o.R), -o.A0, -o.Sweep)
		}
	}
	r.c.Push()
	defer r.c.Pop()
	if r.paint(p.Style.Fill, p.Style.Opacity) {
		r.c.Fill(v)
	}
	if r.paint(p.Style.Line, p.Style.Opacity) {
		r.c.SetLineWidth(vg.Length(width(p.Style)))
		dash := make([]vg.Length, len(p.Style.Dash))
		for i, d := range p.Style.Dash {
			dash[i] = vg.Length(d)
		}
		r.c.SetLineDash(dash, 0)
		r.c.Stroke(v)
	}
}

// width is the width of a style's line; unset means one pixel.
func width(s Style) float64 {
	if s.Width == 0 {
		return 1
	}
	return s.Width
}

// paint sets the colour; false when there is nothing to paint.
func (r raster) paint(role Role, opacity float64) bool {
	c, ok := r.theme.Colour(role)
	if !ok {
		return false
	}
	if opacity > 0 && opacity < 1 {
		c.A = uint8(math.Round(255 * opacity))
	}
	r.c.SetColor(c)
	return true
}

// text writes words from their left end: the canvas knows no anchors.
func (r raster) text(t *Text) {
	words := raised(t.S, t.Bold)
	w := Width(words, t.Size, t.Bold)
	dx := 0.0
	switch t.Anchor {
	case Middle:
		dx = -w / 2
	case End:
		dx = -w
	}
	r.c.Push()
	defer r.c.Pop()
	r.paint(t.Role, 0)
	r.c.Translate(r.at(t.X, t.Y))
	r.c.Rotate(-t.Turn * math.Pi / 180)
	r.c.FillString(face(t.Size, t.Bold), vg.Point{X: vg.Length(dx)}, words)
}
