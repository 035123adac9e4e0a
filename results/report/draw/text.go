package draw

import (
	"math"
	"strings"
	"sync"
	"unicode"

	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/font/liberation"
	"gonum.org/v1/plot/vg"

	stdfont "golang.org/x/image/font"
)

// Anchor says which end of a word sits at its place.
type Anchor uint8

// The anchors.
const (
	Start Anchor = iota
	Middle
	End
)

// Text is one line of words; X, Y is on its base line.
type Text struct {
	X, Y   float64
	S      string
	Size   float64 // pixels
	Anchor Anchor
	Role   Role
	Bold   bool
	Turn   float64 // degrees, clockwise on the screen, around X, Y
	Title  string  // the words in full, where S is shortened
}

// Type is how words are set; the zero value of a field means: 11 px, ink.
type Type struct {
	Size   float64
	Anchor Anchor
	Role   Role
	Bold   bool
	Turn   float64
	Max    float64 // pixels; longer words end in an ellipsis and are told in full when pointed at; 0: no limit
}

// Text adds words; nothing when the place is not finite or there is nothing to say.
func (g *Group) Text(x, y float64, s string, t Type) {
	if !finite(x, y) || strings.TrimSpace(s) == "" {
		return
	}
	if t.Size == 0 {
		t.Size = 11
	}
	if t.Role == None {
		t.Role = Ink
	}
	m := &Text{X: x, Y: y, S: Clean(s), Size: t.Size, Anchor: t.Anchor, Role: t.Role, Bold: t.Bold, Turn: t.Turn}
	if t.Max > 0 {
		if short := Fit(m.S, t.Size, t.Bold, t.Max); short != m.S {
			m.S, m.Title = short, m.S
		}
	}
	g.Marks = append(g.Marks, m)
}

// Clean replaces what no line of print can hold, control characters and bytes
// that are not UTF-8, by the replacement character.
func Clean(s string) string {
	return strings.Map(func(r rune) rune {
		if r == '\t' || r == '\n' {
			return ' '
		}
		if unicode.IsControl(r) || unicode.Is(unicode.Cf, r) || r == 0xfffe || r == 0xffff {
			return unicode.ReplacementChar
		}
		return r
	}, strings.ToValidUTF8(s, "\ufffd"))
}

// faces are Liberation Sans at 100 px, regular and bold, with the advances
// measured so far.
var faces struct {
	sync.Mutex
	cache   *font.Cache
	advance [2]map[rune]float64 // in ems
	face    [2]stdfont.Face
}

// face returns Liberation Sans for the PNG back end, size in vg points.
func face(size float64, bold bool) font.Face {
	faces.Lock()
	defer faces.Unlock()
	return lookup(size, bold)
}

// lookup finds a face in the cache; the caller holds the lock.
func lookup(size float64, bold bool) font.Face {
	if faces.cache == nil {
		faces.cache = font.NewCache(liberation.Collection())
	}
	f := font.Font{Typeface: "Liberation", Variant: "Sans"}
	if bold {
		f.Weight = stdfont.WeightBold
	}
	return faces.cache.Lookup(f, vg.Length(size))
}

// Width is the width of a line of words in pixels. A character that the font
// lacks counts as one em.
func Width(s string, size float64, bold bool) float64 {
	faces.Lock()
	defer faces.Unlock()
	i := 0
	if bold {
		i = 1
	}
	if faces.advance[i] == nil {
		f := lookup(100, bold)
		faces.advance[i] = map[rune]float64{}
		faces.face[i] = f.FontFace(72)
	}
	w := 0.0
	for _, r := range s {
		a, ok := faces.advance[i][r]
		if !ok {
			a = 1 // an em, for what the font cannot draw
			if adv, has := faces.face[i].GlyphAdvance(r); has {
				a = float64(adv) / 64 / 100
			}
			faces.advance[i][r] = a
		}
		w += a
	}
	return w * size
}

// Fit shortens words to at most limit pixels, an ellipsis in place of the rest.
func Fit(s string, size float64, bold bool, limit float64) string {
	if Width(s, size, bold) <= limit {
		return s
	}
	// The longest beginning that fits, by halving.
	rs := []rune(s)
	lo, hi := 0, len(rs)
	for lo < hi {
		m := (lo + hi + 1) / 2
		if Width(strings.TrimRight(string(rs[:m]), " ")+"…", size, bold) <= limit {
			lo = m
		} else {
			hi = m - 1
		}
	}
	return strings.TrimRight(string(rs[:lo]), " ") + "…"
}

// Wrap breaks words into at most lines lines of at most limit pixels; the last
// one is shortened when the words do not fit. A word longer than a line is cut
// where the line ends.
func Wrap(s string, size float64, bold bool, limit float64, lines int) []string {
	var out []string
	rest := strings.Join(strings.Fields(Clean(s)), " ")
	for rest != "" {
		if len(out) == lines-1 {
			return append(out, Fit(rest, size, bold, limit))
		}
		n := breakAt(rest, size, bold, limit)
		out = append(out, strings.TrimSpace(rest[:n]))
		rest = strings.TrimSpace(rest[n:])
	}
	return out
}

// breakAt is the number of bytes of s that go on a line of limit pixels.
func breakAt(s string, size float64, bold bool, limit float64) int {
	if Width(s, size, bold) <= limit {
		return len(s)
	}
	best, last := 0, 0 // the last blank, and the last character, that fit
	for i, r := range s {
		if i > 0 && Width(s[:i], size, bold) > limit {
			break
		}
		if r == ' ' {
			best = i
		}
		last = i
	}
	switch {
	case best > 0:
		return best
	case last > 0:
		return last
	}
	return len(string([]rune(s)[:1])) // not one fits: take one, or the loop would not end
}

// Box is a rectangle of a figure.
type Box struct{ X0, Y0, X1, Y1 float64 }

// Box is the place the words take, the smallest upright rectangle around them.
func (t *Text) Box() Box {
	w := Width(t.S, t.Size, t.Bold)
	x := 0.0
	switch t.Anchor {
	case Middle:
		x = -w / 2
	case End:
		x = -w
	}
	// Ascent and descent of capitals, figures and tails, in ems.
	top, bottom := -0.76*t.Size, 0.22*t.Size
	sin, cos := math.Sincos(t.Turn * math.Pi / 180)
	b := Box{math.Inf(1), math.Inf(1), math.Inf(-1), math.Inf(-1)}
	for _, p := range []Point{{x, top}, {x + w, top}, {x, bottom}, {x + w, bottom}} {
		px, py := t.X+p.X*cos-p.Y*sin, t.Y+p.X*sin+p.Y*cos
		b.X0, b.X1 = math.Min(b.X0, px), math.Max(b.X1, px)
		b.Y0, b.Y1 = math.Min(b.Y0, py), math.Max(b.Y1, py)
	}
	return b
}

// Overlap is how far two boxes reach into each other, in pixels: the smaller of
// the two directions, 0 when they are apart.
func (b Box) Overlap(c Box) float64 {
	dx := math.Min(b.X1, c.X1) - math.Max(b.X0, c.X0)
	dy := math.Min(b.Y1, c.Y1) - math.Max(b.Y0, c.Y0)
	return math.Max(0, math.Min(dx, dy))
}

// Words returns every text of the figure.
func (f *Figure) Words() []*Text {
	var out []*Text
	var walk func(g *Group)
	walk = func(g *Group) {
		for _, m := range g.Marks {
			switch m := m.(type) {
			case *Text:
				out = append(out, m)
			case *Group:
				walk(m)
			}
		}
	}
	walk(&f.Group)
	return out
}
