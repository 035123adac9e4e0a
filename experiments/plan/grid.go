package plan

import (
	"fmt"
	"slices"
	"strings"

	"ulpine/trainer"
)

// Grid is a sweep: arms that differ along axes.
type Grid struct {
	Title string
	Axes  []Axis
	Arms  []string // slugs, the last axis varying fastest
}

// Axis is what varies along one side of a grid.
type Axis struct {
	Name   string
	Values []string // as names and reports spell them
}

// Coordinate is an arm's place on one axis of its grid.
type Coordinate struct{ Axis, Value string }

// maxArms bounds the arms of a plan, those of its grids included. A sweep beyond
// it is a slip of the pen, or should be several plans: Holm's correction across
// so many arms leaves little power to any of them.
const maxArms = 1000

// gridKeys are the keys of a grid besides those of an arm.
var gridKeys = []string{"title", "axis", "contrast"}

// grid is a [[grid]] table being read.
type grid struct {
	Grid
	at       *node // the table
	template *node // the arm it stamps out
	axes     []axis
	arms     []armPlace
}

// armPlace is an arm that a grid stamped out, with its place.
type armPlace struct {
	node   *node
	choice []int // index of a value on each axis
}

// coordinates are the place of an arm in words.
func (g *grid) coordinates(choice []int) []Coordinate {
	all := make([]Coordinate, len(choice))
	for i, at := range choice {
		all[i] = Coordinate{g.axes[i].name, g.axes[i].values[at].label}
	}
	return all
}

// readGrids reads the [[grid]] tables and stamps out their arms; have counts the
// arms that the plan has besides.
func (r *armReader) readGrids(root *node, have int) []*grid {
	var all []*grid
	titles := map[string]*node{}
	for i, n := range r.tables(root, "grid") {
		g := &grid{at: n}
		g.Title = r.text(n, "title", fmt.Sprintf("grid %d", i+1))
		if twin := titles[g.Title]; twin != nil {
			r.fail(n.errorf("write a title of its own", "the title %q is taken by the grid in %s line %d", g.Title, twin.file, twin.line))
		}
		titles[g.Title] = n
		if g.axes = r.readAxes(n); g.axes == nil {
			continue
		}
		count := 1
		for _, a := range g.axes {
			count = min(count*len(a.values), maxArms+1) // no overflow: an axis has at most maxArms values
			g.Axes = append(g.Axes, Axis{a.name, a.labels()})
		}
		if have += count; have > maxArms {
			r.fail(n.errorf("shorten the axes or make several plans of it", "with this grid of %s the plan has more than %d arms", g.sides(), maxArms))
			return all
		}
		if r.checkTemplate(g) {
			before := len(r.errs)
			g.stamp(r.fail)
			r.errs = r.errs.oneAPlace(before)
			all = append(all, g)
		}
	}
	return all
}

// sides is the size of a grid: "7 x 2 arms".
func (g *grid) sides() string {
	words := make([]string, len(g.axes))
	for i, a := range g.axes {
		words[i] = fmt.Sprint(len(a.values))
	}
	return strings.Join(words, " x ") + " arms"
}

// checkTemplate holds the placeholders of a grid's arm to its axes: each known,
// each axis used in a setting and told by the name.
func (r *armReader) checkTemplate(g *grid) bool {
	before := len(r.errs)
	template := *g.at
	template.table = map[string]*node{}
	used := map[string]bool{}
	for _, k := range g.at.names() {
		if slices.Contains(gridKeys, k) {
			continue
		}
		sub := g.at.table[k]
		template.table[k] = sub
		found := map[string]bool{}
		r.placeholders(sub, g.axes, found)
		r.checkHolders(sub, k, g.axes, found)
		for name := range found {
			used[name] = used[name] || k != "name"
		}
	}
	name, named := g.at.table["name"].textValue()
	if !named {
		r.fail(g.at.errorf(fmt.Sprintf("write name = \"{%s}\"", g.axes[0].name), "a text for name is missing"))
	}
	if len(r.errs) > before {
		return false // what follows would be guesswork
	}
	for _, a := range g.axes {
		holder := "{" + a.name + "}"
		if len(a.values) > 1 && !strings.Contains(name, holder) {
			r.fail(g.at.table["name"].errorf("write "+holder+" into the name", "the name does not tell the arms of axis %s apart", a.name))
		}
		if !used[a.name] {
			r.fail(a.at.errorf("write "+holder+" where the value belongs, as in storage = \""+holder+"\"", "no setting uses the axis"))
		}
	}
	g.template = &template
	return len(r.errs) == before
}

