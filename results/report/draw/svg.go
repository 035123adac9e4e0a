package draw

import (
	"bufio"
	"encoding/xml"
	"fmt"
	"io"
	"math"
	"strconv"
	"strings"
)

// Families are the type families of a figure: all of the same widths, one of
// them on nearly every machine.
const Families = `'Helvetica Neue', Helvetica, Arial, 'Liberation Sans', sans-serif`

// FilePad is the margin around a figure in a file of its own, pixels.
const FilePad = 10.0

// WriteFile writes the figure as an SVG file of its own, in the light theme,
// with a ground and a margin.
func (f *Figure) WriteFile(w io.Writer) error { return f.writeSVG(w, &Light, FilePad) }

// WritePlain writes the figure as an SVG file for a paper: on white, without a
// margin.
func (f *Figure) WritePlain(w io.Writer) error { return f.writeSVG(w, &White, 0) }

func (f *Figure) writeSVG(w io.Writer, theme *Theme, pad float64) error {
	e := &svgWriter{w: bufio.NewWriter(w), theme: theme}
	e.put(`<?xml version="1.0" encoding="UTF-8"?>` + "\n")
	w2, h2 := num(f.W+2*pad), num(f.H+2*pad)
	e.open(f, f.ID, pad, fmt.Sprintf(` width="%s" height="%s" font-family="%s"`, w2, h2, Families))
	e.put(fmt.Sprintf(`<rect x="%[1]s" y="%[1]s" width="%[2]s" height="%[3]s" fill="%[4]s"/>`, num(-pad), w2, h2, theme[Paper]))
	e.marks(f.Marks)
	e.put("</svg>\n")
	return e.w.Flush()
}

// WriteInline writes the figure as an element of an HTML page that has the rules
// of Classes; id is unique in the page.
func (f *Figure) WriteInline(w io.Writer, id string) error {
	e := &svgWriter{w: bufio.NewWriter(w)}
	e.open(f, id, 0, "")
	e.marks(f.Marks)
	e.put("</svg>")
	return e.w.Flush()
}

// WriteGlyph writes the figure as a small decoration of a line that says the
// same in words: hidden from screen readers.
func (f *Figure) WriteGlyph(w io.Writer) error {
	e := &svgWriter{w: bufio.NewWriter(w)}
	e.put(fmt.Sprintf(`<svg class="glyph" width="%[1]s" height="%[2]s" viewBox="0 0 %[1]s %[2]s" aria-hidden="true" focusable="false">`, num(f.W), num(f.H)))
	e.marks(f.Marks)
	e.put("</svg>")
	return e.w.Flush()
}

// svgWriter writes marks as SVG 1.1 elements; theme is nil in a page, where paints are classes.
type svgWriter struct {
	w     *bufio.Writer
	theme *Theme
}

// put writes; bufio keeps the first error for Flush.
func (e *svgWriter) put(s string) { _, _ = e.w.WriteString(s) }

// open starts the element, with a margin of pad pixels around the figure.
func (e *svgWriter) open(f *Figure, id string, pad float64, more string) {
	e.put(fmt.Sprintf(`<svg xmlns="http://www.w3.org/2000/svg" id="%[1]s" viewBox="%[2]s %[2]s %[3]s %[4]s" role="img" aria-labelledby="%[1]s-t %[1]s-d"%[5]s`,
		esc(id), num(-pad), num(f.W+2*pad), num(f.H+2*pad), more))
	e.data(f.Data)
	e.put(fmt.Sprintf(`><title id="%[1]s-t">%[2]s</title><desc id="%[1]s-d">%[3]s</desc>`, esc(id), esc(f.Title), esc(f.Desc)))
}

// data writes attributes for the page's script.
func (e *svgWriter) data(attrs []Attr) {
	for _, a := range attrs {
		e.put(` data-` + a.Name + `="` + esc(a.Value) + `"`)
	}
}

func (e *svgWriter) marks(ms []Mark) {
	for _, m := range ms {
		switch m := m.(type) {
		case *Group:
			e.group(m)
		case *Path:
			e.path(m)
		case *Text:
			e.text(m)
		}
	}
}

