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
// Of n differences: mean, standard deviation (n-1), skewness, the two-sided t
// interval of the mean, and beside it a bootstrap interval (BCa, see bootstrap),
// because differences of accuracies can be heavy-tailed. The drawn intervals are
// never adjusted for the number of arms.
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
