package draw

import (
	"bytes"
	"encoding/xml"
	"errors"
	"image/png"
	"io"
	"math"
	"math/rand/v2"
	"regexp"
	"slices"
	"strings"
	"testing"
)

// wellFormed reads XML to its end.
func wellFormed(t *testing.T, b []byte) {
	t.Helper()
	d := xml.NewDecoder(bytes.NewReader(b))
	for {
		if _, err := d.Token(); errors.Is(err, io.EOF) {
			return
		} else if err != nil {
			t.Fatalf("%v in %.300s", err, b)
		}
	}
}

func svgOf(t *testing.T, f *Figure) string {
	t.Helper()
	var file, page bytes.Buffer
	if err := f.WriteFile(&file); err != nil {
		t.Fatal(err)
	}
	if err := f.WriteInline(&page, "x"); err != nil {
		t.Fatal(err)
	}
	wellFormed(t, file.Bytes())
	wellFormed(t, page.Bytes())
	return file.String()
}

func TestSpread(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 2))
	for range 2000 {
		n := 1 + r.IntN(12)
		want := make([]float64, n)
		for i := range want {
			want[i] = 100 * r.Float64()
		}
		gap, lo, hi := 1+8*r.Float64(), 0.0, 100.0
		got := Spread(slices.Clone(want), gap, lo, hi)
		gap = math.Min(gap, (hi-lo)/math.Max(1, float64(n-1)))
		for i := range got {
			if got[i] < lo-1e-9 || got[i] > hi+1e-9 {
				t.Fatalf("%v outside %v..%v", got[i], lo, hi)
			}
			for j := range got {
				if want[i] < want[j] && got[j]-got[i] < gap-1e-9 {
					t.Fatalf("want %v gap %v: got %v", want, gap, got)
				}
			}
		}
		if n == 1 && got[0] != want[0] {
			t.Fatalf("a place alone moved from %v to %v", want[0], got[0])
		}
	}
}

// TestSpreadLeast compares with a search over a grid: no placement of three
// labels moves them less.
func TestSpreadLeast(t *testing.T) {
	want, gap := []float64{10, 11, 13}, 4.0
	cost := func(p ...float64) (c float64) {
		for i := range p {
			c += (p[i] - want[i]) * (p[i] - want[i])
		}
		return c
	}
	best := math.Inf(1)
	for a := 0.0; a < 30; a += 0.25 {
		for b := a + gap; b < 30; b += 0.25 {
			for c := b + gap; c < 30; c += 0.25 {
				best = math.Min(best, cost(a, b, c))
			}
		}
	}
	if got := cost(Spread(want, gap, 0, 30)...); got > best+1e-9 {
		t.Fatalf("moves cost %v, the grid finds %v", got, best)
	}
}

func TestScales(t *testing.T) {
	scales := map[string]Scale{
		"linear":    Linear{-3, 7, 10, 200},
		"falling":   Linear{-3, 7, 200, 10},
		"log":       Log{0.02, 30, 10, 200},
		"narrow":    Log{0.93, 1.04, 10, 200},
		"symlog":    SymLog{-70, 2, 1, 0.5, 10, 200},
		"tiny":      Linear{1e-7, 3e-7, 0, 100},
		"huge log":  Log{1e-9, 1e12, 0, 300},
		"one-sided": SymLog{0, 500, 1, 0.5, 0, 100},
	}
	for name, s := range scales {
		ticks := s.Ticks(6)
		if len(ticks) < 2 || len(ticks) > 14 {
			t.Errorf("%s: %d ticks %v", name, len(ticks), ticks)
		}
		for i := 1; i < len(ticks); i++ {
			a, b := s.At(ticks[i-1]), s.At(ticks[i])
			if ticks[i] <= ticks[i-1] || (a < b) != (s.At(ticks[0]) < s.At(ticks[len(ticks)-1])) {
				t.Errorf("%s: ticks %v at %v, %v", name, ticks, a, b)
			}
		}
		labels := TickLabels(ticks)
		for i := 1; i < len(labels); i++ {
			if labels[i] == labels[i-1] {
				t.Errorf("%s: two ticks are called %s", name, labels[i])
			}
		}
	}
	s := SymLog{-70, 2, 1, 0.5, 0, 100}
	if d := s.At(1+1e-9) - s.At(1-1e-9); math.Abs(d) > 1e-6 {
		t.Errorf("symlog jumps by %v where it turns logarithmic", d)
	}
	if !math.IsNaN((Log{1, 10, 0, 1}).At(0)) {
		t.Error("zero has a place on a logarithmic axis")
	}
	if got := TickLabel(-0.5); got != "−0.5" {
		t.Errorf("tick %q", got)
	}
}