// textValue is a node's text, if it is there and is one.
func (n *node) textValue() (string, bool) {
	if n == nil {
		return "", false
	}
	s, ok := n.value.(string)
	return s, ok
}

// stamp makes the arms, the last axis varying fastest.
func (g *grid) stamp(fail func(*PlanError)) {
	choice := make([]int, len(g.axes))
	for {
		g.arms = append(g.arms, armPlace{filler{g.axes, choice, fail}.fill(g.template), slices.Clone(choice)})
		i := len(choice) - 1
		for ; i >= 0; i-- {
			if choice[i]++; choice[i] < len(g.axes[i].values) {
				break
			}
			choice[i] = 0
		}
		if i < 0 {
			return
		}
	}
}

// readGridArms reads the arms of a grid. A mistake in the template is one in many
// of its arms: it is told once, for the first.
func (r *armReader) readGridArms(g *grid, base *assignment, scale trainer.LossScale, seen map[string]*node) []Arm {
	arms := make([]Arm, len(g.arms))
	before := len(r.errs)
	for i, place := range g.arms {
		arm := &arms[i]
		first := len(r.errs)
		*arm = r.readArm(place.node, base, scale, seen)
		arm.Grid, arm.Axes = g.Title, g.coordinates(place.choice)
		g.Arms = append(g.Arms, arm.Slug)
		for _, e := range r.errs[first:] {
			e.Reason += fmt.Sprintf(" (in the grid's arm %q)", arm.Name)
		}
	}
	r.errs = r.errs.oneAPlace(before)
	return arms
}

// oneAPlace keeps the first error of each place, of those from index first on.
func (e Errors) oneAPlace(first int) Errors {
	kept, told := e[:first:first], map[string]bool{}
	for _, one := range e[first:] {
		if place := fmt.Sprint(one.File, one.Line, one.Key); !told[place] {
			told[place] = true
			kept = append(kept, one)
		}
	}
	return kept
}

// contrastKeys are the keys of a grid's contrast.
var contrastKeys = []string{"axis", "against", "margin"}

// contrasts reads a grid's contrast: along one axis every value against one of
// them, at each place on the other axes.
func (r *reader) contrasts(g *grid, margin float64) []Contrast {
	n := r.table(g.at, "contrast", `contrast = { axis = "rounding", against = "nearest-even" }`)
	if n == nil {
		return nil
	}
	r.known(n, contrastKeys...)
	margin = r.margin(n, margin)
	names := make([]string, len(g.axes))
	for i, a := range g.axes {
		names[i] = a.name
	}
	for _, k := range contrastKeys[:2] {
		if n.table[k] == nil {
			r.fail(n.errorf(`write contrast = { axis = "rounding", against = "nearest-even" }`, "%s is missing", k))
			return nil
		}
	}
	along := slices.Index(names, r.word(n, "axis", "", names...))
	if along < 0 {
		return nil
	}
	at := n.table["against"]
	label, ok := labelOf(at)
	against := slices.Index(g.axes[along].labels(), label)
	if !ok || against < 0 {
		r.fail(at.errorf("write one of "+strings.Join(g.axes[along].labels(), ", "), "the axis %s has no such value", g.axes[along].name))
		return nil
	}
	return g.pairs(along, against, margin)
}

// pairs are the contrasts along an axis.
func (g *grid) pairs(along, against int, margin float64) []Contrast {
	if len(g.Arms) != len(g.arms) {
		return nil // the plan has other faults
	}
	places := map[string]string{} // choice -> slug
	for i, p := range g.arms {
		places[fmt.Sprint(p.choice)] = g.Arms[i]
	}
	var all []Contrast
	for i, p := range g.arms {
		if p.choice[along] == against {
			continue
		}
		other := slices.Clone(p.choice)
		other[along] = against
		all = append(all, Contrast{g.Arms[i], places[fmt.Sprint(other)], margin})
	}
	return all
}
