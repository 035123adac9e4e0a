package trainer

import "ulpine/quant"

// Arithmetic is the full assignment of arithmetic to the rounding points of one
// layer. A nil point of a backward phase reuses what the forward pass holds.
type Arithmetic struct {
	// Forward phase: the working copy of weights and biases, the layer's output,
	// the sums.
	Weight     quant.Point
	Activation quant.Point
	Forward    quant.Accumulate

	InputGradient  Backward // dL/dx; First is the weight operand
	WeightGradient Backward // dL/dw; First is the activation operand

	States []quant.Point // one a state tensor of the optimizer
	Step   quant.Point
	Master quant.Point
}

// Backward is the arithmetic of one of the two gradient products of a layer.
type Backward struct {
	First    *quant.Point // weight (input gradient) or activation (weight gradient); nil: the forward working copy
	Gradient *quant.Point // nil: the gradient as stored
	Sums     quant.Accumulate
	Result   quant.Point
}

// LossScaleKind is how the loss is scaled before the backward pass.
type LossScaleKind uint8

// The kinds of loss scaling.
const (
	NoScale LossScaleKind = iota
	FixedScale
	DynamicScale
)

// LossScale multiplies the output error by S, so that small gradients do not
// underflow. Dynamic: a step with a non-finite gradient, or with a saturation
// at a gradient point, is skipped and S cut.
type LossScale struct {
	Kind       LossScaleKind
	Value      float64 // fixed S, or where dynamic scaling starts (default 2^15)
	RaiseAfter int     // clean steps (default 1000)
	RaiseBy    float64 // default 2
	CutBy      float64 // default 0.5
}

// Arm is the arithmetic of a whole training: a layer's entry applies to the
// layer of the same index.
type Arm struct {
	Input        quant.Point
	LossGradient quant.Point
	Layers       []Arithmetic
	LossScale    LossScale
}

// Schedule is a learning rate by epoch: Start, multiplied by Multiply at the
// start of each epoch in AtEpochs (1 is the first epoch).
type Schedule struct {
	Start    float64
	Multiply float64
	AtEpochs []int
}

// Optimizer is a rule and its hyper-parameters.
type Optimizer struct {
	Kind     string // "sgd"
	Momentum float64
}

// Training is what all arms share besides the network. Hyper-parameters are
// used as the binary32 number nearest to what is written here.
type Training struct {
	Optimizer     Optimizer
	LearningRate  Schedule
	Batch, Epochs int
	Shuffle       bool
	// EvaluateTest and EvaluateValidation: "every epoch", "last epoch", "never".
	EvaluateTest, EvaluateValidation string
}
