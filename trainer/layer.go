package trainer

import "ulpine/quant"

// layer is one layer of a network in training, bound at construction to the
// edges it reads and writes and to all the scratch memory it will ever need.
type layer[T quant.Element] interface {
	// forward computes the values of the edge above from those of the edge below.
	forward(p *pass)
	// backward computes the parameters' gradients and, if below is set, the
	// gradients of the edge below from those of the edge above.
	backward(p *pass, below bool)
	// params are the layer's parameters in a fixed order; weight before bias.
	params() []*param[T]
}

// settler is a layer that keeps more than its parameters from a step: settle is
// called after every step that was taken, not after skipped ones.
type settler interface{ settle(p *pass) }

// bench is what a layer is built from.
type bench[T quant.Element] struct {
	place
	spec    *Spec
	below   *edge[T]
	above   *edge[T]    // nil until the layer is built, unless the layer makes its own
	batch   int         // capacity of the edges, in examples
	earlier []layer[T]  // the layers below
	given   []*param[T] // parameters that another part of the layer has made
	team    *Team       // who may help with products
}

// param is parameter number of the layer: the one given, or a new one.
func (b *bench[T]) param(number int) *param[T] {
	if b.given != nil {
		return b.given[number]
	}
	return newParam(b, number)
}

// builder constructs a layer.
type builder[T quant.Element] func(b *bench[T]) (layer[T], error)

// kind is a row of the table of layers: how a layer is written, checked and built.
type kind struct {
	name  string
	usage string // shown when an option is wrong or missing
	// parse reads the options and completes the spec: canonical name, shape of
	// the output, parameters, lengths of sums, rounding points.
	parse   func(o *options, s *Spec) error
	build32 builder[float32]
	build64 builder[float64]
	view    bool // the output is the input's memory under another shape
}

// kinds is the table of layers. A new kind is one file and one line here.
var kinds = []*kind{
	&denseKind,
	&conv1dKind,
	&conv2dKind,
	&reluKind,
	&leakyReluKind,
	&tanhKind,
	&sigmoidKind,
	&geluKind,
	&maxPoolKind,
	&avgPoolKind,
	&globalAvgPoolKind,
	&batchNormKind,
	&layerNormKind,
	&attentionKind,
	&recurrentKind,
	&residualKind,
	&flattenKind,
	&dropoutKind,
}

// findKind returns the row of a name, or nil.
func findKind(name string) *kind {
	for _, k := range kinds {
		if k.name == name {
			return k
		}
	}
	return nil
}

// builderOf returns the constructor of a kind for an element type.
func builderOf[T quant.Element](k *kind) builder[T] {
	if b, ok := any(k.build32).(builder[T]); ok {
		return b
	}
	return any(k.build64).(builder[T])
}

// multiplier makes the engine of one sum.
func multiplier[T quant.Element](acc quant.Accumulate) (*quant.Multiplier[T], error) {
	return quant.NewMultiplier[T](acc)
}
