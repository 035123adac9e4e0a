package cost

import (
	"fmt"
	"strings"
)

// Network is what the model needs to know of a network: its layers in order.
type Network struct {
	Layers []Layer `json:"layers"`
}

// Layer is the shape of one layer. Values and multiply-adds are for one example.
type Layer struct {
	Name    string `json:"name"` // as the network spells it: "dense 100"
	Kind    string `json:"kind"` // "dense"
	Weights uint64 `json:"weights"`
	Biases  uint64 `json:"biases"`
	Inputs  uint64 `json:"inputs"`  // values in
	Outputs uint64 `json:"outputs"` // values out
	// Work is the number of multiply-adds, in pools of additions. A layer with no
	// parameters below it is not asked for its input gradient, whatever is stated.
	// An input gradient has the products of the forward phase: more than that is
	// the gaps of a stride, which hardware skips, and is not counted.
	Work Work `json:"work"`
	// Terms is the length of one sum; of a weight gradient's sum the terms of one
	// example.
	Terms Work `json:"terms"`
	// Groups is the number of groups of a grouped convolution; 0 is 1.
	Groups uint64 `json:"groups,omitempty"`
	// InAxis and OutAxis are the values along which shared-scale blocks may run
	// before and after the layer: a dense layer's inputs and outputs, a
	// convolution's channels (of one group). 0: through the whole tensor.
	InAxis  uint64 `json:"in_axis,omitempty"`
	OutAxis uint64 `json:"out_axis,omitempty"`
	Inner   Inner  `json:"inner,omitzero"`
}

// Inner is what a layer of several products (attention, a recurrent cell) has between
// them, for one example: values that are written and read again in its formats of
// activations and gradients, and kept for the backward phases. Its products are
// charged without tiles: each tensor once.
type Inner struct {
	Values    uint64 `json:"values,omitempty"`
	Gradients uint64 `json:"gradients,omitempty"`
	// Taken and Slopes are the activations and the gradients that weight gradients read.
	Taken  uint64 `json:"taken,omitempty"`
	Slopes uint64 `json:"slopes,omitempty"`
	// Work and Terms are those of gradients between the products, which are formed even
	// where nothing below the layer trains.
	Work  uint64 `json:"work,omitempty"`
	Terms uint64 `json:"terms,omitempty"`
}

// several reports whether the layer has more than one product.
func (l *Layer) several() bool { return l.Inner != Inner{} }

// Work is a number for each of the three products of a layer.
type Work struct {
	Forward        uint64 `json:"forward"`
	InputGradient  uint64 `json:"input_gradient"`
	WeightGradient uint64 `json:"weight_gradient"`
}

func (w Work) of(p Phase) uint64 {
	switch p {
	case Forward:
		return w.Forward
	case InputGradient:
		return w.InputGradient
	case WeightGradient:
		return w.WeightGradient
	}
	return 0
}

// parameters is the number of trained values.
func (l *Layer) parameters() uint64 { return l.Weights + l.Biases }

// kindOf is the layer's kind without case and joints: "avg_pool" is "avgpool".
func (l *Layer) kindOf() string {
	return nameJoints.Replace(strings.ToLower(l.Kind))
}

// view reports whether the layer only renames the axes of its input.
func (l *Layer) view() bool {
	switch l.kindOf() {
	case "flatten", "reshape":
		return true
	}
	return false
}

// remembers reports whether the input gradient needs the layer's input again.
// Sums, means and products with weights do not; whatever else there is or may
// come (ReLU, max pool, curves, normalisation) is taken to.
func (l *Layer) remembers() bool {
	switch l.kindOf() {
	case "dense", "conv1d", "conv2d", "avgpool", "averagepool", "globalpool", "globalavgpool", "residual", "join", "add", "flatten", "reshape":
		return false
	}
	return !l.several() // what these need is among their inner values
}

