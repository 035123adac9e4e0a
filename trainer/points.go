package trainer

import "ulpine/quant"

// PointID names a rounding point of the training step.
type PointID uint8

// The rounding points, in the order of computation.
const (
	Input PointID = iota
	ForwardWeight
	ForwardActivation
	ForwardProduct
	ForwardSum
	ForwardOuter
	LossGradient
	InputGradientWeight
	InputGradientGradient
	InputGradientProduct
	InputGradientSum
	InputGradientOuter
	InputGradientResult
	WeightGradientActivation
	WeightGradientGradient
	WeightGradientProduct
	WeightGradientSum
	WeightGradientOuter
	WeightGradientResult
	UpdateState
	UpdateStep
	UpdateMaster

	// The points of normalisations, in numbers behind the others'.
	ForwardStatistic       // the sums of mean and variance
	ForwardMoment          // mean, variance, inverse deviation, running statistics
	InputGradientStatistic // the sums in the gradient of the input

	ForwardOperand // the layer's input as operand of the forward product

	WeightGradientResidue // what rounding a parameter's gradient leaves

	pointCount int = iota
)

// pointNames are the names plans, records and reports use.
var pointNames = [pointCount]string{
	Input:                    "input",
	ForwardWeight:            "forward.weight",
	ForwardActivation:        "forward.activation",
	ForwardProduct:           "forward.product",
	ForwardSum:               "forward.sum",
	ForwardOuter:             "forward.outer",
	LossGradient:             "loss.gradient",
	InputGradientWeight:      "input_gradient.weight",
	InputGradientGradient:    "input_gradient.gradient",
	InputGradientProduct:     "input_gradient.product",
	InputGradientSum:         "input_gradient.sum",
	InputGradientOuter:       "input_gradient.outer",
	InputGradientResult:      "input_gradient.result",
	WeightGradientActivation: "weight_gradient.activation",
	WeightGradientGradient:   "weight_gradient.gradient",
	WeightGradientProduct:    "weight_gradient.product",
	WeightGradientSum:        "weight_gradient.sum",
	WeightGradientOuter:      "weight_gradient.outer",
	WeightGradientResult:     "weight_gradient.result",
	UpdateState:              "update.state",
	UpdateStep:               "update.step",
	UpdateMaster:             "update.master",
	ForwardStatistic:         "forward.statistic",
	ForwardMoment:            "forward.moment",
	InputGradientStatistic:   "input_gradient.statistic",
	ForwardOperand:           "forward.operand",
	WeightGradientResidue:    "weight_gradient.residue",
}

// String is the name plans use: "forward.sum".
func (p PointID) String() string {
	if int(p) >= pointCount {
		return "unknown point"
	}
	return pointNames[p]
}

// PointNames lists every rounding point in the order of their numbers; the points that
// only some layers have stand last.
func PointNames() []string { return append([]string(nil), pointNames[:]...) }

// The points of one phase, as a layer that has the phase lists them.
var (
	forwardSums = []PointID{ForwardSum, ForwardOuter}
	inputSums   = []PointID{InputGradientSum, InputGradientOuter}

	// parameterPoints are all the points of a layer of products with weights.
	parameterPoints = []PointID{
		ForwardWeight, ForwardActivation, ForwardProduct, ForwardSum, ForwardOuter,
		InputGradientWeight, InputGradientGradient, InputGradientProduct, InputGradientSum,
		InputGradientOuter, InputGradientResult,
		WeightGradientActivation, WeightGradientGradient, WeightGradientProduct,
		WeightGradientSum, WeightGradientOuter, WeightGradientResult, WeightGradientResidue,
		UpdateState, UpdateStep, UpdateMaster,
	}

	// productPoints are those of a dense layer or a convolution.
	productPoints = append(append([]PointID{}, parameterPoints...), ForwardOperand)

	// gradientPoints are the points at which gradients live: a range event at
	// one of them is what a dynamic loss scale watches for.
	gradientPoints = []PointID{
		LossGradient,
		InputGradientGradient, InputGradientProduct, InputGradientSum, InputGradientOuter, InputGradientResult,
		WeightGradientGradient, WeightGradientProduct, WeightGradientSum, WeightGradientOuter, WeightGradientResult, WeightGradientResidue,
		InputGradientStatistic,
	}
)

// inputGradient reports whether the point belongs to the input gradient, which
// layers with no parameters below them never form.
func (p PointID) inputGradient() bool {
	return p >= InputGradientWeight && p <= InputGradientResult || p == InputGradientStatistic
}

