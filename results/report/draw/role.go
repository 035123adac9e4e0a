package draw

import (
	"fmt"
	"image/color"
	"strings"
)

// Role is what a paint stands for. A theme turns it into a colour.
type Role uint8

// The roles. Series1.. are the paints of lines that share one plot; they differ
// in lightness as well as in hue, and are always used with dashes and names.
const (
	None     Role = iota
	Paper         // the ground
	Ink           // words and axes
	Soft          // words of second rank
	Faint         // grid lines, leaders, empty cells
	Base          // the baseline
	Arm           // the arm a figure speaks about
	Post          // the margin
	Floor         // the noise floor
	Sign          // bit strip: the sign
	Exponent      // bit strip: the exponent
	Fraction      // bit strip: the fraction
	Series1
	Series2
	Series3
	Series4
	Series5
	Series6
	roles
)

// SeriesCount is the number of Series roles.
const SeriesCount = int(Series6-Series1) + 1

// SeriesRole is the paint of line i among lines that share a plot; it repeats
// after SeriesCount.
func SeriesRole(i int) Role { return Series1 + Role(i%SeriesCount) }

// names are the roles as CSS spells them.
var names = [roles]string{
	"none", "paper", "ink", "soft", "faint", "base", "arm", "post", "floor",
	"sign", "exponent", "fraction", "s1", "s2", "s3", "s4", "s5", "s6",
}

// String is the role's name in style sheets.
func (r Role) String() string { return names[r] }

// Theme gives every role a colour, #rrggbb.
type Theme [roles]string

// Light is the theme of paper, of figure files and of the page by default.
var Light = Theme{
	None: "none", Paper: "#fcfdfc", Ink: "#16232c", Soft: "#55636c", Faint: "#d3dade",
	Base: "#87929a", Arm: "#0a5f78", Post: "#a35b00", Floor: "#6d7f52",
	Sign: "#16232c", Exponent: "#d19a3a", Fraction: "#79b4c3",
	Series1: "#0a5f78", Series2: "#c07a12", Series3: "#541f52", Series4: "#5d8f96",
	Series5: "#8c3a1c", Series6: "#3b4a9c",
}

// White is Light on a white ground, for papers.
var White = func() Theme {
	t := Light
	t[Paper] = "#ffffff"
	return t
}()

// Dark is the theme of the page on dark screens.
var Dark = Theme{
	None: "none", Paper: "#11191f", Ink: "#e4ebee", Soft: "#9fb0b9", Faint: "#33424b",
	Base: "#7c8b94", Arm: "#6cc3d6", Post: "#e5a44c", Floor: "#a5b884",
	Sign: "#e4ebee", Exponent: "#b98535", Fraction: "#3f7f92",
	Series1: "#6cc3d6", Series2: "#e5a44c", Series3: "#fbdcf2", Series4: "#8fb3a8",
	Series5: "#e08a68", Series6: "#97a4f0",
}

// Colour is the role's colour; ok is false for None.
func (t *Theme) Colour(r Role) (c color.NRGBA, ok bool) {
	if r == None {
		return c, false
	}
	c.A = 0xff
	if _, err := fmt.Sscanf(t[r], "#%02x%02x%02x", &c.R, &c.G, &c.B); err != nil {
		panic("draw: theme colour " + t[r] + ": " + err.Error())
	}
	return c, true
}

// Variables are the theme as CSS custom properties, one a role.
func (t *Theme) Variables() string {
	var b strings.Builder
	for r := Paper; r < roles; r++ {
		fmt.Fprintf(&b, "--%s:%s;", r, t[r])
	}
	return b.String()
}

// Classes are the style rules that the SVG of a page refers to.
func Classes() string {
	var b strings.Builder
	b.WriteString(".f-none{fill:none}")
	for r := Paper; r < roles; r++ {
		fmt.Fprintf(&b, ".f-%[1]s{fill:var(--%[1]s)}.l-%[1]s{stroke:var(--%[1]s)}", r)
	}
	return b.String()
}