// additive reports whether the layer's work is additions or comparisons: pools
// and joins. Whatever else works without weights multiplies its activations.
func (l *Layer) additive() bool {
	if l.Weights > 0 {
		return false
	}
	switch k := l.kindOf(); k {
	case "residual", "join", "add":
		return true
	default:
		return strings.HasSuffix(k, "pool")
	}
}

// product is the layer's forward product as matrices, units x terms by terms x
// positions, for one example and one group; ok is false when the layer's figures
// do not make one.
func (l *Layer) product() (units, terms, positions uint64, ok bool) {
	groups := max(l.Groups, 1)
	terms = l.Terms.Forward
	if l.several() || l.Weights == 0 || terms == 0 || l.Weights%(terms*groups) != 0 || l.Work.Forward%l.Weights != 0 {
		return 0, 0, 0, false
	}
	return l.Weights / terms / groups, terms, l.Work.Forward / l.Weights, true
}

// inputProducts is the number of multiply-adds of the input gradient, and the length of
// its sums; below tells whether the gradient of the layer's own input is wanted.
func (l *Layer) inputProducts(below bool) (products, terms uint64) {
	switch {
	case !below:
		return l.Inner.Work, l.Inner.Terms
	case l.Weights == 0 || l.several():
		return l.Work.InputGradient, l.Terms.InputGradient
	}
	return min(l.Work.InputGradient, l.Work.Forward), l.Terms.InputGradient
}

// taken and slopes are the activations and gradients that enter products with weights.
func (l *Layer) taken() uint64 {
	if l.several() {
		return l.Inner.Taken
	}
	return l.Inputs
}

func (l *Layer) slopes() uint64 {
	if l.several() {
		return l.Inner.Slopes
	}
	return l.Outputs
}

// biasTerms is the length of the sum of a bias gradient over a batch.
func (l *Layer) biasTerms(batch uint64) uint64 {
	if l.several() {
		return batch * l.Terms.WeightGradient
	}
	return ceilDiv(batch*l.Outputs, l.Biases)
}

// propagates reports whether layer i forms an input gradient: only if a layer
// below it has something to train.
func (n *Network) propagates(i int) bool {
	for j := range i {
		if n.Layers[j].parameters() > 0 {
			return true
		}
	}
	return false
}

// backwards reports whether layer i has an input gradient phase: its own input's
// gradient, or those between its products.
func (n *Network) backwards(i int) bool { return n.propagates(i) || n.Layers[i].several() }

// Parameters is the number of trained values of the network.
func (n *Network) Parameters() (count uint64) {
	for i := range n.Layers {
		count += n.Layers[i].parameters()
	}
	return count
}

// Optimizer is the arithmetic of an update of one parameter, apart from the
// final difference master - step.
type Optimizer struct {
	Name   string   `json:"name"`
	States []string `json:"states,omitempty"` // names of the state tensors
	// In the format of the widest state.
	StateMultiplies int `json:"state_multiplies,omitempty"`
	StateAdditions  int `json:"state_additions,omitempty"`
	// In the step's format. Divisions counts divisions and square roots.
	StepMultiplies int `json:"step_multiplies"`
	StepAdditions  int `json:"step_additions,omitempty"`
	Divisions      int `json:"divisions,omitempty"`
}

// DivisionAsMultiplies is the number of multiplications that a division or a
// square root is charged as, in time and energy: a table look-up and two Newton
// steps of two multiplications each, and one more to correct the last place
// (common practice, an assumption).
const DivisionAsMultiplies = 6