// An operation is the low byte of Draws.Site: every operation that may draw
// random words has a number of its own, and a product or a sum has two, one for
// the table of its rows and one for that of its columns. These numbers fix the
// bits of every stochastic arm: changing one raises the arithmetic version.
type operation uint32

// Operations on tensors of a layer.
const (
	opInput           operation = 1
	opLossGradient    operation = 2
	opActivation      operation = 3
	opForwardProduct  operation = 4 // and 5
	opForwardSum      operation = 6 // and 7
	opInputOperand    operation = 8 // the gradient as operand of the input gradient
	opInputProduct    operation = 9 // and 10
	opInputSum        operation = 11
	opInputResult     operation = 13
	opActivationAgain operation = 14 // the activation as operand of the weight gradient
	opWeightOperand   operation = 15 // the gradient as operand of the weight gradient
)

// Operations of normalisations, beside those of their weights; see standard.
const (
	opMeanSum        operation = 16 // and 17
	opMean           operation = 18
	opDeviation      operation = 19
	opSquare         operation = 20 // and 21
	opSquareSum      operation = 22 // and 23
	opVariance       operation = 24
	opInverse        operation = 25
	opNormal         operation = 26
	opUnbiased       operation = 27
	opFollowMean     operation = 28 // to 30
	opFollowVariance operation = 31 // to 33
	opBackSum        operation = 34 // and 35
	opBackMean       operation = 36
	opCentre         operation = 37
	opDot            operation = 38 // and 39
	opDotSum         operation = 40 // and 41
	opBackDot        operation = 42
	opShare          operation = 43
	opRest           operation = 44
	opNormalResult   operation = 45
)

// opForwardOperand is the activation as operand of the forward product.
const opForwardOperand operation = 46

// Operations of recurrent layers, beside those of their sums.
const (
	opStateJoin   operation = 47 // and 48: gradients of one state
	opStateJoined operation = 49
	opStateResult operation = 50
	opSlope       operation = 51
	opKept        operation = 52 // these and the following: cells with gates
	opApart       operation = 53
	opShift       operation = 54
	opNewState    operation = 55
	opUpdateBack  operation = 56
	opStateShare  operation = 57
	opNewBack     operation = 58
	opResetBack   operation = 59
	opKeptBack    operation = 60
	opInputJoin   operation = 61 // and 62: gradients of one input
	opInputJoined operation = 63
)

// Operations of attention layers, beside those of their products.
const (
	opScore       operation = 47
	opNumerator   operation = 48
	opTotal       operation = 49 // and 50
	opProbability operation = 51
	opAgree       operation = 52 // and 53
	opAgreeSum    operation = 54 // and 55
	opUnlike      operation = 56
	opWeighted    operation = 57
	opUnscaled    operation = 58
)

// Operations on parameter number p of a layer add 64 (p + 1).
const (
	opWorking        operation = 0
	opWeightAgain    operation = 1 // the weight as operand of the input gradient
	opWeightProduct  operation = 2 // and 3
	opWeightSum      operation = 4 // and 5
	opWeightResult   operation = 6
	opStep           operation = 7
	opMaster         operation = 8
	opAhead          operation = 9 // Nesterov's product, Adam's numerator
	opAheadSum       operation = 10
	opRoot           operation = 11 // Adam's root
	opRootSum        operation = 12
	opRatio          operation = 13
	opDecay          operation = 14 // of weights
	opDecaySum       operation = 15
	opState          operation = 16 // + 4 s + n for operation n on state tensor s
	opResidue        operation = 48
	opResidueScale   operation = 49
	opParameterBlock operation = 64
)

// of numbers an operation on parameter p (0 weight, 1 bias).
func (o operation) of(p int) operation { return opParameterBlock*operation(p+1) + o }

// Phases of Draws: no evaluation shares a word with the training or with the
// evaluation of another split.
const (
	phaseTraining   = 0
	phaseValidation = 1
	phaseTest       = 2
)

// site is the address of an operation: layer index + 1, because 0 is the
// network's input and loss.
func site(layer int, o operation) uint32 { return uint32(layer+1)<<8 | uint32(o) }

// streams are the two tables of random bits of an operation inside sums.
func streams(d quant.Draws) quant.Streams {
	column := d
	column.Site++
	return quant.Streams{Row: d, Column: column}
}