func (e *svgWriter) group(g *Group) {
	if len(g.Marks) == 0 { // all its marks had no place
		return
	}
	e.put("<g")
	if g.Class != "" {
		e.put(` class="` + esc(g.Class) + `"`)
	}
	e.data(g.Data)
	e.put(">")
	if g.Title != "" {
		e.put("<title>" + esc(g.Title) + "</title>")
	}
	e.marks(g.Marks)
	e.put("</g>")
}

func (e *svgWriter) path(p *Path) {
	e.put(`<path d="`)
	for _, o := range p.Ops {
		e.op(o)
	}
	e.put(`"`)
	s := p.Style
	e.paint(s.Fill, s.Line)
	if s.Line != None && s.Width != 0 && s.Width != 1 {
		e.put(` stroke-width="` + num(s.Width) + `"`)
	}
	if len(s.Dash) > 0 {
		d := make([]string, len(s.Dash))
		for i, v := range s.Dash {
			d[i] = num(v)
		}
		e.put(` stroke-dasharray="` + strings.Join(d, " ") + `"`)
	}
	if s.Opacity > 0 && s.Opacity < 1 {
		e.put(` opacity="` + num(s.Opacity) + `"`)
	}
	e.put("/>")
}

// paint writes fill and stroke: classes in a page, colours in a file.
func (e *svgWriter) paint(fill, line Role) {
	if e.theme == nil {
		c := "f-" + fill.String()
		if line != None {
			c += " l-" + line.String()
		}
		e.put(` class="` + c + `"`)
		return
	}
	e.put(` fill="` + e.theme[fill] + `"`)
	if line != None {
		e.put(` stroke="` + e.theme[line] + `"`)
	}
}

// op writes one step of a path.
func (e *svgWriter) op(o Op) {
	switch o.Kind {
	case Move:
		e.put("M" + num(o.X) + " " + num(o.Y))
	case To:
		e.put("L" + num(o.X) + " " + num(o.Y))
	case Close:
		e.put("Z")
	case Arc:
		e.arc(o)
	}
}

// arc writes an arc in pieces of at most half a turn, which SVG can say without
// doubt.
func (e *svgWriter) arc(o Op) {
	at := func(a float64) string {
		s, c := math.Sincos(a)
		return num(o.X+o.R*c) + " " + num(o.Y+o.R*s)
	}
	n := max(1, int(math.Ceil(math.Abs(o.Sweep)/math.Pi-1e-9)))
	dir := "1" // clockwise on the screen
	if o.Sweep < 0 {
		dir = "0"
	}
	e.put("M" + at(o.A0))
	for i := 1; i <= n; i++ {
		e.put("A" + num(o.R) + " " + num(o.R) + " 0 0 " + dir + " " + at(o.A0+o.Sweep*float64(i)/float64(n)))
	}
}

func (e *svgWriter) text(t *Text) {
	e.put(`<text x="` + num(t.X) + `" y="` + num(t.Y) + `" font-size="` + num(t.Size) + `"`)
	switch t.Anchor {
	case Middle:
		e.put(` text-anchor="middle"`)
	case End:
		e.put(` text-anchor="end"`)
	}
	if t.Bold {
		e.put(` font-weight="bold"`)
	}
	if t.Turn != 0 {
		e.put(` transform="rotate(` + num(t.Turn) + " " + num(t.X) + " " + num(t.Y) + `)"`)
	}
	e.paint(t.Role, None)
	e.put(">")
	if t.Title != "" {
		e.put("<title>" + esc(t.Title) + "</title>")
	}
	e.put(esc(t.S) + "</text>")
}

// num writes a coordinate to a hundredth of a pixel.
func num(v float64) string {
	s := strconv.FormatFloat(v, 'f', 2, 64)
	s = strings.TrimRight(strings.TrimRight(s, "0"), ".")
	if s == "-0" || s == "" {
		return "0"
	}
	return s
}

// esc writes words as XML character data or attribute value.
func esc(s string) string {
	var b strings.Builder
	_ = xml.EscapeText(&b, []byte(Clean(s))) // a strings.Builder does not fail
	return b.String()
}
