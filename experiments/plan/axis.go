package plan

import (
	"fmt"
	"maps"
	"math"
	"slices"
	"strconv"
	"strings"

	"ulpine/quant"
)

// axis is one axis of a grid as read.
type axis struct {
	name   string
	at     *node
	values []axisValue
}

// axisValue is a value with the text that stands for it in names.
type axisValue struct {
	label string
	value *node
}

func (a *axis) labels() []string {
	all := make([]string, len(a.values))
	for i, v := range a.values {
		all[i] = v.label
	}
	return all
}

// readAxes reads the axes of a grid in the order of the file; nil where one of
// them could not be read.
func (r *reader) readAxes(g *node) []axis {
	const example = `axis.split = ["E4M4", "E5M3"]`
	n := g.table["axis"]
	if n == nil {
		r.fail(g.errorf("write "+example, "the grid has no axis"))
		return nil
	}
	if n = r.table(g, "axis", example); n == nil {
		return nil
	}
	before := len(r.errs)
	var all []axis
	for _, name := range n.names() {
		at := n.table[name]
		if strings.ContainsAny(name, "{}") {
			r.fail(at.errorf("write a name without braces", "%q cannot name an axis", name))
			continue
		}
		all = append(all, axis{name, at, r.axisValues(at)})
	}
	if len(all) == 0 && len(r.errs) == before {
		r.fail(n.errorf("write "+example, "the grid has no axis"))
	}
	for _, a := range all {
		r.checkTwins(a)
	}
	if len(r.errs) > before {
		return nil
	}
	return all
}

// checkTwins refuses two values of one axis that are spelt alike.
func (r *reader) checkTwins(a axis) {
	seen := map[string]bool{}
	for _, v := range a.values {
		if seen[v.label] {
			r.fail(v.value.errorf("keep one of them", "the axis has %q twice", v.label))
		}
		seen[v.label] = true
	}
}

// axisValues reads the values of an axis: an array, or a table that yields them.
func (r *reader) axisValues(n *node) []axisValue {
	switch {
	case n.list != nil:
		return r.valuesOf(n)
	case n.table["splits"] != nil:
		r.known(n, "splits")
		return r.splits(n.table["splits"])
	case n.table != nil:
		return r.progression(n)
	}
	r.wrongType(n, "an array or a table", `["E4M4", "E5M3"], { from = 1, to = 16 } or { splits = 9 }`)
	return nil
}

// valuesOf are the values of an array. A table has a name for its label, which is
// no part of the value.
func (r *reader) valuesOf(n *node) []axisValue {
	if len(n.list) == 0 || len(n.list) > maxArms {
		r.fail(n.errorf(fmt.Sprintf("write 1 to %d values", maxArms), "an axis of %d values", len(n.list)))
		return nil
	}
	var all []axisValue
	for _, e := range n.list {
		label, ok := labelOf(e)
		if !ok {
			r.fail(e.errorf(`write texts, numbers, or tables with a name: { name = "r=8", format = "bf16", ... }`, "%s without a name has no place in the name of an arm", e.kind()))
			continue
		}
		value := e
		if e.table != nil {
			bare := *e
			bare.table = maps.Clone(e.table)
			delete(bare.table, "name")
			value = &bare
		}
		all = append(all, axisValue{label, value})
	}
	return all
}

// labelOf is the text that stands for a value in names.
func labelOf(n *node) (string, bool) {
	switch v := n.value.(type) {
	case string:
		return v, v != ""
	case int64:
		return strconv.FormatInt(v, 10), true
	case float64:
		return strconv.FormatFloat(v, 'g', -1, 64), true
	case bool:
		return strconv.FormatBool(v), true
	}
	if n.table == nil {
		return "", false
	}
	name, ok := n.table["name"].textValue()
	return name, ok && name != ""
}

// splits are all splits of some totals of bits into exponent and fraction, few
// exponent bits first.
func (r *reader) splits(n *node) []axisValue {
	totals := []*node{n}
	if n.list != nil {
		totals = n.list
	}
	var all []axisValue
	for _, t := range totals {
		bits := r.wholeAt(t, "splits", 9, 3, 32)
		for e := int64(2); e <= 8 && e < bits; e++ {
			word := fmt.Sprintf("E%dM%d", e, bits-1-e)
			if f, err := quant.ParseFormat(word); err == nil && f.Limits().Bits == int(bits) {
				all = append(all, axisValue{word, n.text(word)})
			}
		}
	}
	return all
}

// text is a text that stands where n does.
func (n *node) text(s string) *node {
	return &node{file: n.file, line: n.line, key: n.key, value: s}
}

