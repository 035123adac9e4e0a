// Package compare turns runs into answers: paired differences, intervals and
// verdicts.
//
// # Pairs
//
// A replicate gives every arm the same data, initial weights, batch order and
// random words, so two runs of one replicate are a pair. The difference is the
// gain of the arm over the arm it is compared with: positive is better, whether
// more or less of the metric is. The metric is taken after the last epoch. A run
// that diverged is scored as it stands.
//
// # Estimates
//
// Of n differences: mean, standard deviation (n-1), skewness, and the two-sided t
// interval of the mean, which decides. Beside it stand
//
//   - two bootstrap intervals of the mean, BCa and studentised (see bootstrap and
//     studentised),
//   - the interval by flipping signs and the Hodges-Lehmann estimate with its
//     interval by signed ranks (see signFlip and signedRank): of the centre of
//     symmetric differences, exact for heavy tails too,
//   - the exact interval, after Clopper and Pearson, of the share of replicates that
//     diverge,
//   - class by class, the difference of recall with its t interval.
//
// The drawn intervals are never adjusted for the number of arms or of looks. Where
// replicates share their test examples (data from files), all of them speak of other
// replicates on these same examples. For what other examples would change there is,
// from the predictions that runs keep,
//
//   - the two-way bootstrap of the mean, over replicates and examples both (see
//     crossed; where each replicate draws its own examples, nested), and the
//     examples' share of the variance,
//   - the counts of examples gained and lost, pair by pair, with McNemar's test.
//
// In simulations of ten replicates and a hundred examples that vary by replicate,
// by example and by both, the two-way interval says "within" on the margin in 1.0 %
// where examples are shared, and the t interval, if it is read as one about other
// examples, in 9.6 %; where they are not shared in 3 % both (TestTwoWayValidity,
// 2,000 tables).
//
// # What each interval is worth
//
// Rates at which intervals say "within" when the true mean lies exactly on the
// margin, so that 0.025 would be right, for ten pairs (TestValidity; 80,000
// samples, 2,000 for the bootstraps, so their figures are good to about 0.01):
//
//	differences                    t      sign-flip  ranks  BCa    studentised
//	normal                         0.025  0.025      0.025  0.052  0.028
//	Laplace                        0.021  0.024      0.024  0.067  0.035
//	t with 3 degrees of freedom    0.021  0.025      0.025  0.081  0.041
//	lognormal, long tail up        0.001  0.001      0.001  0.022  0.004
//	lognormal, long tail down      0.161  0.153      0.145  0.147  0.081
//	exponential, long tail down    0.097  0.091      0.087  0.105  0.059
//	a failure in 1 of 10           0.346  0.345      0.345  0.338  0.334
//
// So the t interval and the two exact ones keep what they promise for symmetric
// differences, and none does for skewed ones whose long tail lies below: an arm
// that now and then trains badly. The studentised bootstrap errs about half as
// often there, and little more than it should for symmetric differences, so it is
// the one that is offered by name where the skewness lies beyond two standard
// errors. But only about one in four of the false "within" comes with that
// warning: the samples that mislead are those in which the tail is not to be seen.
// In the last row a tenth of all replicates fail, 35 % of samples of ten show no
// failure, and no interval can know of it: more replicates do, 20 of them in all
// but 12 %. "Worse" errs the same way where the long tail lies above.
//
// The table with more samples, and for other numbers of pairs:
//
//	ULPINE_VALIDITY=80000 go test -run Validity -v -timeout 60m ./results/compare
//
// # Verdicts
//
// With margin m and confidence c, let a = (1-c)/2. The lower end of the t
// interval lies above -m exactly when the one-sided p-value against "the true
// mean is -m or less" is below a; the upper end lies below -m exactly when the
// p-value against "-m or more" is. With several arms in one table those two
// families of p-values are each adjusted by Holm's method, and then
//
//	diverged   if the arm diverged in k >= 1 of its replicates
//	within     if the adjusted p-value against "-m or less" is below a
//	worse      if the adjusted p-value against "-m or more" is below a
//	undecided  otherwise
//
// so that the chance of one or more false "within" among all arms is at most a,
// and so is the chance of one or more false "worse". Every arm counts in its
// family, diverged ones too. Comparisons with the baseline are one family, the
// contrasts that a plan asks for another. Undecided never means "the same".
//
// A verdict waits for all pairs that the plan asks for: one that is looked for
// again and again while pairs come in would be found sooner or later.
//
// # Looks
//
// Unless the looks are planned (see Looks): after every so many pairs, up to a
// greatest number, with the error rate shared out among them so that nearly all
// of it is left for the last (the O'Brien-Fleming type of Lan and DeMets). The
// looks so far of an arm make one p-value, and Holm's method adjusts those as it
// does others, so the chance of a false "within" among all arms and all looks
// stays at most a. Before the last look, differences without any spread decide
// nothing: equal values so far say little of the next. The exception is an arm that
// has the very arithmetic of the other, so that both have the same runs by their keys.
// Its difference is zero in every replicate there can be, nothing is estimated, and
// "within" cannot be false: it is said at once, looks or not, from two pairs on, and
// counts in Holm's family as rejected, which that method allows for any hypothesis
// that is not true. A runner asks Looks.Next how many pairs to bring in, forms Pair and
// Decide from all runs so far, and stops when Settled. Looks count pairs by
// ascending replicates, so replicates must be brought in in that order. For
// normal differences the levels are those of the t statistic itself (see tLevels).
// In simulations of eight looks at 5 to 40 pairs, all looks together falsely said
// "within" in 2.5 % of plans with normal differences, 2.3 % with Laplace's law and
// 2.1 % with t of 3 degrees of freedom, where eight single looks at 2.5 % would
// have in 8 to 9 %. Whole plans of three arms on the margin with looks at 4, 8 and 12
// pairs err in 3.1 % of 1,000 plans (normal; four standard errors are 2.0 points) and
// in 1.2 % (t of 3 degrees), where single looks at single arms would have in 11 to
// 16 %; TestProcedureWithLooks holds plans with two looks to that.
//
// # Tuning
//
// Choosing learning rates on replicates of their own does not inflate the claim: what
// was chosen is fixed before the reported replicates are run, and their differences
// are of exactly that. In simulations of an arm with twelve equally good pairs of
// values on the margin, "within" was false in 2.3 % of 600 plans on fresh replicates,
// and would have been in 8.0 % on those that had chosen
// (TestTuningDoesNotInflate in package experiments).
//
// # Undecided
//
// About how many pairs would settle it: the least n with
//
//	t(1-a', n-1) SD / sqrt(n) < |mean + m|
//
// if mean and SD stay as they are; a' is a divided by the number of arms that
// Holm's method has still to reject. At that n the chance of a decision is about
// one half, so it is a lower estimate. None can be given while the mean sits on
// -m, or from a single pair.
//
// None of this is a measured path: it may use the floating-point arithmetic and
// the distributions of a statistics library.
package compare
