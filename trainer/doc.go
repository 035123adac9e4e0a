// Package trainer trains small networks with emulated arithmetic: every value
// that a training step computes passes a rounding point, and every rounding point
// is set separately. Package quant does the arithmetic; this package says which
// operation happens where, in which order, on which random bits. The rules below
// determine every bit of an outcome: two programs that follow them agree.
//
// R[p](x) is the rounding of the exact real x at point p. Everything is binary64
// unless a point says otherwise; no operation is fused except where a product is
// said to be exact.
//
// # Rounding points
//
//	input                       an example entering the network; each channel may
//	                            have a point of its own, see channels.go
//	forward.weight              the working copy of weights and biases
//	forward.product .sum .outer inside the sums of the forward pass
//	forward.activation          the output of a layer
//	loss.gradient               the output error
//	input_gradient.weight       operand weight; unset: the working copy
//	input_gradient.gradient     operand gradient; unset: the gradient as stored
//	input_gradient.product .sum .outer
//	input_gradient.result       the gradient of the layer's input, as stored
//	weight_gradient.activation  operand activation; unset: that of the forward product
//	weight_gradient.gradient    operand gradient; unset: the gradient as stored
//	weight_gradient.product .sum .outer
//	weight_gradient.result      the gradients of weight and bias
//	weight_gradient.residue     what that rounding leaves, added to the next step's
//	                            gradient; unset: it is lost. See residue.go
//	update.state .step .master  see Update
//	forward.statistic           sums of a normalisation; unset: the forward points
//	forward.moment              mean, variance, inverse deviation, running
//	                            statistics; unset: forward.activation
//	input_gradient.statistic    sums of its input gradient; unset: that phase's points
//	forward.operand             operand activation of the forward product; unset: the
//	                            layer's input as stored
//
// A set operand is R of the stored tensor: of the master for a weight, of the
// layer's input for an activation, of the result (or output error) for a
// gradient. A bias is a parameter like a weight, at the same points. Every layer
// that computes an output rounds it, ReLU and max-pool too; flatten computes
// nothing. A gradient that passes a layer without arithmetic is not rounded
// again. The lowest layer with parameters forms no input gradient.
//
// # Shared scales
//
// Blocks and scaled integers (quant.Blocked) are formats of operands: forward.weight,
// forward.operand, input_gradient.weight and .gradient, weight_gradient.activation and
// .gradient may have one, all other points are scalar. Such an operand is R of the
// stored tensor for its own product, along axes [outer, axis, inner] of that tensor:
//
//	forward.weight              unit, input channel, kernel position
//	forward.operand             group, input channel, position: an example is a tensor
//	input_gradient.weight       group, unit, input channel and kernel position
//	input_gradient.gradient     sample and group, unit, position
//	weight_gradient.activation  1, sample, channel and position
//	weight_gradient.gradient    1, sample, unit and position
//
// channels and units being those of a group; tensors that share a scale are the whole
// mini-batch in the gradients, but each example by itself forward, so that no answer
// depends on the batch. An unset operand of a gradient product is not the forward copy
// then but R at the forward point along its own axes, with the random words of its
// own operation. Factors multiply finished sums, before the bias: quant.Product.Scale,
// left out of a product in which all factors are 1. Scales per channel belong to rows
// of left-hand operands: units in forward.weight and weight_gradient.gradient, input
// channels in input_gradient.weight. Random words count elements row-major in the
// tensor; under scales per channel the two backward ones count row by row: unit,
// sample, position and group, input channel, unit, kernel position. Biases and the
// parameters of normalisations are no operands of products: forward.weight leaves
// them as the master is, and the gradient of a bias sums the gradient as stored.
// Requantising takes memory in every step.
//
// # Sums
//
// Every sum of products is one element of C[i,j] = sum over k of A[i,k] B[k,j],
// the filter side on the left:
//
//	phase            i              j                      k, ascending
//	forward          unit           sample, position       input channel, kernel row, kernel column
//	input gradient   input channel  sample, input position unit, kernel row, kernel column
//	weight gradient  unit           input channel, kernel  sample, output position
//	                                row, kernel column
//
// In a dense layer every input is a channel of one position. Where a convolution's
// channels fall into groups there is one such product a group, and i, the input
// channel and k count within it. k counts the full
// enumeration; terms that meet padding, or fall between the strides, are skipped:
// they add nothing and draw nothing. The bias is added to the finished forward
// sum at outer, else sum. The gradient of a bias is a sum of its own over sample,
// output position, of the same operand as the weight's gradient, without
// products. The weight gradient runs over the whole mini-batch in one sum.
//
// Average pools, and overlapping pools in their input gradients, sum terms
// without products; there j is the element's number in the result and i is 0. A
// window's inputs ascend row by row; the windows over an input ascend by output,
// and k counts them from the first that could reach it. See the layers' own
// comments.
//
// # Elementwise layers
//
// ReLU and max-pool choose; the others compute y = R[forward.activation](...) and
// dx = R[input_gradient.result](...) of every element, one rounding each: leaky
// ReLU and dropout exact products, smooth activations binary64 values of package
// elementary (their comments state the formulas). Dropout leaves evaluations alone
// and draws its masks from a stream that arms share.
//
// # Layers of several products
//
// Attention and recurrent layers form several products at the points above; products of
// two activations are the input gradient's where they make gradients of activations.
// Their orders of sums and their roundings stand at attentionKind, recurrentKind,
// elmanCell and gruCell. As lowest layers they form what they need of the input
// gradient's points for themselves. Parts of a layer count operations and elements each
// for itself; every part but number 0 draws its words, those of its initial weights
// included, from a key of its own (see place).
//
// # Normalisations and joins
//
// Batch and layer normalisation sum, divide, subtract and scale one rounding at a
// time: standard lists the lines, batchNormKind the running statistics that
// evaluations use and that are recorded like parameters. A skipped step leaves them
// alone. A residual block adds its input to its output at the forward sum point; the
// two gradients of its input join in the input gradient's sum point, the one that
// comes from the lower layer first; see residualKind.
//
// # Augmentation
//
// Training examples may be shifted and made noisy, anew in every epoch and alike in
// all arms; see Augment. Training losses and accuracies are of the altered examples.
//
// # Loss
//
// The monitored loss of a step is the binary64 mean, over the examples in order,
// of the losses of the rounded outputs; it never feeds training. The output error
// is R[loss.gradient](((softmax - target)/B) S): quotient and product are rounded
// to binary64, B is the number of examples in this batch (the last one of an
// epoch may be short) and S the loss scale. Exponential and logarithm are package
// elementary's, classes ascend. Label smoothing moves the target; the losses of
// regressions, half the squared distance and Huber's, have slopes of their own in
// place of softmax - target: see crossEntropy, squaredError, huber. With m the
// largest of the outputs y, e[c] = exp(y[c] - m) and z their sum, softmax is e[c]/z,
// from which the target is subtracted, and the loss log(z) - (y[label] - m).
//
// # Update
//
// g' = g/S, a binary64 quotient. Then, for every parameter, weight before bias,
// from the lowest layer up, the optimizer's formula, here that of sgd:
//
//	u      = R[update.state](momentum v)        with momentum only
//	v      = R[update.state](u + g')            with momentum only
//	step   = R[update.step](rate v)             without momentum: of rate g'
//	master = R[update.master](master - step)
//	weight = R[forward.weight](master)          the working copy, once an update
//
// Products, sums and differences are exact before they are rounded. Other
// optimizers, weight decay, clipping and compensated updates are written out at
// nesterovKind, adamKind and mover. Learning rate, its factor, the other
// hyper-parameters and the loss scale are the binary32 numbers nearest to their
// decimals; the learning rate of an epoch is the start times the factor, one
// binary32 product for each fall so far; warm-up and cosine: see Schedule.at. States
// start at +0. Without a master copy update.master is what forward.weight is: the
// working copy then equals the master, since a value of a format never moves.
//
// # Stages
//
// An arm may change its arithmetic on the way, at the start of an epoch or of a step.
// Stored tensors are then rounded at their new points: see Stage.
//
// # Loss scale
//
// None: S = 1. Fixed: S is what it is. Dynamic: if in a step an overflow, a
// saturation or a NaN is counted at loss.gradient or at any point of the gradient
// phases but their first operands, or a parameter's gradient is not finite, the
// step changes no parameter and no state, and S is multiplied by CutBy; after
// RaiseAfter clean steps running S is multiplied by RaiseBy and the count starts
// over. S stays a positive finite binary32 number: a change that would leave them
// is not made.
//
// # Random words
//
// All words of a run come from keys derived from the replicate's seed alone, so
// arms share them. Groups of channels after the first draw the words inside their
// sums from a key of their own, because rows count within a group; see pass.group.
// Masks of dropout are a stream beside those of rounding; see dropoutKind. A word's address is (element, step, site, phase). step counts
// training steps from 1; the start (master, working copy) is step 0. site is
// (layer index + 1) 256 + operation, 0 in place of layer index + 1 for the
// network's input and output error; see the table of operations below. phase is 0 in training, 1 in evaluations of the
// validation set, 2 of the test set; step is then the epoch, the first is 1. phase is 3
// where a stage starts, step its first one.
// Element is the row-major number in the tensor [batch, shape...] or in the
// parameter; in an evaluation the batch is the whole set, so that no word
// depends on how the set is cut. Rows of sums count i, columns j, likewise over
// the whole set.
//
// Operations; where two numbers stand, the first is that of the rows of a sum and
// the second that of its columns. On tensors of a layer:
//
//	1   input                              8    input_gradient.gradient
//	2   loss.gradient                      9,10   input_gradient.product
//	3   forward.activation                 11,12  input_gradient.sum
//	4,5 forward.product          13   input_gradient.result
//	6,7 forward.sum              14   weight_gradient.activation
//	                                       15   weight_gradient.gradient
//	16 to 45: normalisations, see the layer   46   forward.operand
//	47 to 63: recurrent and attention layers, see their lists of operations
//
// On parameter p of a layer, 0 the weight and 1 the bias, 64 (p + 1) plus:
//
//	0   forward.weight                     8    update.master
//	1   input_gradient.weight              9,10   Nesterov's product and sum, Adam's numerator
//	2,3 weight_gradient.product            11,12  Adam's root and its sum
//	4,5 weight_gradient.sum                13   Adam's ratio
//	6   weight_gradient.result             14,15  weight decay: product, sum
//	7   update.step                        16 + 4 s + n: operation n on state tensor s
//	48  weight_gradient.residue            49     the same, when S has changed
//
// Initial weights are normal with mean 0 and variance gain/fan-in, drawn in
// binary64: word stream of weights, step 0, the site of the parameter's working
// copy, element by element. gain is 2 where a ReLU follows before the next layer
// with weights, 2/(1 + slope^2) where a leaky one does, else 1, and 1 in layers of
// several products. Biases start at zero. Then master = R[update.master] and
// the working copy is made. A shuffled epoch is a Fisher-Yates permutation of its
// own, from the identity downwards: place i is exchanged with place floor(x (i+1) /
// 2^64), x being the words 2i (high half) and 2i+1 of the stream of orders at step
// = epoch, site 0, phase 0.
//
// # Scores
//
// The answer is the lowest index of the largest output; an example with a NaN
// output is wrong and has no answer; shared largest outputs are counted as ties.
// An epoch's training loss is the mean of its steps' losses weighted by batch
// size; its training accuracy is taken from the same outputs. A regression has no
// answers but the root of the mean squared distance. Class 0 is the sound state
// where faults are counted that raised no alarm, at every number of false alarms up
// to a fifth of the sound examples: see Scores.MissedFaults.
//
// A run has diverged when a step's loss or, after an update, a master is not
// finite; when the loss of an epoch is over 3 times the first step's for 2 epochs
// running; or when 10 steps running were skipped. It stops there, the sets due
// after the last epoch are evaluated, and it is scored as it stands. A run that
// did not diverge has stalled when its last training loss is over 95 % of the
// entropy of the training labels, the least loss of a predictor that ignores its
// input; in a regression, of the loss of always answering with the mean target.
//
// # Counters
//
// Range events are counted at every point over all training steps, skipped ones
// included; evaluations are not counted. Additions at an outer point count with
// the sum they belong to; the gradient of a bias with weight_gradient.sum.
//
// # Diagnostics
//
// A job may ask to be looked at (Diagnostics): values before and after they are
// rounded at stored points, some sums against the exact sums of their operands,
// what masters moved by against the steps they were to take, gradients against those
// of binary64 on the same masters, batch and masks. Looking reads only: a run has
// the same bits with and without. Findings are no part of what is compared or
// counted; what they mean stands at their types.
//
// # Memory
//
// Tensors are float32 where every value of every point fits binary32, else
// float64. The choice is a matter of memory: it changes no bit. A step allocates
// nothing.
package trainer