// progression are numbers from one to another: whole ones a step apart, or each
// the product of the one before and a factor.
func (r *reader) progression(n *node) []axisValue {
	before := len(r.errs)
	r.known(n, "from", "to", "step", "times")
	for _, k := range []string{"from", "to"} {
		if n.table[k] == nil {
			r.fail(n.errorf("write { from = 1, to = 16 }", "%s is missing", k))
			return nil
		}
	}
	if n.table["step"] != nil && n.table["times"] != nil {
		r.fail(n.table["times"].errorf("keep one of them", "step and times at once"))
	}
	from, to := r.number(n, "from", 1), r.number(n, "to", 16)
	step, times := r.number(n, "step", 1), r.number(n, "times", 1)
	if n.table["times"] != nil {
		step = 0
	}
	switch {
	case len(r.errs) > before:
	case to < from:
		r.fail(n.table["to"].errorf("write the smaller number first", "runs from %g down to %g", from, to))
	case n.table["times"] != nil && !(times > 1 && from > 0):
		r.fail(n.table["times"].errorf("write times = 2 and a positive start", "a factor of %g from %g on never arrives", times, from))
	case n.table["times"] == nil && !(step > 0):
		r.fail(n.table["step"].errorf("write step = 1", "a step of %g never arrives", step))
	}
	if len(r.errs) > before {
		return nil
	}
	var all []axisValue
	// Steps of 0.1 are no binary numbers: twelve digits are what is meant.
	for x := from; x <= to+math.Abs(to)*1e-12; x = digits(float64(x*times) + step) {
		if len(all) == maxArms {
			r.fail(n.errorf("widen the step", "an axis of more than %d values", maxArms))
			return nil
		}
		v := n.text("")
		v.value = x
		if x == math.Trunc(x) && math.Abs(x) < 1<<53 {
			v.value = int64(x)
		}
		label, _ := labelOf(v)
		all = append(all, axisValue{label, v})
	}
	return all
}

// digits is x rounded to twelve significant decimal digits.
func digits(x float64) float64 {
	y, _ := strconv.ParseFloat(strconv.FormatFloat(x, 'g', 12, 64), 64)
	return y
}

// holders finds the placeholders {name} in a text.
func holders(s string) []string {
	var all []string
	for {
		_, rest, ok := strings.Cut(s, "{")
		if !ok {
			return all
		}
		name, rest, ok := strings.Cut(rest, "}")
		if !ok {
			return all
		}
		all = append(all, name)
		s = rest
	}
}

// placeholders collects the placeholders at and below a node, each known.
func (r *reader) placeholders(n *node, axes []axis, found map[string]bool) {
	if s, ok := n.value.(string); ok {
		r.checkHolders(n, s, axes, found)
	}
	for _, e := range n.list {
		r.placeholders(e, axes, found)
	}
	for _, k := range n.names() {
		r.checkHolders(n.table[k], k, axes, found)
		r.placeholders(n.table[k], axes, found)
	}
}

// checkHolders collects the placeholders of a text or of the node's key.
func (r *reader) checkHolders(n *node, s string, axes []axis, found map[string]bool) {
	names := make([]string, len(axes))
	for i, a := range axes {
		names[i] = a.name
	}
	for _, name := range holders(s) {
		if !slices.Contains(names, name) {
			r.fail(n.errorf(suggest(name, names), "no axis of the grid is called %q", name))
			continue
		}
		found[name] = true
	}
}

// filler puts the values of one place of a grid for its placeholders.
type filler struct {
	axes   []axis
	choice []int
	fail   func(*PlanError)
}

// fill copies a node with its placeholders filled. A text that is nothing but a
// placeholder becomes the value, whatever its kind; within a text and in keys
// the value's label is put. The copy stands where the node does.
func (f filler) fill(n *node) *node {
	c := *n
	switch {
	case n.list != nil:
		c.list = make([]*node, len(n.list))
		for i, e := range n.list {
			c.list[i] = f.fill(e)
		}
	case n.table != nil:
		c.table = map[string]*node{}
		for _, k := range n.names() {
			path := []string{k}
			if holders(k) != nil {
				path = strings.Split(f.words(k), ".")
			}
			f.insert(&c, path, f.fill(n.table[k]))
		}
	default:
		s, ok := n.value.(string)
		if !ok {
			return &c
		}
		for i, a := range f.axes {
			if s == "{"+a.name+"}" {
				v := *a.values[f.choice[i]].value
				v.file, v.line, v.key = n.file, n.line, n.key
				return &v
			}
		}
		c.value = f.words(s)
	}
	return &c
}

// words puts labels for the placeholders of a text.
func (f filler) words(s string) string {
	for i, a := range f.axes {
		s = strings.ReplaceAll(s, "{"+a.name+"}", a.values[f.choice[i]].label)
	}
	return s
}

// insert puts a node below a table at a path, which a key with a placeholder may
// be: an axis of rounding points has values such as update.master. Tables merge.
func (f filler) insert(table *node, path []string, n *node) {
	k, rest := path[0], path[1:]
	sub := table.table[k]
	switch {
	case sub == nil && len(rest) == 0:
		table.table[k] = n
	case sub == nil:
		sub = &node{file: n.file, line: n.line, key: joinKey(table.key, k), table: map[string]*node{}}
		table.table[k] = sub
		f.insert(sub, rest, n)
	case sub.table == nil || len(rest) == 0 && n.table == nil:
		f.fail(n.errorf("keep one of them", "sets %s, which line %d sets too", strings.Join(path, "."), sub.line))
	case len(rest) > 0:
		f.insert(sub, rest, n)
	default:
		for _, name := range n.names() {
			f.insert(sub, []string{name}, n.table[name])
		}
	}
}
