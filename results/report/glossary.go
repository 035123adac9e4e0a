package report

// entry explains one word.
type entry struct{ Word, Meaning string }

// glossary explains the project's words, in the order in which a reader meets them.
var glossary = []entry{
	{"plan", "A text file that says everything about an experiment: task, network, training, replicates, claim, baseline and arms."},
	{"arm", "One full assignment of arithmetic to the rounding points of training."},
	{"baseline", "The arm in which everything is binary32 (FP32), rounded to nearest-even, summed in sequence."},
	{"replicate", "One repetition of every arm with the same data draw, initial weights and batch order. Arms are compared replicate by replicate."},
	{"run", "One arm in one replicate, called arm/replicate."},
	{"pair", "The runs of two arms in the same replicate; the paired difference is arm − baseline in the metric, positive when the arm is better."},
	{"margin", "The loss of the metric that the plan's author accepts, fixed before the first run."},
	{"verdict", "Within margin: the lower end of the interval lies above minus the margin. Worse than margin: its upper end lies below. Undecided: neither, with about the number of pairs that would settle it. Diverged k of n: in k of n replicates training broke down. Verdicts are Holm-corrected across the arms; the drawn intervals are not."},
	{"diverged", "A run with NaN or infinity in its loss or weights, a loss far above where it began for two epochs, or ten skipped steps in a row. It stops there and is scored as it stands."},
	{"stalled", "A run that ended with a training loss above 95 % of a constant predictor's: it ran, but did not learn."},
	{"control", "The baseline again in binary64 or with another order of summation. How far controls lie apart is the noise floor."},
	{"noise floor", "The differences that appear when nothing but the baseline's own rounding changes. Smaller differences mean nothing."},
	{"rounding point", "A named place in a training step where an exact value becomes a value of a number format, such as forward.weight or update.master."},
	{"bits a value", "The width of a stored value, averaged over the tensors by their sizes."},
	{"bit strip", "A drawing of a number format, one cell a bit: sign, exponent, fraction."},
	{"stored, products, sums, update", "The kinds of rounding points: values kept in memory; each product; each partial sum; optimizer state, step and master weights."},
	{"nearest-even", "Rounding to the nearest value of the format, halfway cases to the one with an even last digit."},
	{"stochastic, r", "Rounding up or down at random with r random bits, so that the mean of many roundings is near the exact value."},
	{"sequential, chunk(k), pairwise, lanes(k), wide", "Orders of summation: one term after another; k terms at a time and then the chunks; in a tree of neighbours; over k lanes; or exactly, with one rounding at the end."},
	{"loss scale", "A factor on the loss that keeps small gradients from vanishing; a step whose gradients overflow is skipped."},
	{"overflow, saturation, underflow", "A result beyond the format's largest value that became infinity or NaN; one that became the largest value; a nonzero result that became zero."},
	{"signal to rounding noise", "The power of values over the power of their rounding errors, in decibels (dB): ten times the decimal logarithm. A bit of fraction is worth about 6 dB."},
	{"kept", "The sum of what was computed times what was meant over the sum of what was meant squared, of sums or of updates: 1 is all, 0 nothing."},
	{"recall", "Of the test examples of a class, the share that is named rightly."},
	{"Pareto set", "The arms that no other arm beats in both score and bits, or bytes, or energy."},
	{"grid", "Arms that the plan makes from lists of values, one arm for each combination."},
	{"evidence: the whole arm, alone", "Whether the arm that a row rests on changes other rounding points too, or that one alone."},
	{"once, through a cache", "Two models of the traffic between memory and arithmetic: each tensor moved once a phase, or products in blocks that fit a cache."},
	{"in a million", "Range events per million values that a point rounded while training; k is a thousand."},
	{"BCa, studentised, flipped signs, signed ranks", "Ways to an interval that lean less on the normal distribution than the t interval does: two bootstraps, the test that flips the signs of differences, and Wilcoxon's."},
	{"two-way interval", "An interval that draws replicates and test examples anew: how far the result would move with other examples too."},
	{"tuned", "Given, before the reported runs, the learning rate and loss scale that did best on validation data; every arm tries the same list."},
	{"pp", "Percentage points: the difference of two percentages."},
	{"digest", "SHA-256 over a run's loss curve, counters and final weights. The same digest is the same result, bit for bit."},
}
