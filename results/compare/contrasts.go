package compare

import (
	"fmt"
	"strings"

	"ulpine/results"
)

// series are contrasts of one grid that differ along the same axis by the same two
// values: what can be said in one sentence.
type series struct {
	axis, value, against string
	of                   []*results.Comparison
	places               []string // on the grid's other axes, one a contrast
}

// contrasts are the sentences about all contrasts: those of a series of a grid in
// one, every other in one of its own.
func contrasts(s *results.Study) (said []string) {
	var all []*series
	for i := range s.Contrasts {
		c := &s.Contrasts[i]
		next := seriesOf(s, c)
		known := false
		for _, one := range all {
			if next.axis != "" && one.axis == next.axis && one.value == next.value && one.against == next.against {
				one.of, one.places = append(one.of, c), append(one.places, next.places[0])
				known = true
			}
		}
		if !known {
			all = append(all, next)
		}
	}
	for _, one := range all {
		if len(one.of) == 1 {
			said = append(said, contrast(s, one.of[0]))
		} else {
			said = append(said, one.sentence())
		}
	}
	return said
}

// seriesOf is a series of one contrast; without an axis where its arms do not differ
// along exactly one axis of one grid, or are all that the grid has.
func seriesOf(s *results.Study, c *results.Comparison) *series {
	lone := &series{of: []*results.Comparison{c}, places: []string{""}}
	a, b := arm(s, c.Arm), arm(s, c.Against)
	if a == nil || b == nil || a.Grid == "" || a.Grid != b.Grid || len(a.Axes) != len(b.Axes) {
		return lone
	}
	one := &series{of: lone.of}
	var place []string
	for i, at := range a.Axes {
		switch {
		case at == b.Axes[i]:
			place = append(place, at.Value)
		case one.axis != "":
			return lone
		default:
			one.axis, one.value, one.against = at.Axis, at.Value, b.Axes[i].Value
		}
	}
	if one.axis == "" || len(place) == 0 {
		return lone
	}
	one.places = []string{strings.Join(place, " ")}
	return one
}

// sentence says at which places of the grid a series has which verdict, and by how
// much the arms differ there.
func (one *series) sentence() string {
	groups := map[string][]string{}
	var order []string
	add := func(what, place string) {
		if groups[what] == nil {
			order = append(order, what)
		}
		groups[what] = append(groups[what], place)
	}
	paired := pairs(one.of)
	for i, c := range one.of {
		w := newMeasure(c)
		size := w.figure(c.Mean)
		if c.Mean > 0 {
			size = "+" + size
		}
		place := fmt.Sprintf("%s (%s)", one.places[i], size)
		switch margin := w.margin(c.Margin); {
		case c.N == 0:
			add("not run yet", one.places[i])
		case c.Verdict.Kind == results.Diverged:
			add("diverged", one.places[i])
		case c.Verdict.Kind == results.Within:
			add("within the margin of "+margin, place)
		case c.Verdict.Kind == results.Worse:
			add("worse than the margin of "+margin, place)
		case c.AgainstDiverged > 0:
			add("undecided for the other arm's divergence", one.places[i])
		default:
			add("undecided", place)
		}
		if c.N != one.of[0].N {
			paired = "pairs as in the table"
		}
	}
	parts := make([]string, len(order))
	for i, what := range order {
		parts[i] = what + " at " + list(groups[what])
	}
	return fmt.Sprintf("Along %s, %s against %s: %s (%s).", one.axis, one.value, one.against, strings.Join(parts, "; "), paired)
}
