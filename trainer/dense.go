package trainer

import "ulpine/quant"

// denseKind is a fully connected layer: y[u] = sum over inputs of w[u,input]
// x[input], then + b[u]. An input with more than one dimension is read row-major.
var denseKind = kind{
	name: "dense", usage: "dense 16", parse: parseDense,
	build32: newDense[float32], build64: newDense[float64],
}

func parseDense(o *options, s *Spec) error {
	units, err := o.only("units", 1)
	if err != nil {
		return err
	}
	inputs := volume(s.In)
	s.Name = "dense " + itoa(units)
	s.Out = []int{units}
	s.Params = []ParamSpec{{Name: "weight", Shape: []int{units, inputs}, FanIn: inputs}, {Name: "bias", Shape: []int{units}}}
	s.Sums = Lengths{Forward: inputs, InputGradient: units, WeightGradient: 1, BiasGradient: 1}
	work := uint64(units) * uint64(inputs)
	s.MACs = Work{Forward: work, InputGradient: work, WeightGradient: work}
	s.Points = productPoints
	return nil
}

// newDense binds the products. Terms ascend by input index forward, by unit in
// the input gradient, by sample in the weight gradient.
func newDense[T quant.Element](b *bench[T]) (layer[T], error) {
	units, inputs := b.spec.Out[0], volume(b.spec.In)
	s := shape{units: units, terms: inputs, channels: inputs, inner: 1, outer: 1, groups: 1}
	return asLayer(newLinear(b, s, func(l *linear[T]) bindings[T] {
		return bindings[T]{
			forward:    []quant.Columns[T]{quant.Matrix[T]{Data: l.operand, Row: 1, Col: inputs}},
			below:      []quant.Columns[T]{quant.Matrix[T]{Data: l.belowGradient, Row: 1, Col: units}},
			weight:     []quant.Columns[T]{quant.Matrix[T]{Data: l.activation, Row: inputs, Col: 1}},
			belowLeft:  quant.Matrix[T]{Data: l.belowWeight, Row: 1, Col: inputs},
			belowTerms: units,
		}
	}))
}

// asLayer keeps a failed construction from becoming a layer that is not nil.
func asLayer[T quant.Element](l *linear[T], err error) (layer[T], error) {
	if err != nil {
		return nil, err
	}
	return l, nil
}
