// Package quant is the arithmetic of Ulpine: number formats, rounding, the random
// bits of stochastic rounding, elementwise operations, sums and products of
// matrices in which every product and every partial sum is rounded. Each emulated
// operation equals the rounding of the exact real result.
//
// # Where things are
//
//	point.go       the words: Format, Rounding, Overflow, Point, Order, Accumulate
//	real.go        exact reals of 128 bits and a sticky rest
//	float.go       the floating-point family; names.go its names and the table of
//	               all families; options.go what stands in parentheses
//	fixed.go       Qi.f and UQi.f; posit.go; logarithmic.go; draft.go the 8-bit
//	               formats of a draft standard; scale.go E8M0; table.go code books
//	gap.go         places in gaps that are no powers of two
//	round.go       all rounding decisions: Point.Round, the scalar reference
//	quick.go       the same on numbers held in binary64; block.go, slice.go elementwise
//	source.go      the words of stochastic rounding, shared draws and registers
//	odd.go         which points round numbers folded to odd exactly
//	tensor.go      formats with scales shared along an axis: shared.go blocks (their
//	               names in shared_names.go), integer.go integers under a scale
//	product.go     the operands of a product of matrices
//	reference.go   sums in exact reals, one result at a time: the definition;
//	               compensated.go, aligned.go two orders that only it knows
//	multiplier.go  the choice of path, each bit-equal to the reference: fast.go hands
//	               products to internal/kernel; mul.go forms blocks of columns, in
//	               the machine's own arithmetic (native.go) or in steps of binary64
//	               (engine.go, adds.go, orders.go, tables.go; wide.go,
//	               exactwide.go)
//	share.go       parts of products for goroutines that have nothing else to do
//	text.go        words to and from plans
//	random/        counter-based random words
//	elementary/    the project's own exp and log
//
// A further family of scalar formats is one file with one type that implements
// Coded, one line in the table families of names.go, and one line in the suite of
// tests (smallFormats). It rounds everywhere at once, at the speed of the reference.
// Formats whose codes wrap also implement Wrapper. Formats whose values share a
// scale implement Blocked, one file each; their sums are those of their terms, with
// Product.Scale. All formats are comparable with == and named by ParseFormat.
//
// # Families
//
// Which values a format has, how it treats zero, infinity, NaN and ties is said at
// its type: Float, Fixed, Posit, Logarithmic, Draft, PowerScale, Table. What they
// share: a format without infinity saturates by default and may give NaN instead;
// a format without a code for NaN carries it all the same; to even means an even
// code. Where zero has no sign results are +0. Where zero is no value (E8M0, some
// tables) it is rounded like any number, but a sum still starts at +0.
//
// Blocks and scaled integers round the operands of a product and nothing else:
// Point.Check refuses them, Point.CheckOperand does not. They are requantised for
// every product, along its reduction axis, by RoundTensor or RoundChannels.
// Terms of blocks are the decoded reals; terms of integers are codes less the zero
// point. Factors of tensors multiply the finished sums, R[sum](factor s), as
// Product.Scale: the binary64 product of the two operands' factors, which is exact,
// both being binary32 numbers. A scale per channel belongs to the rows of the
// left-hand operand.
//
// # Rounding
//
// A Point rounds an exact real in three steps. Its format brackets the magnitude
// between two neighbours, as if the exponent had no upper bound; the mode chooses
// one; overflow is decided on the choice. Stochastic rounding acts on the
// magnitude: with f the exact fraction of the gap, T = floor(f 2^r), floor(f 2^r +
// 1/2), nearest-even(f 2^r) or, for equal probability, 2^(r-1), and U the r random
// bits, the result is the neighbour away from zero iff T + U >= 2^r. A value of the
// format never moves. Ties to even, and odd, mean the code of the magnitude, which
// for formats without fraction bits is the exponent field.
//
// Overflow goes to infinity, to the largest finite value, to NaN, or wraps. Toward
// zero, to odd and the inward direction of up and down stop at the largest finite
// value under each policy but wrap. An infinity is not rounded but replaced: it
// stays where the policy is infinity, becomes the largest finite value where it is
// saturate, NaN otherwise, whatever the mode. NaN is always the canonical quiet
// NaN; a format without a code for it carries it all the same, and it is counted.
// Where subnormals are flushed, a result below the least normal value after
// rounding becomes zero of its sign; codes of subnormals then read as zero.
//
// Each rounding has at most one event. Overflow: a finite result became infinite or
// NaN, or wrapped. Saturated: a result beyond the largest finite value, infinity
// included, became it. NaN: any other result that is NaN. Underflow: a result that
// was not zero became zero; it is counted in elementwise operations only, not in
// products and sums.
//
// The bias of each, the mean error in gaps away from zero over fractions f uniform
// on the multiples of 2^-b in [0, 1), b > r, and over random bits:
//
//	nearest-even          0
//	nearest-away          2^-b / 2
//	toward-zero           -(1 - 2^-b) / 2
//	up, down              (1 - 2^-b) / 2 where they round away, else as toward-zero
//	to-odd                0, odd and even values being equally frequent
//	stochastic, truncated -(2^-r - 2^-b) / 2
//	centred               2^-b / 2
//	centred-even          0
//	equal                 0 on average, but 1/2 - f for every f > 0
//
// With b <= r the three that depend on f are exact for every f: they move by f on
// average. Two sources of random bits model cheap hardware, see Source. Draws shared
// by n lanes leave the bias of each lane alone; the errors of the lanes of a group are
// no longer independent, so that the variance of their sum grows up to n times. The
// states of a register of w bits are never zero: T of 2^r becomes a probability of
// T 2^(w-r) / (2^w - 1), which adds up to 2^-w away from zero; and its errors repeat
// after 2^w - 1 draws, and neighbouring ones share bits.
//
// # Elementwise operations
//
// RoundSlice, ScaleSlice, AddSlice and SubSlice round the exact result once, keep
// the sign of a zero, and give a zero sum of opposite terms the sign +, in all modes
// (the sum of two zeros is -0 iff both are, and x - y is x + (-y)).
//
// # Sums
//
// A sum starts at +0: s_0 = +0, s_k = R[sum](s_(k-1) + R[product](a_k b_k)), the
// product exact where no product point is set. A partial or finished sum that is
// zero is +0, so that a padded term, which is skipped, and a packed zero give the
// same bits while the other operand is finite; padding opposite an infinity or NaN
// is skipped as well.
//
//   - sequential: as above, k ascending.
//   - chunk(n): every n consecutive terms from +0 in sum; the finished chunks, in
//     turn, from +0 in outer.
//   - lanes(n): term k goes to lane k mod n, each a sequential sum from +0; then the
//     lanes are added pairwise. Lanes without terms hold +0.
//   - pairwise: neighbouring terms are added, R[sum](p_0 + p_1) and so on, level by
//     level; an odd last one is carried up unrounded. A single term is added to +0.
//     The tree is that of all terms, padding included as a zero: an addition
//     with padding still rounds the other term to sum.
//   - wide: the exact sum of the terms, rounded once to sum.
//   - compensated: Kahan's steps, each operation rounded to sum; see compensated.go.
//   - aligned(n, w): groups of n consecutive terms, each cut toward zero to w bits of
//     the group's largest, added as integers, and rounded once into the sum; see
//     aligned.go.
//
// Then Product.Scale multiplies the finished sum, R[sum](scale s), and the bias is
// added, R[outer](s + bias), outer being sum where it is not set. Through binary32,
// every addition, and the scaling, is first rounded to binary32, nearest-even; a
// finite result that this makes infinite counts as the point's own overflow, and is an
// infinity for the point's rounding, whatever its direction. It has no meaning for wide and aligned sums and is refused there.
//
// Inside sums the random number of addition k of result (i, j) is the top r of 16
// bits, r at most 16: u = (R|1)(V) + (R>>16)(V>>16) modulo 2^16 of the halves of
// R = word k of lane i of the row stream and V = word k of lane j of the column
// stream. Terms, padding included, have the numbers 0 to K-1; all later additions
// K, K+1, ... in the order in which they are performed: outer additions of chunks,
// nodes of a tree level by level from left to right, groups of an aligned sum, the
// further operations of a compensated one, the rounding of a wide sum, the scaling,
// the bias. In a pairwise tree terms have no addition of their own and the
// numbers below K stay unused; additions of padding keep their number. Products
// draw from streams of their own with the number of their term.
//
// # Exactness
//
// Fast paths compute in binary32 or binary64 only where that provably rounds as the
// exact real does. The proofs stand beside the code (engine.setFolds, oddFold,
// quick.choose, engine.wide). Results do not depend on the machine: no expression
// here may fuse a product with a sum, which is why each product is written
// float64(a*b) or float32(a*b). Each claim is held by a test, "rationals" being
// integers or rationals of math/big that share no code with the package:
//
//	codes and values of every family, all codes up to    TestSuiteCodes, TestSuiteLimits,
//	16 bits, decoded from the definitions                TestCodes; TestPositTable,
//	                                                     TestDraftFigures, TestGupta
//	roots of logarithmic formats are the nearest         TestRoots
//	every rounding, overflow policy and event, at every  TestSuiteRounding,
//	value, middle, tie and their neighbours (16 bits:    TestSuiteRounding16,
//	every gap to nearest-even, samples in the others)    TestSuiteSpecials,
//	against rationals                                    TestRoundAgainstRationals,
//	                                                     TestRoundKnownFormats
//	sums and products of every pair of operands of the   TestSuitePairs
//	formats of at most 8 bits, against rationals
//	wrapping, against integers                           TestFixedWrap
//	exact reals: sums, products, quotients, gaps         TestRealArithmetic, TestExactSum,
//	                                                     TestGapFraction
//	thresholds and biases of stochastic rounding         TestThresholdAgainstRationals,
//	                                                     TestFewRandomBits, TestBiases,
//	                                                     TestFamilyMeans, TestSharedDraws
//	registers and shared draws                           TestRegisterPeriods, TestSources,
//	                                                     TestSourcesInUse
//	quick and elementwise roundings equal Point.Round    TestRoundingProperties, TestSlices,
//	                                                     TestQuickFixed, TestQuickDraft,
//	                                                     TestFamilySlices
//	numbers folded to odd round as exact ones            TestOddFold, TestOddSafe
//	sums in every order, against rationals or steps      TestSumsAgainstRationals,
//	                                                     TestCompensatedSteps,
//	                                                     TestAlignedSteps
//	fast paths equal the reference                       TestMulAgainstReference,
//	                                                     TestSumRowsAgainstReference,
//	                                                     TestBinary64Products
//	blocks: scales of every rule, elements, axes         TestBlockExample, TestTensorScale,
//	                                                     TestBlocksAgainstRationals,
//	                                                     TestBlockAxes
//	scaled integers: scales, zero points, products       TestIntegerByHand,
//	                                                     TestIntegersAgainstRationals,
//	                                                     TestIntegerProduct
//	monotone, idempotent, symmetric; chunk(1), lanes(1)  TestFamilyProperties,
//	                                                     TestFamilyOrders,
//	                                                     TestOrderProperties
package quant

// ArithmeticVersion is raised whenever a bit of any result may change.
const ArithmeticVersion = 1