func TestMissingPoints(t *testing.T) {
	f := &Figure{W: 100, H: 100, Title: "t", Desc: "d"}
	nan := math.NaN()
	f.Polyline([]Point{{1, 1}, {2, 2}, {3, nan}, {4, 4}, {math.Inf(1), 5}, {6, 6}, {7, 7}}, Line(Ink, 1))
	f.Line(0, nan, 1, 1, Line(Ink, 1))
	f.Rect(0, 0, nan, 3, Fill(Ink))
	f.Rect(0, 0, 0, 3, Fill(Ink))
	f.Circle(nan, 0, 3, Fill(Ink))
	f.Text(nan, 0, "gone", Type{})
	f.Text(1, 1, "  ", Type{})
	f.Hatch(0, 0, nan, 5, 3, Line(Ink, 1))
	f.Band([]float64{1, 2, 3}, []float64{1, nan, 3}, []float64{1, 2, 3}, Fill(Ink))
	svg := svgOf(t, f)
	if strings.Contains(svg, "NaN") || strings.Contains(svg, "Inf") || strings.Contains(svg, "gone") {
		t.Error(svg)
	}
	// Two stretches and, between two gaps, one point as a dot.
	if n := len(f.Marks); n != 2 {
		t.Errorf("%d marks, want the broken line and a dot", n)
	}
	if n := strings.Count(svg, "M"); n != 3 {
		t.Errorf("%d beginnings of lines", n)
	}
}

func TestEscapes(t *testing.T) {
	nasty := "<b a='1'>&\"\x00\x1b[31m\xff\u202e]]></b>"
	f := &Figure{ID: "i", W: 100, H: 50, Title: nasty, Desc: nasty, Data: []Attr{{"arm", nasty}}}
	f.Text(5, 20, nasty, Type{Max: 20})
	f.Sub(nasty, Attr{"arm", nasty}).Titled(nasty).Circle(5, 5, 2, Fill(Ink))
	svg := svgOf(t, f)
	for _, bad := range []string{"<b", "\x1b", "\x00", "\u202e"} {
		if strings.Contains(svg, bad) {
			t.Errorf("%q is in %s", bad, svg)
		}
	}
}

func TestHatchStaysInside(t *testing.T) {
	f := &Figure{}
	f.Hatch(10, 20, 33, 17, 4, Line(Ink, 1))
	ops := f.Marks[0].(*Path).Ops
	if len(ops) < 10 {
		t.Fatalf("%d steps", len(ops))
	}
	for _, o := range ops {
		if o.X < 10-1e-9 || o.X > 43+1e-9 || o.Y < 20-1e-9 || o.Y > 37+1e-9 {
			t.Errorf("%+v outside", o)
		}
	}
}

// TestArcs follows the drawn arcs of a circle: every end lies on it.
func TestArcs(t *testing.T) {
	f := &Figure{W: 50, H: 50}
	f.Circle(20, 25, 10, Fill(Ink))
	d := regexp.MustCompile(`A10 10 0 0 1 ([\d.]+) ([\d.]+)`).FindAllStringSubmatch(svgOf(t, f), -1)
	if len(d) != 2 {
		t.Fatalf("a circle in %d arcs", len(d))
	}
	if d[0][1] != "10" || d[0][2] != "25" || d[1][1] != "30" {
		t.Errorf("arcs end at %v", d)
	}
}

func pixels(t *testing.T, f *Figure, scale float64) func(x, y float64) [3]int {
	t.Helper()
	var b bytes.Buffer
	if err := f.WritePNG(&b, scale); err != nil {
		t.Fatal(err)
	}
	im, err := png.Decode(&b)
	if err != nil {
		t.Fatal(err)
	}
	if w := im.Bounds().Dx(); math.Abs(float64(w)-(f.W+2*FilePad)*scale) > 1 {
		t.Fatalf("%d dots wide, want %v", w, f.W*scale)
	}
	return func(x, y float64) [3]int {
		r, g, b, _ := im.At(int((x+FilePad)*scale), int((y+FilePad)*scale)).RGBA()
		return [3]int{int(r >> 8), int(g >> 8), int(b >> 8)}
	}
}

