package compare

import (
	"fmt"
	"slices"
	"strings"

	"ulpine/results"
)

// usual is the rounding that stands for "elsewhere" where an arm mixes several.
const usual = "nearest-even"

// namedPoints is how many points are listed by name before they are counted.
const namedPoints = 3

// Rounding says in words how an arm rounds: "nearest-even rounding", or
// "stochastic rounding at update.master, nearest-even elsewhere". Points that do
// not round (exact products) or reuse what is there do not count.
func Rounding(a *results.Arm) string {
	if a == nil || len(a.Settings) == 0 {
		return "rounding as planned"
	}
	points := map[string][]string{} // by mode, in the order of the settings
	var modes []string
	for _, s := range a.Settings {
		mode, _, _ := strings.Cut(s.Rounding, " ")
		if mode == "" || mode == "exact" || mode == "reused" {
			continue
		}
		if points[mode] == nil {
			modes = append(modes, mode)
		}
		if !slices.Contains(points[mode], s.Point) {
			points[mode] = append(points[mode], s.Point)
		}
	}
	switch len(modes) {
	case 0:
		return "no rounding"
	case 1:
		return modes[0] + " rounding"
	}
	return mixed(modes, points)
}

// mixed names every mode with its points, and the usual one, or the most common,
// last as what holds elsewhere.
func mixed(modes []string, points map[string][]string) string {
	rest := slices.MaxFunc(modes, func(a, b string) int { return len(points[a]) - len(points[b]) })
	if points[usual] != nil {
		rest = usual
	}
	var words []string
	for _, mode := range modes {
		if mode == rest {
			continue
		}
		where := list(points[mode])
		if n := len(points[mode]); n > namedPoints {
			where = fmt.Sprintf("%d points", n)
		}
		word := mode + " at " + where
		if len(words) == 0 {
			word = mode + " rounding at " + where
		}
		words = append(words, word)
	}
	return strings.Join(append(words, rest+" elsewhere"), ", ")
}
