package draw

import (
	"image/color"
	"math"
	"strings"
	"testing"
)

// linear is a colour in linear sRGB, 0..1 (IEC 61966-2-1).
func linear(c color.NRGBA) [3]float64 {
	f := func(v uint8) float64 {
		x := float64(v) / 255
		if x <= 0.04045 {
			return x / 12.92
		}
		return math.Pow((x+0.055)/1.055, 2.4)
	}
	return [3]float64{f(c.R), f(c.G), f(c.B)}
}

// luminance is the relative luminance of WCAG 2.
func luminance(c color.NRGBA) float64 {
	l := linear(c)
	return 0.2126*l[0] + 0.7152*l[1] + 0.0722*l[2]
}

// contrast is the contrast ratio of WCAG 2.
func contrast(a, b color.NRGBA) float64 {
	x, y := luminance(a), luminance(b)
	return (math.Max(x, y) + 0.05) / (math.Min(x, y) + 0.05)
}

// dichromat are simulations in linear sRGB after Viénot, Brettel and Mollon
// (Color Res. Appl. 24, 1999); the matrices are from memory.
var dichromat = map[string][3][3]float64{
	"trichromat":  {{1, 0, 0}, {0, 1, 0}, {0, 0, 1}},
	"protanope":   {{0.11238, 0.88762, 0}, {0.11238, 0.88762, 0}, {0.00401, -0.00401, 1}},
	"deuteranope": {{0.29275, 0.70725, 0}, {0.29275, 0.70725, 0}, {-0.02234, 0.02234, 1}},
}

// lab is CIE L*a*b* (D65) of a linear sRGB colour.
func lab(l [3]float64) [3]float64 {
	x := (0.4124*l[0] + 0.3576*l[1] + 0.1805*l[2]) / 0.9505
	y := 0.2126*l[0] + 0.7152*l[1] + 0.0722*l[2]
	z := (0.0193*l[0] + 0.1192*l[1] + 0.9505*l[2]) / 1.089
	f := func(t float64) float64 {
		if t > 0.008856 {
			return math.Cbrt(t)
		}
		return 7.787*t + 16.0/116
	}
	return [3]float64{116*f(y) - 16, 500 * (f(x) - f(y)), 200 * (f(y) - f(z))}
}

func distance(a, b color.NRGBA, m [3][3]float64) float64 {
	see := func(c color.NRGBA) [3]float64 {
		l := linear(c)
		var out [3]float64
		for i := range out {
			for k := range l {
				out[i] += m[i][k] * l[k]
			}
			out[i] = math.Max(0, out[i])
		}
		return lab(out)
	}
	p, q := see(a), see(b)
	return math.Sqrt((p[0]-q[0])*(p[0]-q[0]) + (p[1]-q[1])*(p[1]-q[1]) + (p[2]-q[2])*(p[2]-q[2]))
}

// TestThemes holds both themes to a contrast that words and lines need: WCAG 2
// asks 4.5 of words and 3 of drawings.
func TestThemes(t *testing.T) {
	for name, th := range map[string]*Theme{"light": &Light, "dark": &Dark} {
		paper, _ := th.Colour(Paper)
		for r := Ink; r < roles; r++ {
			c, ok := th.Colour(r)
			if !ok {
				t.Fatalf("%s: no colour for %s", name, r)
			}
			least := 3.0
			switch {
			case r == Ink || r == Soft || r == Arm || r == Post:
				least = 4.5
			case r == Faint || r == Exponent || r == Fraction:
				least = 1.2 // grid lines; cells, which differ in height as well
			}
			if got := contrast(c, paper); got < least {
				t.Errorf("%s: %s on paper has a contrast of %.2f, want %v", name, r, got, least)
			}
		}
	}
}

// TestColourBlind holds the lines of one plot, and the cells of a bit strip,
// apart for eyes without red or green cones.
func TestColourBlind(t *testing.T) {
	apart := func(name string, th *Theme, rs []Role, least float64) {
		for who, m := range dichromat {
			for i, a := range rs {
				for _, b := range rs[:i] {
					ca, _ := th.Colour(a)
					cb, _ := th.Colour(b)
					if d := distance(ca, cb, m); d < least {
						t.Errorf("%s, %s: %s and %s are %.1f apart, want %v", name, who, a, b, d, least)
					}
				}
			}
		}
	}
	for name, th := range map[string]*Theme{"light": &Light, "dark": &Dark} {
		apart(name, th, []Role{Series1, Series2, Series3, Series4, Series5, Series6}, 12)
		apart(name, th, []Role{Sign, Exponent, Fraction}, 25)
		apart(name, th, []Role{Arm, Base, Post, Ink}, 14)
	}
}

func TestStyleWords(t *testing.T) {
	for _, r := range []Role{Paper, Ink, Series6} {
		if !strings.Contains(Light.Variables(), "--"+r.String()+":#") || !strings.Contains(Classes(), ".l-"+r.String()+"{") {
			t.Errorf("the style sheet lacks %s", r)
		}
	}
	if SeriesRole(SeriesCount) != Series1 || SeriesRole(SeriesCount-1) != Series6 {
		t.Error("series paints do not repeat as they should")
	}
}
