package plan

import (
	"fmt"
	"maps"
	"slices"
	"strings"

	"ulpine/trainer"
)

// selection is which layers the settings of a table are for. The zero value is
// all of them, input and loss included.
type selection struct {
	network *trainer.Network
	layers  map[int]reach // nil: all; else how specifically each was selected
	words   string        // as the plan spells it
}

// reach is how specifically layer i is selected, if it is.
func (s selection) reach(i int) (reach, bool) {
	if s.layers == nil {
		return allLayers, true
	}
	where, ok := s.layers[i]
	return where, ok
}

// prefix heads the keys of settings for some layers.
func (s selection) prefix() string {
	if s.layers == nil {
		return ""
	}
	return "layer " + s.words + ": "
}

// targets are the keys that set points of the selected layers: without input and
// loss, which no layer has.
func (s selection) targets() map[string]target {
	all := targets()
	if s.layers == nil {
		return all
	}
	maps.DeleteFunc(all, func(_ string, t target) bool {
		return t.rank == pointwise && slices.ContainsFunc(t.ids, ofNoLayer)
	})
	return all
}

// ofNoLayer reports whether a point belongs to the network as a whole.
func ofNoLayer(id trainer.PointID) bool { return id == trainer.Input || id == trainer.LossGradient }

// suggest is the remedy for an unknown key.
func (s selection) suggest(word string, top []string, all map[string]target) string {
	if s.layers != nil && (word == trainer.Input.String() || word == "loss") {
		return "write it in the arm itself: input and loss belong to no layer"
	}
	return suggestPoint(word, top, all)
}

// applies refuses a point's own key where no selected layer computes with the
// point: the setting would do nothing, and its author thinks it does.
func (r *reader) applies(n *node, key string, t target, s selection) {
	if len(s.layers) == 0 || t.rank < pointwise {
		return
	}
	for i := range s.layers {
		used := s.network.PointsOf(i)
		if slices.ContainsFunc(t.ids, func(id trainer.PointID) bool { return slices.Contains(used, id) }) {
			return
		}
	}
	r.fail(n.errorf("remove it or select another layer", "the layer it is for (%s) does not compute with %s", s.words, key))
}

// readLayers applies the [[layer]] tables of an arm or of the baseline.
func (r *armReader) readLayers(arm *node, a *assignment) {
	for _, n := range r.tables(arm, "layer") {
		s, ok := r.readSelection(n)
		if !ok {
			s = selection{network: r.network, layers: map[int]reach{}} // its settings are still checked
		}
		before := len(a.spelled)
		failed := len(r.errs)
		r.readSettings(n, s, a, r.formats, []string{"select"})
		if len(a.spelled) == before && len(r.errs) == failed && ok {
			r.fail(n.errorf(`write storage = "fp32" or a point's key`, "the layers are selected, but nothing is set"))
		}
	}
}

// readSelection reads select: one selector, or an array of them. A layer that
// several select counts as selected by the most specific.
func (r *armReader) readSelection(n *node) (selection, bool) {
	s := selection{network: r.network, layers: map[int]reach{}}
	at := n.table["select"]
	if at == nil {
		r.fail(n.errorf(`write select = "first"`, "select is missing"))
		return s, false
	}
	selectors := []*node{at}
	if at.list != nil {
		selectors = at.list
	}
	before := len(r.errs)
	var words []string
	for _, one := range selectors {
		where, layers := r.selector(one)
		for _, i := range layers {
			s.layers[i] = max(s.layers[i], where)
		}
		words = append(words, fmt.Sprint(one.value))
	}
	s.words = strings.Join(words, " + ")
	if len(selectors) == 0 {
		r.fail(at.errorf(`write select = "first"`, "selects no layer"))
	}
	return s, len(r.errs) == before && len(r.network.Layers) > 0
}

// selector returns the layers that one selector means.
func (r *armReader) selector(n *node) (where reach, layers []int) {
	count := len(r.network.Layers)
	switch v := n.value.(type) {
	case int64:
		if v < 1 || v > int64(count) && count > 0 {
			r.fail(n.errorf(fmt.Sprintf("write 1 to %d", max(count, 1)), "there is no layer %d: the network has %d", v, count))
			return atIndex, nil
		}
		return atIndex, []int{int(v) - 1}
	case string:
		where, layers = r.named(strings.Join(strings.Fields(v), " "))
		if len(layers) == 0 && count > 0 {
			r.fail(n.errorf(suggest(v, r.selectors()), "no layer is selected by %q", v))
		}
		return where, layers
	}
	r.wrongType(n, "a layer's kind, name or number", `select = "first", "conv1d", "dense 16" or 3`)
	return allLayers, nil
}

// named returns the layers that a word means: first and last are those with
// parameters, the others have none that could be kept wide.
func (r *armReader) named(word string) (reach, []int) {
	var trained, kind, name []int
	for i := range r.network.Layers {
		l := &r.network.Layers[i]
		if len(l.Params) > 0 {
			trained = append(trained, i)
		}
		if l.Kind == word {
			kind = append(kind, i)
		}
		if l.Name == word || strings.Join(strings.Fields(l.Text), " ") == word {
			name = append(name, i)
		}
	}
	switch {
	case word == "first" && len(trained) > 0:
		return atEnd, trained[:1]
	case word == "last" && len(trained) > 0:
		return atEnd, trained[len(trained)-1:]
	case kind != nil:
		return ofKind, kind
	}
	return ofName, name
}

// selectors are the words that select a layer of the network.
func (r *armReader) selectors() []string {
	words := []string{"first", "last"}
	for i := range r.network.Layers {
		l := &r.network.Layers[i]
		for _, w := range []string{l.Kind, l.Name} {
			if !slices.Contains(words, w) {
				words = append(words, w)
			}
		}
	}
	return words
}
