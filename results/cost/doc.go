// Package cost says what an arithmetic would cost on hardware that has it: bits
// a value, bytes moved, memory needed, time and energy, for every arm and from
// the shapes and formats alone. Nothing is trained and nothing measured; each
// figure is a model's, and carries the model, its source, and whether a row of
// a table had to be extrapolated for it.
//
// # What is counted
//
// A training step of a mini-batch of B examples has four phases: forward, input
// gradient, weight gradient and update; an inference is a forward phase of its
// own batch (usually one example). A phase of a layer touches these tensors, in
// numbers of values, where the layer has W weights and b biases, n values come
// in and m go out for one example:
//
//	forward          reads W + b working weights and B n activations,
//	                 writes B m activations
//	input gradient   reads W working weights and B m gradients, writes B n
//	                 gradients; layers that need their input again (ReLU, max
//	                 pool) read B n activations. A layer with no parameters below
//	                 it has no such phase.
//	weight gradient  reads B n activations and B m gradients, writes W + b
//	                 gradients; where residues are kept (error feedback), reads and
//	                 writes as many of them, counted as optimizer state
//	update           reads W + b gradients; reads and writes as many values of
//	                 each optimizer state and of the master copy; writes the
//	                 working weights. Where working weights and master copy have
//	                 one format they are one tensor, counted as weights.
//	loss             reads B m activations of the last layer (forward) and writes
//	                 as many gradients (input gradient)
//
// An arm that changes its arithmetic on the way is billed by Mean: a step's figures are
// means over its steps, by the number of steps that each stage takes.
//
// Layers are not fused: each reads what the one below wrote. A layer that only
// changes the shape moves nothing. Values are packed without gaps: nine bits
// take nine bits. A stored tensor moves in the format it is stored in; a product
// whose operand has another format converts it on the way, at no cost but that
// of the random bits. The gradient products take over the operands of the forward
// product, and round those whose blocks of shared scales run along another axis
// anew: weights from the master copy.
//
// # Bits a value
//
// A format with a scale for every block of k values takes its code's bits plus
// scale bits / k. A tensor takes the scales that it really needs: blocks run
// along the reduction axis and the last one of a row may be short, so that six
// channels under blocks of 32 take one whole scale for six values.
//
// # Reuse models
//
// Once: each tensor above is read or written once a phase. It is the least that
// a cold cache allows, reached when the cache holds the smaller operand.
//
// Tiled: the products run in blocks through a cache of Z bytes, by the cheapest
// of three loops: an i x j block of the result stays in the cache while columns
// and rows of the operands stream past it, or a block of either operand stays
// while partial sums stream. With an I x K and a K x J operand the first reads
// the left operand ceil(J/j) times and the right one ceil(I/i) times, where i j
// sums, i left and j right values fit in Z; square blocks give the order of
// 2 I J K / sqrt(Z) values, which no order of the multiply-adds can beat by more
// than a constant factor (Hong and Kung, I/O complexity: the red-blue pebble
// game, STOC 1981; from memory). Z is all for the one product, and nothing stays
// in it from phase to phase. A convolution is the product of its kernels with
// its patches; one reading of all patches costs one reading of the input.
//
// # Time
//
// A roofline (Williams, Waterman and Patterson, Communications of the ACM 52(4),
// 2009; from memory): a phase of a layer takes the longest of its arithmetic at
// the peak rate of its formats, its traffic at the memory's bandwidth and, where
// the machine states a rate, the drawing of its random bits; phases follow one
// another. The side that takes longest binds. Peaks are never reached, so times
// are lower bounds; ratios are better than times.
//
// A machine's table has peak rates for pairs of an operand and a sum format. An
// arm's product runs at the rate of its own pair if the table has it, else at
// the fastest rate among the pairs that hold its formats value for value, which
// is how a machine without the format would compute; if no pair holds them, at
// the widest pair's rate times its width over theirs. Both are marked
// extrapolated. A table with absent = "width" asks what a machine with the
// format might reach: the rate found is multiplied by the width of the row over
// the width of the format.
//
// # Energy
//
// Multiplications, additions, random bits, operand reads from the nearest cache,
// and every moved bit once through the largest listed cache and once to main
// memory, each at the energy of the table. Rows the table lacks are extrapolated:
// a multiplier's energy follows the product of its operands' significand widths,
// an adder's the width of its significand (integers: all bits), on a straight
// line between listed rows and in proportion beyond them (common practice: an
// array multiplier has p_a p_b cells, an adder p). The default table allows one
// check of the rule: from its binary16 rows it predicts 0.87 pJ for a binary32
// addition (listed: 0.9) and 5.2 pJ for a multiplication (listed: 3.7), so read
// extrapolated multiplications as good to a factor of two at best.
//
// Not charged anywhere: control, instruction fetch, leakage, idle time,
// communication between machines, comparisons, and the exponentials and
// logarithms of the loss.
package cost
