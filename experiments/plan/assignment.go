package plan

import (
	"fmt"
	"slices"
	"strconv"
	"strings"

	"ulpine/quant"
	"ulpine/trainer"
)

// slot is what one rounding point is set to, by which setting.
type slot struct {
	set    bool // false: an operand that is reused, or an outer sum like the sum
	value  value
	rank   specificity
	at     *node  // the setting; nil: inherited
	origin string // its key: "storage", "update.master"; "baseline"
}

// assignment is a setting for every rounding point of every layer.
type assignment struct {
	slots   []slot   // indexed by PointID: what no layer sets otherwise, input and loss
	layers  [][]slot // one list a layer of the network
	spelled []string // the settings in file order, short
}

// of are the slots of a layer; -1: those of input and loss.
func (a *assignment) of(layer int) []slot {
	if layer < 0 {
		return a.slots
	}
	return a.layers[layer]
}

// isOperand reports whether a point is an operand of a gradient product: unset,
// it reuses the forward working copy or the stored tensor.
func isOperand(id trainer.PointID) bool {
	switch id {
	case trainer.InputGradientWeight, trainer.InputGradientGradient,
		trainer.WeightGradientActivation, trainer.WeightGradientGradient:
		return true
	}
	return false
}

func isSum(id trainer.PointID) bool {
	return id == trainer.ForwardSum || id == trainer.InputGradientSum || id == trainer.WeightGradientSum
}

func isOuter(id trainer.PointID) bool {
	return id == trainer.ForwardOuter || id == trainer.InputGradientOuter || id == trainer.WeightGradientOuter
}

func isProduct(id trainer.PointID) bool {
	return id.InsideSums() && !isSum(id) && !isOuter(id) && !isStatistic(id)
}

// isStatistic reports whether a point is one of the sums of a normalisation.
func isStatistic(id trainer.PointID) bool {
	return id == trainer.ForwardStatistic || id == trainer.InputGradientStatistic
}

// follows reports whether a point, unless its own key sets it, is computed as
// another: statistics as the sums of their phase, moments as activations, the operand
// of the forward product as it is stored; or, the residue of gradients, is not
// computed at all. No shorthand sets it, so that it follows where the shorthand leads.
func follows(id trainer.PointID) bool {
	return isStatistic(id) || id == trainer.ForwardMoment || isOptional(id)
}

// isOptional reports whether a point rounds nothing unless its own key sets it.
func isOptional(id trainer.PointID) bool {
	return id == trainer.ForwardOperand || id == trainer.WeightGradientResidue
}

// classOf is what a setting of the point's own key may hold.
func classOf(id trainer.PointID) class {
	switch {
	case isSum(id), isStatistic(id):
		return sums
	case id.InsideSums():
		return inside
	}
	return stored
}

// allPoints are the rounding points in the order of computation.
func allPoints() []trainer.PointID {
	all := make([]trainer.PointID, len(trainer.PointNames()))
	for i := range all {
		all[i] = trainer.PointID(i)
	}
	return all
}

// binary32Everywhere is what a baseline is before its settings are read: every
// point binary32 rounded to nearest-even, products rounded, sums sequential.
func binary32Everywhere(layers int) assignment { return everywhere(quant.Binary32, layers) }

// everywhere is binary32Everywhere in another format.
func everywhere(f quant.Format, layers int) assignment {
	a := assignment{slots: make([]slot, len(allPoints())), layers: make([][]slot, layers)}
	for _, id := range allPoints() {
		a.slots[id] = slot{
			set:    !isOperand(id) && !isOuter(id) && !follows(id),
			value:  value{point: quant.Point{Format: f}},
			origin: "default",
		}
	}
	for i := range a.layers {
		a.layers[i] = slices.Clone(a.slots)
	}
	return a
}

// inherit is what an arm of this baseline is before its settings are read. An
// operand that only a shorthand of the baseline set is reused again: its arm may
// have set the tensor it is taken from.
func (a *assignment) inherit() assignment {
	b := assignment{slots: passedOn(a.slots), layers: make([][]slot, len(a.layers))}
	for i := range b.layers {
		b.layers[i] = passedOn(a.layers[i])
	}
	return b
}

func passedOn(slots []slot) []slot {
	own := slices.Clone(slots)
	for id := range own {
		s := &own[id]
		if isOperand(trainer.PointID(id)) && s.rank.what < pointwise {
			s.set = false
		}
		s.rank, s.at, s.origin = specificity{}, nil, "baseline"
	}
	return own
}

// put applies one setting to one point, or reports a setting of equal rank.
func put(slots []slot, id trainer.PointID, s slot) *PlanError {
	old := &slots[id]
	switch c := s.rank.compare(old.rank); {
	case c < 0:
		return nil
	case c == 0 && old.at != nil:
		return s.at.errorf("keep one of them", "sets %s, as %s in %s line %d does: two equally specific settings on one point",
			id, old.origin, old.at.file, old.at.line)
	}
	*old = s
	return nil
}

// leading are the points that shorthands set.
func leading() []trainer.PointID { return slices.DeleteFunc(allPoints(), follows) }

// storagePoints and sumPoints are what the shorthands set.
func storagePoints() []trainer.PointID {
	return slices.DeleteFunc(leading(), trainer.PointID.InsideSums)
}

func sumPoints() []trainer.PointID {
	return slices.DeleteFunc(allPoints(), func(id trainer.PointID) bool { return !isSum(id) && !isOuter(id) })
}

// target is a key of an arm that sets points.
type target struct {
	class class
	rank  breadth
	ids   []trainer.PointID
}

