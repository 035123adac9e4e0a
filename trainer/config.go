package trainer

import "ulpine/quant"

// Arithmetic is the full assignment of arithmetic to the rounding points of one
// layer. A nil point of a backward phase reuses what the forward pass holds, or,
// where that has a format with shared scales, rounds the stored tensor anew, at the
// same point along its own axis.
type Arithmetic struct {
	// Forward phase: the working copy of weights and biases, the layer's output,
	// the sums.
	Weight     quant.Point
	Activation quant.Point
	Operand    *quant.Point // the layer's input as operand of the forward product; nil: as stored
	Forward    quant.Accumulate

	InputGradient  Backward // dL/dx; First is the weight operand
	WeightGradient Backward // dL/dw; First is the activation operand

	// Normalisations: the sums of their statistics and what is made of them. nil:
	// as Forward, as Activation. Their backward sums are InputGradient.Statistic.
	Statistic *quant.Accumulate
	Moment    *quant.Point // mean, variance, inverse deviation, running statistics

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
	// Residue, of the weight gradient only, keeps what rounding to Result leaves, for
	// the next step's gradient; nil: it is lost.
	Residue *quant.Point
	// Statistic is that of the sums in a normalisation's input gradient; nil: as Sums.
	Statistic *quant.Accumulate
}

// statistic is the accumulation of a normalisation's forward sums.
func (a *Arithmetic) statistic() quant.Accumulate {
	if a.Statistic != nil {
		return *a.Statistic
	}
	return a.Forward
}

// moment is the point of what a normalisation makes of its sums.
func (a *Arithmetic) moment() *quant.Point {
	if a.Moment != nil {
		return a.Moment
	}
	return &a.Activation
}

// statistic is the accumulation of a normalisation's backward sums.
func (b *Backward) statistic() quant.Accumulate {
	if b.Statistic != nil {
		return *b.Statistic
	}
	return b.Sums
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
// at a gradient point, is skipped and S cut. Zero fields take their defaults.
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
	Channels     []quant.Point // a point for each channel of the input, in place of Input; nil: Input for all
	LossGradient quant.Point
	Layers       []Arithmetic
	LossScale    LossScale
	Stages       []Stage // what it changes to on the way, in order of their starts
}

// Schedule is a learning rate: Start, multiplied by Multiply at the start of each
// epoch in AtEpochs (1 is the first epoch), or falling to End along half a cosine
// over all steps of the training; risen to linearly in the first WarmUp steps.
type Schedule struct {
	Start    float64
	Multiply float64
	AtEpochs []int
	Cosine   bool
	End      float64 // of the cosine
	WarmUp   int     // steps; 0: none
}

// Optimizer is a rule and its hyper-parameters.
type Optimizer struct {
	Kind     string // "sgd", "nesterov", "adam", "adamw"
	Momentum float64

	// Adam's; 0: the defaults of its paper, 0.9, 0.999, 1e-8.
	Beta1, Beta2, Epsilon float64
	EpsilonInside         bool // epsilon is added under the root

	WeightDecay float64
	Decoupled   bool    // decay the weight, not the gradient; adamw always does
	ClipNorm    float64 // the gradient's norm is cut to it; 0: not at all
	Compensated bool    // a further state, the last, keeps what masters round off
}

// When says after which epochs a split is evaluated. The zero value is the last one.
type When string

// The times of evaluation.
const (
	EveryEpoch When = "every epoch"
	LastEpoch  When = "last epoch"
	Never      When = "never"
)

// Training is what all arms share besides the network. Hyper-parameters are
// used as the binary32 number nearest to what is written here.
type Training struct {
	Loss           string  // "cross-entropy", also where empty, "mean-squared-error", "huber"
	LabelSmoothing float64 // of cross-entropy
	HuberWidth     float64 // where the huber loss turns straight; 0: 1
	Optimizer      Optimizer
	LearningRate   Schedule
	Batch, Epochs  int
	Shuffle        bool
	Augment        Augment // of training examples
	// EvaluateTest and EvaluateValidation: "every epoch", "last epoch", "never".
	EvaluateTest, EvaluateValidation When
}

// due reports whether an evaluation falls after an epoch; last is set for the
// last one, also for the one in which a run stops.
func (w When) due(last bool) bool { return w == EveryEpoch || last && w != Never }

// single is the binary32 number nearest to a hyper-parameter.
func single(x float64) float64 { return float64(float32(x)) }

// Everything is the arm in which every point of a network of n layers is p, sums
// are sequential and the product is rounded before it is added. Everything with
// binary32, nearest-even, is the baseline.
func Everything(p quant.Point, layers, states int) Arm {
	sums := quant.Accumulate{Product: &p, Sum: p}
	set := Arithmetic{
		Weight: p, Activation: p, Forward: sums,
		InputGradient:  Backward{Sums: sums, Result: p},
		WeightGradient: Backward{Sums: sums, Result: p},
		Step:           p, Master: p,
	}
	for range states {
		set.States = append(set.States, p)
	}
	arm := Arm{Input: p, LossGradient: p}
	for range layers {
		arm.Layers = append(arm.Layers, set)
	}
	return arm
}
