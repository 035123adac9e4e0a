package plan

import (
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"
)

// reader takes typed values out of nodes and collects what is wrong with them,
// so that one look at a plan tells everything that is wrong, not the first thing
// only. A failed read returns the fallback.
type reader struct {
	errs   Errors
	stored StoredRuns // nil: none can be read
	input  []int      // shape of an example, as soon as it is known
	share  bool       // the claim's metric lies in 0..1
}

// fail records an error.
func (r *reader) fail(e *PlanError) { r.errs = append(r.errs, e) }

// known reports every key of the table that is not one of names.
func (r *reader) known(n *node, names ...string) {
	for _, k := range n.names() {
		if !slices.Contains(names, k) {
			e := n.table[k].errorf(suggest(k, names), "unknown key")
			if best, near := nearest(k, names); near {
				e.meant = joinKey(n.key, best)
			}
			r.fail(e)
		}
	}
}

// wrongType records that n should have been something else; example shows it.
func (r *reader) wrongType(n *node, want, example string) {
	remedy := "write " + example
	if n.value != nil {
		if _, ok := n.value.(string); !ok {
			r.fail(n.errorf(remedy, "wrong type: %v is %s, want %s", n.value, n.kind(), want))
			return
		}
		r.fail(n.errorf(remedy, "wrong type: %q is %s, want %s", n.value, n.kind(), want))
		return
	}
	r.fail(n.errorf(remedy, "wrong type: %s, want %s", n.kind(), want))
}

// table returns the table under key, or nil when there is none.
func (r *reader) table(n *node, key, example string) *node {
	sub := n.table[key]
	if sub == nil {
		return nil
	}
	if sub.table == nil {
		r.wrongType(sub, "a table", example)
		return nil
	}
	return sub
}

// tables returns the array of tables under key.
func (r *reader) tables(n *node, key string) []*node {
	sub := n.table[key]
	if sub == nil {
		return nil
	}
	if sub.list == nil {
		r.wrongType(sub, "an array of tables", "[["+key+"]] with double brackets")
		return nil
	}
	for i, e := range sub.list {
		if e.table == nil {
			r.wrongType(e, "a table", "[["+key+"]] once for each")
			return sub.list[:i]
		}
	}
	return sub.list
}

// text returns the text under key.
func (r *reader) text(n *node, key, fallback string) string {
	sub := n.table[key]
	if sub == nil {
		return fallback
	}
	s, ok := sub.value.(string)
	if !ok {
		r.wrongType(sub, "a text", key+` = "..."`)
		return fallback
	}
	return s
}

// word returns the text under key, which must be one of words.
func (r *reader) word(n *node, key, fallback string, words ...string) string {
	sub := n.table[key]
	s := r.text(n, key, fallback)
	if sub == nil || slices.Contains(words, s) {
		return s
	}
	if _, ok := sub.value.(string); ok {
		r.fail(sub.errorf(suggest(s, words), "unknown word %q", s))
	}
	return fallback
}

// texts returns the array of texts under key, with their nodes.
func (r *reader) texts(n *node, key string) ([]string, []*node) {
	sub := n.table[key]
	if sub == nil {
		return nil, nil
	}
	if sub.list == nil {
		r.wrongType(sub, "an array of texts", key+` = ["...", "..."]`)
		return nil, nil
	}
	all := make([]string, 0, len(sub.list))
	for _, e := range sub.list {
		s, ok := e.value.(string)
		if !ok {
			r.wrongType(e, "a text", `"..."`)
			return nil, nil
		}
		all = append(all, s)
	}
	return all, sub.list
}

// flag returns the boolean under key.
func (r *reader) flag(n *node, key string, fallback bool) bool {
	sub := n.table[key]
	if sub == nil {
		return fallback
	}
	b, ok := sub.value.(bool)
	if !ok {
		r.wrongType(sub, "true or false", fmt.Sprintf("%s = %v", key, fallback))
		return fallback
	}
	return b
}

// whole returns the whole number under key, which must lie in low..high.
func (r *reader) whole(n *node, key string, fallback, low, high int64) int64 {
	sub := n.table[key]
	if sub == nil {
		return fallback
	}
	return r.wholeAt(sub, key, fallback, low, high)
}

// wholeAt is whole for a node already found.
func (r *reader) wholeAt(sub *node, key string, fallback, low, high int64) int64 {
	i, ok := sub.value.(int64)
	if !ok {
		r.wrongType(sub, "a whole number", key+" = "+wholeLike(sub.value, key, max(fallback, low), low, high))
		return fallback
	}
	if i < low || i > high {
		r.fail(sub.errorf(inRange(i, low, high), "%d is out of range", i))
		return fallback
	}
	return i
}

// wholeLike is the whole number, or the two, that the author of a value of another
// type may have had in mind; fallback if there is none in range.
func wholeLike(value any, key string, fallback, low, high int64) string {
	switch v := value.(type) {
	case string:
		if i, err := strconv.ParseInt(strings.TrimSpace(v), 10, 64); err == nil && i >= low && i <= high {
			return fmt.Sprint(i)
		}
	case float64:
		down, up := math.Floor(v), math.Ceil(v)
		switch {
		case !(down >= float64(low) && up <= float64(min(high, math.MaxInt32))):
		case down == up:
			return fmt.Sprint(int64(v))
		default:
			return fmt.Sprintf("%d or %s = %d", int64(down), key, int64(up))
		}
	}
	return fmt.Sprint(fallback)
}

// inRange is the remedy for a whole number i out of range: the limit that it
// oversteps where the other one is far away.
func inRange(i, low, high int64) string {
	if high >= math.MaxInt32 {
		if i > high {
			return fmt.Sprintf("write at most %d", high)
		}
		return fmt.Sprintf("write at least %d", low)
	}
	return fmt.Sprintf("write %d to %d", low, high)
}

// wholes returns the array of whole numbers under key.
func (r *reader) wholes(n *node, key string, low, high int64) []int {
	sub := n.table[key]
	if sub == nil {
		return nil
	}
	if sub.list == nil {
		r.wrongType(sub, "an array of whole numbers", key+" = [9, 13]")
		return nil
	}
	all := make([]int, 0, len(sub.list))
	for _, e := range sub.list {
		all = append(all, int(r.wholeAt(e, key, low, low, high)))
	}
	return all
}

// number returns the number under key; a whole number will do.
func (r *reader) number(n *node, key string, fallback float64) float64 {
	sub := n.table[key]
	if sub == nil {
		return fallback
	}
	return r.numberAt(sub, key, fallback)
}

// numberAt is number for a node already found. Infinities and NaN, which TOML
// can write, are no numbers here.
func (r *reader) numberAt(sub *node, key string, fallback float64) float64 {
	var x float64
	switch v := sub.value.(type) {
	case float64:
		x = v
	case int64:
		x = float64(v)
	default:
		example := fallback
		if text, ok := sub.value.(string); ok {
			if meant, err := strconv.ParseFloat(strings.TrimSpace(text), 64); err == nil && !math.IsNaN(meant) && !math.IsInf(meant, 0) {
				example = meant
			}
		}
		r.wrongType(sub, "a number", fmt.Sprintf("%s = %g", key, example))
		return fallback
	}
	if math.IsNaN(x) || math.IsInf(x, 0) {
		r.fail(sub.errorf("write a finite number", "%v is not a finite number", x))
		return fallback
	}
	return x
}