// The optimizers, by the formulas beside them. Scalars that are the same for all
// parameters are computed once a step and not counted.
var (
	// SGD: step = lr g.
	SGD = Optimizer{Name: "sgd", StepMultiplies: 1}
	// Momentum: v = mu v + g; step = lr v.
	Momentum = Optimizer{
		Name: "sgd with momentum", States: []string{"velocity"},
		StateMultiplies: 1, StateAdditions: 1, StepMultiplies: 1,
	}
	// Nesterov: v = mu v + g; step = lr (g + mu v).
	Nesterov = Optimizer{
		Name: "nesterov", States: []string{"velocity"},
		StateMultiplies: 1, StateAdditions: 1, StepMultiplies: 2, StepAdditions: 1,
	}
	// Adam: m = b1 m + (1-b1) g; v = b2 v + (1-b2) g g;
	// step = lr (c1 m) / (sqrt(c2 v) + epsilon).
	Adam = Optimizer{
		Name: "adam", States: []string{"first moment", "second moment"},
		StateMultiplies: 5, StateAdditions: 2, StepMultiplies: 3, StepAdditions: 1, Divisions: 2,
	}
	// AdamW: as Adam, step += (lr decay) w.
	AdamW = Optimizer{
		Name: "adamw", States: []string{"first moment", "second moment"},
		StateMultiplies: 5, StateAdditions: 2, StepMultiplies: 4, StepAdditions: 2, Divisions: 2,
	}
)

func (o *Optimizer) check(e *fieldErrors) {
	for _, field := range []struct {
		name  string
		value int
	}{
		{"state_multiplies", o.StateMultiplies},
		{"state_additions", o.StateAdditions},
		{"step_multiplies", o.StepMultiplies},
		{"step_additions", o.StepAdditions},
		{"divisions", o.Divisions},
	} {
		if field.value < 0 || field.value > 1000 {
			e.add("optimizer."+field.name, fmt.Sprintf("%d operations a parameter", field.value), "use 0 to 1000")
		}
	}
	if len(o.States) == 0 && o.StateMultiplies+o.StateAdditions > 0 {
		e.add("optimizer.states", "arithmetic on states, but no state", "name the state tensors")
	}
}

// maxCount keeps every product of counts and bits of a check that passed below
// 2^63.
const maxCount = 1 << 44

func (n *Network) check(batch uint64, e *fieldErrors) {
	if len(n.Layers) == 0 {
		e.add("network.layers", "the network has no layer", "give at least one")
	}
	for i := range n.Layers {
		l := &n.Layers[i]
		at := fmt.Sprintf("network.layers[%d]", i+1)
		if l.Inputs == 0 || l.Outputs == 0 {
			e.add(at, fmt.Sprintf("%q takes %d values and yields %d", l.Name, l.Inputs, l.Outputs), "both must be above zero")
		}
		if i > 0 && l.Inputs != n.Layers[i-1].Outputs {
			e.add(at+".inputs", fmt.Sprintf("%q takes %d values, but the layer below yields %d", l.Name, l.Inputs, n.Layers[i-1].Outputs),
				"list the layers in order")
		}
		for _, count := range []uint64{
			l.Weights, l.Biases, l.Inputs, l.Outputs, l.Work.Forward, l.Work.InputGradient, l.Work.WeightGradient,
			l.Terms.Forward, l.Terms.InputGradient, l.Terms.WeightGradient,
			l.Inner.Values, l.Inner.Gradients, l.Inner.Taken, l.Inner.Slopes, l.Inner.Work, l.Inner.Terms,
		} {
			if count > maxCount/max(batch, 1) {
				e.add(at, fmt.Sprintf("%q has a count of %d under a batch of %d", l.Name, count, batch),
					fmt.Sprintf("the model counts to %d", uint64(maxCount)))
				break
			}
		}
		e.terms(at, l)
	}
}

// terms adds an error where there are multiply-adds but no length of their sums.
func (e *fieldErrors) terms(at string, l *Layer) {
	for _, p := range []Phase{Forward, InputGradient, WeightGradient} {
		if l.Work.of(p) > 0 && l.Terms.of(p) == 0 {
			e.add(at+".terms", fmt.Sprintf("%q has %d multiply-adds in its %s phase, but sums of no terms", l.Name, l.Work.of(p), p),
				"state the length of a sum")
		}
	}
}
