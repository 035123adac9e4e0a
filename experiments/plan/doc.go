// Package plan is the plan language: it reads a TOML file, checks it, and
// resolves it into a Plan in which nothing is left to a default. It is the only
// package that knows TOML.
//
// # Tables
//
//	title, question     texts for the report
//	include             another file, or an array of them, relative to the file
//	                    that includes it; merged first, the plan's own keys win
//	[task]              data and the keys of that data set (package datasets); a
//	                    relative path starts at the folder of the file with data
//	[network]           layers, one text each
//	[training]          optimizer, learning_rate, batch, epochs, loss, shuffle,
//	                    augment, evaluate, diagnostics, predictions
//	[pretrain]          task and training: what differs from the plan's own ones in
//	                    a training that is done first, once a replicate, under the
//	                    baseline's arithmetic, and from whose weights every arm starts
//	[start]             parameters that every arm, the baseline included, starts from in
//	                    every replicate: file, an NPZ archive, and part, "final" (default)
//	                    or "initial"; or store and run, "arm/replicate", whose final ones
//	                    are taken. Names and shapes must be the network's; their values
//	                    are part of the keys of runs. Not beside [pretrain]
//	[replicates]        count, first_seed; in place of count, up_to and look_every: a
//	                    look after every so many ends the plan once all is decided
//	[claim]             metric (also "epochs to test accuracy 0.9"), margin, confidence;
//	                    class, of a recall; false_alarm_rate, of a missed-fault rate
//	[tuning]            learning_rate, loss_scale: arrays of values that every arm tries,
//	                    each with each; metric, replicates, first_seed (see Tuning)
//	[format.NAME]       a number format of the plan's own: exponent, fraction, bias,
//	                    subnormals, top; or values, the list of all there are
//	[baseline]          settings of the arm that all others are compared with
//	[[arm]]             name, settings, loss_scale; training: what differs from the
//	                    plan's own optimizer, learning_rate, batch, epochs;
//	                    learning_rate is short for training.learning_rate
//	[[arm.layer]]       select, settings: what differs in some layers; [[baseline.layer]]
//	[[arm.stage]]       from_epoch or from_step, settings, loss_scale, layer tables: what
//	                    the arm changes to from then on
//	[[grid]]            title, name, axis, contrast, and all that an arm may have:
//	                    arms that differ along axes
//	[controls]          fp64, pairwise: the baseline again in binary64 and with pairwise
//	                    sums, both unless told otherwise; their differences from it
//	                    are the noise floor, they are no arms and get no verdict
//	[[contrast]]        arm, against, margin: two arms to compare with each other
//
// Tables of an included file and of the plan merge key by key. A text, a number,
// an array or an inline table { ... } is a value and is replaced whole. Arrays of
// tables are joined, the included ones first; an arm of the plan with the name of
// an included one takes its place.
//
// # Training
//
//	optimizer      a kind (sgd, nesterov, adam, adamw) or a table: kind, momentum;
//	               beta1, beta2, epsilon, epsilon_inside; weight_decay, decoupled;
//	               clip_norm; compensated = true keeps what masters round off in a
//	               further state
//	loss           a kind (cross-entropy, mean-squared-error, huber) or a table: kind;
//	               label_smoothing of cross-entropy, width of huber
//	learning_rate  a number or a table: start; multiply, at_epochs; or cosine = true,
//	               end; warm_up: steps over which it rises first
//	augment        a table: shift, places; noise, standard deviation in units of the
//	               scaled inputs: what is done to training examples, anew in every
//	               epoch and alike in all arms; a pretraining that says nothing of its
//	               own does the same
//	diagnostics    sampled (default), none, or a table: how often runs are looked at
//	               closer while they train, which changes none of their bits; the
//	               plan's alone. every: steps between looks at tensors, sums and
//	               updates; gradient: steps between comparisons of gradients with
//	               those of binary64; values of a tensor, sums of a product. No epoch
//	               goes without either, but that "sampled" compares gradients of short
//	               epochs in some of them only
//	predictions    stored (default) or none: whether runs keep what they say of every
//	               test example after the last epoch, for intervals over examples;
//	               changes no bit either; the plan's alone
//
// # Tuning
//
// [tuning] answers whether every arm was tuned as hard as the baseline: all try the
// same values of the start of their learning rate (its schedule keeps its shape) and
// of their loss scale, on the same replicates, whose seeds are none of the reported
// ones, and each is given the pair with the best mean of a metric of validation data;
// of equal pairs the first, loss scales varying fastest. A run that diverges counts as
// worse than any that does not, so the fewest diverged runs come first. The test data
// is not looked at. A pretraining is not tuned, controls train as the baseline does.
//
// # Metrics
//
// Accuracy, loss and, in a regression, RMSE, of test, validation or training data; of
// test and validation data also the recall of one class, named by class, and the
// missed-fault rate: the share of faults, all classes but the first, that raise no alarm
// where at most false_alarm_rate of the examples of the first class, the sound state,
// raise one. The threshold is that of the set which is scored, at each evaluation.
//
// # Settings
//
// The rounding points are those of package trainer: input, forward.weight, ...,
// update.master. Each is a key of an arm. Shorthands set several:
//
//	everything               all points, the operands of gradient products included
//	storage                  all points at which a tensor is stored or taken, but for
//	                         forward.operand
//	accumulate               the three sums, their order and outer sums; never products
//	input_gradient.operand   input_gradient.weight and input_gradient.gradient
//	weight_gradient.operand  weight_gradient.activation and weight_gradient.gradient
//
// A setting is a format's word, "exact" at a product point, or a table:
//
//	format       a word; the table says no more than it holds: what it leaves out
//	             has its default, not what a broader setting says
//	rounding     nearest-even (default), nearest-away, toward-zero, up, down,
//	             to-odd, stochastic
//	random_bits  of stochastic rounding: 1 to 32, within sums to 16; default 16
//	variant      of stochastic rounding: truncated (default), centred, centred-even,
//	             equal (up and down alike)
//	share        of stochastic rounding: so many lanes take one draw
//	register     of stochastic rounding: draws of a shift register of 4 to 16 bits
//	overflow     infinity, saturate, nan; default: the format's own
//	subnormals   false: results below the least normal value become zero
//	bias, top    another exponent bias or layout of the top exponent
//	width        bits in all, checked against the format
//	range, bits  in place of format: the codes of a converter of so many bits from one
//	             number to below another, range = [-40, 85], bits = 12 (quant.ADC)
//	order        of sums: sequential (default), pairwise, wide, compensated, chunk(64),
//	             lanes(8), aligned(8,24)
//	outer        of sums: where finished chunks and the bias are added; default:
//	             as the sum
//	through      of sums: "binary32", an adder that first rounds to binary32
//
// forward.statistic and input_gradient.statistic are the sums of a normalisation,
// with order, outer and through of their own; forward.moment is what is made of them.
// Only their own keys set them: unset, they are as the sums and activations of their
// phase, so shorthands reach them through those.
//
// input also takes an array of tables with settings for some channels of the input each:
// channels = [1, 2], the first being 1, or without channels for all others. Every
// channel needs one setting. A channel is an index of the first axis of an example; in
// flat data every value is one.
//
// weight_gradient.residue is error feedback: what rounding a parameter's gradient to its
// result takes away is kept in this format and added to the next step's gradient before
// that is rounded. Only its own key sets it; unset, it is lost.
//
// Formats whose values share scales, blocks (MXFP8) and scaled integers (INT8), are
// settings of the operands of products: forward.weight, forward.operand, and the
// operands of the gradient products. forward.operand is the layer's input as the
// forward product sees it; only its own key sets it, unset it is as stored. An unset
// operand of a gradient product is taken from the stored tensor again.
//
// update.state also takes an array, a setting for each state tensor in the order of
// the optimizer's formula: velocity; first and second moment; last the compensation,
// if it is asked for.
//
// # Layers
//
// select says which layers an [[arm.layer]] is for, one selector or an array:
//
//	"conv1d"    all layers of a kind
//	"dense 16"  all layers of a name, as the plan or as resolve spells it
//	"first"     the first layer that has weights; "last": the last one
//	3           a layer's number, as resolve prints it: the first is 1
//
// A selector that selects nothing is an error, and so is a point's own key where
// no selected layer computes with that point; shorthands set what there is.
//
// # Stages
//
// An [[arm.stage]] (in a grid: [[grid.stage]]) changes settings in the middle of a
// training, from an epoch (the first is 1) or a step on: train low, finish high. It
// starts from what held before it and beats all of that, however specific; what it
// does not set stays as it was. Stages stand in the order of their starts. What
// happens to stored tensors at a start is package trainer's Stage.
//
// # Grids
//
// A [[grid]] is an arm with placeholders, and axes of values for them:
//
//	[[grid]]
//	name = "{split} {rounding}"
//	axis.split = { splits = 9 }
//	axis.rounding = ["nearest-even", "stochastic"]
//	storage = { format = "{split}", rounding = "{rounding}" }
//	contrast = { axis = "rounding", against = "nearest-even" }
//
// It stands for one arm at each place, the last axis varying fastest. An axis is
// an array of values; { from, to, step } or { from, to, times }: numbers a step or
// a factor apart; or { splits = 9 }, or of several totals { splits = [8, 9] }: all
// EeMm of so many bits, E from 2 to 8, as the words are read everywhere (E4M3 is
// OCP's). A text that is nothing but {axis} becomes the value, whatever its
// kind; within a text ("E8M{m}", "chunk({k})") and in a key ("{point}") the value's
// text is put. A value that is a table has a name, which is its text and no part
// of the value. The name must tell the values of every axis apart, and every axis
// must be used. contrast compares, along one axis, every value with one of them.
// A plan has at most 1000 arms.
//
// # Which setting holds
//
// The more specific one, wherever it stands. One for some layers beats one for
// all, and among those for some a number beats first and last, which beat a name,
// which beats a kind. Among equals: everything, then storage and accumulate, then
// a point's own key. Operand is as specific as the two keys it
// stands for. Two equally specific settings on one point are an error. Points
// that an arm does not set are as in the baseline, and those that the baseline
// does not set are binary32, nearest-even, sequential, products rounded. Two
// kinds of points can also be unset: an operand of a gradient product then reuses
// the forward working copy or the stored tensor, an outer sum is done as the sum.
// An arm inherits an operand from the baseline only if the baseline sets it by
// its own key. An operand whose rounding cannot change a value, because the
// tensor it is taken from has that format already, is resolved to a reused one:
// arms that compute the same bits have the same canonical text.
//
// # Cost tables
//
// A machine's and an energy table are files of their own, read by the same
// reader with the same errors; what their figures must be like is the cost
// model's to say, and a table knows the line of each field for it:
//
//	[machine]              name, date, source, bandwidth (bytes a second), cache
//	                       (bytes), elementwise, random_bits (a second), absent
//	[[machine.rate]]       operands, sum, multiply_adds (a second), source
//	[[machine.format]]     name, family, bits, exponent, fraction, block,
//	                       scale_bits, tensor_bits
//	[energy]               name, date, source, process, memory_per_64_bits,
//	                       random_bit, uses_per_read, notes (picojoules)
//	[[energy.operation]]   format, multiply, add, source
//	[[energy.cache]]       bytes, per_64_bits, source
//	[[energy.format]]      as of a machine
//
// # Errors and warnings
//
// What is wrong with a plan is a *PlanError, or Errors for several: file, line,
// key, reason, remedy, one line each. The TOML decoder yields no places of
// values, so package plan scans the text for them. Warnings are doubts about a
// plan that is allowed; they travel with the results into the report.
package plan