func light(r Role) [3]int {
	c, _ := Light.Colour(r)
	return [3]int{int(c.R), int(c.G), int(c.B)}
}

func TestPNG(t *testing.T) {
	f := &Figure{W: 100, H: 60}
	f.Rect(10, 10, 20, 15, Fill(Post))
	f.Sector(60, 30, 10, math.Pi/2, math.Pi, Fill(Arm)) // the left half
	f.Rect(10, 40, 20, 15, Fill(Ink).With(0.5))
	at := pixels(t, f, 2)
	for _, c := range []struct {
		x, y float64
		want [3]int
	}{
		{20, 17, light(Post)},
		{20, 30, light(Paper)},
		{55, 30, light(Arm)},
		{65, 30, light(Paper)},
		{90, 55, light(Paper)},
	} {
		if got := at(c.x, c.y); got != c.want {
			t.Errorf("at %v, %v: %v, want %v", c.x, c.y, got, c.want)
		}
	}
	half, ink, paper := at(20, 47), light(Ink), light(Paper)
	for i := range half {
		if d := math.Abs(float64(half[i]) - float64(ink[i]+paper[i])/2); d > 2 {
			t.Errorf("half opaque ink is %v", half)
		}
	}
}

// TestPNGWords looks where the ink of words falls: in their box and nowhere else.
func TestPNGWords(t *testing.T) {
	for _, anchor := range []Anchor{Start, Middle, End} {
		for _, turn := range []float64{0, 90} {
			f := &Figure{W: 160, H: 160}
			f.Text(80, 80, "Hxgj|", Type{Size: 16, Anchor: anchor, Turn: turn})
			b := f.Words()[0].Box()
			at := pixels(t, f, 1)
			in, out := 0, 0
			for x := range 160 {
				for y := range 160 {
					if at(float64(x), float64(y)) == light(Paper) {
						continue
					}
					fx, fy := float64(x)+0.5, float64(y)+0.5
					if fx > b.X0-1.5 && fx < b.X1+1.5 && fy > b.Y0-1.5 && fy < b.Y1+1.5 {
						in++
					} else {
						out++
					}
				}
			}
			if in < 60 || out > 0 {
				t.Errorf("anchor %v turn %v: %d dots of ink in the box, %d outside", anchor, turn, in, out)
			}
		}
	}
}

func TestWidth(t *testing.T) {
	for _, s := range []string{"", "n = 10", "bf16 stochastic update", "−0.42 [−1.10, +0.26]"} {
		for _, bold := range []bool{false, true} {
			// The face measures the same string with kerning; that is a small part.
			f := face(11, bold)
			want := float64(f.Width(s))
			if got := Width(s, 11, bold); math.Abs(got-want) > 0.03*want+0.5 {
				t.Errorf("%q: %v, the font says %v", s, got, want)
			}
		}
	}
}

func TestFitAndWrap(t *testing.T) {
	long := "fp16 nearest with sequential fp16 sums and averyveryverylongwordthatfitsnowhere at all"
	for _, limit := range []float64{5, 20, 61, 120, 1000} {
		if s := Fit(long, 11, true, limit); Width(s, 11, true) > limit && s != "…" {
			t.Errorf("%q is wider than %v", s, limit)
		}
		for lines := 1; lines < 5; lines++ {
			got := Wrap(long, 11, true, limit, lines)
			if len(got) > lines {
				t.Errorf("%d lines, want at most %d", len(got), lines)
			}
			for _, l := range got {
				if Width(l, 11, true) > limit && len([]rune(l)) > 1 {
					t.Errorf("%q is wider than %v", l, limit)
				}
			}
		}
	}
	if got := Wrap("one two three", 11, false, 1000, 3); len(got) != 1 || got[0] != "one two three" {
		t.Errorf("%q", got)
	}
	if got := strings.Join(Wrap(long, 11, false, 90, 99), " "); strings.ReplaceAll(got, " ", "") != strings.ReplaceAll(long, " ", "") {
		t.Errorf("words were lost: %q", got)
	}
}
