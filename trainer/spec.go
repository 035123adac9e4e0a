package trainer

// Spec is a checked layer: its shapes, its parameters, and the lengths of its
// sums, which a plan's reader must see before a format is chosen.
type Spec struct {
	Text string // as written
	Name string // every option spelt out: "conv1d out=6 width=9 stride=2 pad=0"
	Kind string
	In   []int // shape of one example below
	Out  []int // shape of one example above

	Params []ParamSpec
	Sums   Lengths
	MACs   Work
	Points []PointID // the rounding points this layer computes with
	Inner  Inner

	window   window  // geometry of convolutions and pools
	partner  int     // a residual end's begin
	momentum float64 // of running statistics
	groups   int     // of a convolution's channels
	heads    int     // of an attention layer
	causal   bool    // no position attends to a later one
	cell     string  // of a recurrent layer
	number   float64 // the one decimal of a kind that has one, a binary32 number
}

// ParamSpec is a parameter's name ("weight", "bias") and shape, and how many
// inputs one of its outputs sums over (0: it starts at Start). Statistic: it is not
// trained but follows the data; see batchNormKind.
type ParamSpec struct {
	Name      string
	Shape     []int
	FanIn     int
	Start     float64
	Statistic bool
}

// Lengths are numbers of terms of one sum, padding included; 0 where the layer
// forms no such sum.
type Lengths struct {
	Forward       int
	InputGradient int
	// WeightGradient and BiasGradient count terms an example: the sums run over
	// the whole mini-batch.
	WeightGradient, BiasGradient int
}

// Work is a number of multiply-adds (in pools: additions) for one example,
// padding included, because an emulated padded term costs what any other costs.
type Work struct {
	Forward, InputGradient, WeightGradient uint64
}

// Inner is what a layer of several products does between its input and its output,
// for one example; zero in all others.
type Inner struct {
	Values    uint64 // rounded at forward.activation besides the output
	Gradients uint64 // rounded at input_gradient.result besides the input's gradient
	Inputs    uint64 // and, where the input's gradient is formed, in joining it
	// Values rounded as operands where the arm sets them: at forward.operand, at
	// weight_gradient.activation and .gradient, at input_gradient.gradient and there for
	// the input's gradient.
	Operands, Activations, Slopes, Pulled, PulledInputs uint64
	// Back is the longest sum, BackMACs the work, of the gradients that are formed even
	// where the layer's own input needs none.
	Back     int
	BackMACs uint64
}

// Network is a checked list of layers.
type Network struct {
	Input  []int // shape of one example
	Layers []Spec
}

// ParamShapes are names and shapes of the parameters as outcomes record them and a
// job may start from them, without values.
func (n *Network) ParamShapes() (all []Param) {
	for i := range n.Layers {
		for _, p := range n.Layers[i].Params {
			all = append(all, Param{Name: paramName(i, p.Name), Shape: p.Shape})
		}
	}
	return all
}

// Outputs is the number of values the last layer yields for one example: the
// number of classes.
func (n *Network) Outputs() int {
	if len(n.Layers) == 0 {
		return volume(n.Input)
	}
	return volume(n.Layers[len(n.Layers)-1].Out)
}

// Parameters is the number of trained values.
func (n *Network) Parameters() (count int) {
	for i := range n.Layers {
		for _, p := range n.Layers[i].Params {
			if !p.Statistic {
				count += volume(p.Shape)
			}
		}
	}
	return count
}

// propagates reports whether layer i forms an input gradient: only if a layer
// below it has parameters to train.
func (n *Network) propagates(i int) bool {
	for j := range i {
		if len(n.Layers[j].Params) > 0 {
			return true
		}
	}
	return false
}

// PointsOf lists the rounding points that layer i computes with where it stands.
func (n *Network) PointsOf(i int) []PointID {
	var used []PointID
	back := n.propagates(i) || n.Layers[i].Inner.Gradients > 0
	for _, id := range n.Layers[i].Points {
		if !id.inputGradient() || back {
			used = append(used, id)
		}
	}
	return used
}

// gain is the factor in front of 1/fan-in in the variance of layer i's initial
// weights: 2 where a ReLU follows before the next weights, because it halves the
// second moment of what passes, 2/(1 + slope^2) where a leaky one does (He et al.,
// Delving deep into rectifiers, ICCV 2015, section 2.2), else 1; 1 in layers of several
// products.
func (n *Network) gain(i int) float64 {
	if n.Layers[i].Inner.Gradients > 0 {
		return 1
	}
	for _, above := range n.Layers[i+1:] {
		if len(above.Params) > 0 {
			break
		}
		switch above.Kind {
		case reluKind.name:
			return 2
		case leakyReluKind.name:
			return 2 / (1 + float64(above.number*above.number))
		}
	}
	return 1
}
