package draw

import (
	"slices"
	"unicode"
)

// box stands in a PNG for a character that Liberation Sans lacks.
const box = '□'

// raised are words as the PNG back end can draw them, from left to right: SVG leaves
// scripts and directions to the viewer, which has fonts for them, a picture cannot.
// A character that the font lacks becomes a box, marks that combine with the letter
// before them are left out, and letters of a script written from right to left stand
// in the order in which they are seen. Arabic letters are not joined.
func raised(s string, bold bool) string {
	var out []rune
	for _, r := range s {
		switch {
		case unicode.Is(unicode.Mn, r) && !has(r, bold):
		case !has(r, bold):
			out = append(out, box)
		default:
			out = append(out, r)
		}
	}
	// Runs of letters written from right to left, with what stands between two of
	// them, are turned around.
	for i := 0; i < len(out); i++ {
		if !leftward(out[i]) {
			continue
		}
		last := i
		for j := i + 1; j < len(out); j++ {
			switch {
			case leftward(out[j]):
				last = j
			case !unicode.IsSpace(out[j]) && !unicode.IsPunct(out[j]):
				j = len(out)
			}
		}
		slices.Reverse(out[i : last+1])
		i = last
	}
	return string(out)
}

// leftward reports whether a letter is written from right to left.
func leftward(r rune) bool {
	return unicode.In(r, unicode.Hebrew, unicode.Arabic, unicode.Syriac, unicode.Thaana, unicode.Nko)
}

// has reports whether the font has a glyph for a character.
func has(r rune, bold bool) bool {
	_ = Width("", 1, bold) // loads the face
	faces.Lock()
	defer faces.Unlock()
	i := 0
	if bold {
		i = 1
	}
	_, ok := faces.face[i].GlyphAdvance(r)
	return ok
}