// operandKey sets both operands of a gradient product.
const operandKey = "operand"

// targets is the table of all keys that set points, dotted.
func targets() map[string]target {
	t := map[string]target{
		"everything": {general, broad, leading()},
		"storage":    {stored, partial, storagePoints()},
		"accumulate": {sums, partial, sumPoints()},
	}
	for _, id := range allPoints() {
		t[id.String()] = target{classOf(id), pointwise, []trainer.PointID{id}}
		if isOperand(id) {
			phase, _, _ := strings.Cut(id.String(), ".")
			both := t[phase+"."+operandKey]
			t[phase+"."+operandKey] = target{stored, pointwise, append(both.ids, id)}
		}
	}
	return t
}

// armKeys are the keys of an arm that set no point.
var armKeys = []string{"name", "layer", "loss_scale", "training", "learning_rate", "stage"}

// readSettings applies the settings in the table n to the layers that s selects.
// also lists the other keys that n may have.
func (r *reader) readSettings(n *node, s selection, a *assignment, fs formats, also []string) {
	all := s.targets()
	phases := map[string][]string{} // "forward" -> "weight", "activation", ...
	top := slices.Clone(also)
	for key := range all {
		phase, name, dotted := strings.Cut(key, ".")
		if !dotted {
			top = append(top, key)
			continue
		}
		if phases[phase] == nil {
			top = append(top, phase)
		}
		phases[phase] = append(phases[phase], name)
	}
	for _, k := range n.names() {
		sub := n.table[k]
		switch {
		case phases[k] != nil && sub.table != nil:
			r.known(sub, phases[k]...)
			for _, name := range sub.names() {
				if t, ok := all[k+"."+name]; ok {
					r.applyTarget(sub.table[name], k+"."+name, t, s, a, fs)
				}
			}
		case phases[k] != nil:
			slices.Sort(phases[k])
			r.wrongType(sub, "a table of points", fmt.Sprintf("%s.%s = ... (points: %s)", k, phases[k][0], strings.Join(phases[k], ", ")))
		case all[k].ids != nil:
			r.applyTarget(sub, k, all[k], s, a, fs)
		case !slices.Contains(also, k):
			e := sub.errorf(s.suggest(k, top, all), "unknown key")
			if best, near := nearest(k, top); near && strings.Contains(e.Remedy, strconv.Quote(best)) {
				e.meant = joinKey(n.key, best)
			}
			r.fail(e)
		}
	}
}

// suggestPoint suggests a key for an unknown one; a bare "master" is taken for
// the point of that name.
func suggestPoint(word string, top []string, all map[string]target) string {
	var full []string
	for key := range all {
		if strings.HasSuffix(key, "."+word) {
			full = append(full, key)
		}
	}
	if len(full) > 0 {
		return "write the point in full: " + listed(full)
	}
	return suggest(word, top)
}

// applyTarget reads the setting at n and applies it to the points of its key in
// the selected layers.
func (r *reader) applyTarget(n *node, key string, t target, sel selection, a *assignment, fs formats) {
	v, ok := value{exact: true}, true
	word, _ := n.value.(string)
	switch {
	case key == trainer.UpdateState.String() && n.list != nil:
		v, ok = r.readStates(n, fs)
	case key == trainer.Input.String() && n.list != nil:
		v, ok = r.readChannels(n, r.input, fs)
	case word != exactWord || !isProduct(t.ids[0]) || len(t.ids) > 1:
		v, ok = r.readValue(n, t.class, fs)
	}
	if !ok {
		return
	}
	if !r.checkShared(n, t, v) {
		return
	}
	origin := sel.prefix() + key
	a.spelled = append(a.spelled, origin+" "+v.spell())
	r.applies(n, key, t, sel)
	for _, id := range t.ids {
		s := slot{set: true, rank: specificity{what: t.rank}, at: n, origin: origin, value: value{point: v.point, exact: v.exact, states: v.states, channels: v.channels}}
		switch {
		case isStatistic(id):
			s.value = v
		case isSum(id):
			s.value.order, s.value.through = v.order, v.through
			if v.outer != nil && t.rank == pointwise {
				r.put(a, sel, id+1, slot{set: true, rank: s.rank, at: v.outerAt, origin: origin + ".outer", value: value{point: *v.outer}})
			}
		case isOuter(id) && t.rank < pointwise:
			s.set = v.outer != nil
			if s.set {
				s.value.point = *v.outer
			}
		}
		r.put(a, sel, id, s)
	}
}

// checkShared refuses a format with shared scales where it cannot be.
func (r *reader) checkShared(n *node, t target, v value) bool {
	points := slices.Concat([]quant.Point{v.point}, v.states, v.channels)
	if v.outer != nil {
		points = append(points, *v.outer)
	}
	for i := range points {
		if !SharesScales(points[i].Format) {
			continue
		}
		for _, id := range t.ids {
			if err := trainer.CheckPoint(id, &points[i]); err != nil {
				r.fail(fault(n, err))
				return false
			}
		}
	}
	return true
}

// put applies a setting to one point of the selected layers and records a
// conflict, once for all layers.
func (r *reader) put(a *assignment, sel selection, id trainer.PointID, s slot) {
	if sel.layers == nil {
		if err := put(a.slots, id, s); err != nil {
			r.fail(err)
			return
		}
	}
	if ofNoLayer(id) {
		return // only a.slots counts
	}
	for i := range a.layers {
		where, selected := sel.reach(i)
		if !selected {
			continue
		}
		s.rank.where = where
		if err := put(a.layers[i], id, s); err != nil {
			r.fail(err)
			return
		}
	}
}
