package compare

import (
	"fmt"
	"slices"

	"ulpine/results"
)

// Decide gives verdicts to a family of comparisons, those of one table. It
// returns them anew, with Holm-adjusted p-values, verdicts and further warnings;
// the argument is left as it is.
func Decide(family []results.Comparison) []results.Comparison {
	decided := judge(family, shares{})
	for i := range decided {
		switch c := &decided[i]; c.Verdict.Kind {
		case results.Undecided:
			c.Verdict.Pairs = settle(c, decided)
			noteHolm(c, len(decided))
		case results.Within:
			noteClasses(c)
		}
	}
	return decided
}

// judge is Decide without what is said about the undecided; spending keeps levels of
// looks.
func judge(family []results.Comparison, spending shares) []results.Comparison {
	decided := slices.Clone(family)
	p := make([]float64, len(family))
	worse := make([]float64, len(family))
	for i, c := range family {
		if sound(&c) {
			p[i], worse[i] = spending.overLooks(&c)
		} else { // in the family, but never to be rejected
			p[i], worse[i] = 1, 1
		}
	}
	p, worse = Holm(p), Holm(worse)
	for i := range decided {
		c := &decided[i]
		c.Warnings = slices.Clone(c.Warnings)
		c.Holm, c.HolmWorse = p[i], worse[i]
		c.Verdict = verdict(c)
	}
	return decided
}

// tail is a = (1 - confidence)/2, the probability beyond either end of the
// interval.
func tail(c *results.Comparison) float64 { return (1 - c.Confidence) / 2 }

// complete reports whether all pairs that the plan asks for are there, or as many
// as its first look takes. Arms with the very same runs need no more than there are:
// those of any other replicate would be the same too.
func complete(c *results.Comparison) bool {
	if c.Same {
		return c.N > 0
	}
	if _, several := looks(c); several {
		return lookedAt(c) > 0
	}
	return c.N >= c.Planned && c.N > 0
}

// sound reports whether a comparison may be decided by its differences.
func sound(c *results.Comparison) bool {
	return complete(c) && c.N >= 2 && c.Diverged == 0 && c.AgainstDiverged == 0 && allFinite(c.Differences)
}

// verdict is the answer without a number of pairs. Divergence counts from the
// first one, even before all pairs are there: more pairs cannot undo it.
func verdict(c *results.Comparison) results.Verdict {
	switch {
	case c.Diverged > 0:
		return results.Verdict{Kind: results.Diverged, Diverged: c.Diverged, Of: c.N}
	case !sound(c):
		return results.Verdict{Kind: results.Undecided}
	case c.Holm < tail(c):
		return results.Verdict{Kind: results.Within}
	case c.HolmWorse < tail(c):
		return results.Verdict{Kind: results.Worse}
	}
	return results.Verdict{Kind: results.Undecided}
}

// settle is about how many pairs would settle an undecided comparison: those
// that the plan still waits for, or else more. 0: cannot be said.
func settle(c *results.Comparison, family []results.Comparison) int {
	switch {
	case !complete(c) || c.N < c.Planned:
		return c.Planned
	case !sound(c):
		return 0
	}
	wanted := results.Within
	if c.Mean < -c.Margin {
		wanted = results.Worse
	}
	left := len(family)
	for i := range family {
		if family[i].Verdict.Kind == wanted {
			left--
		}
	}
	return twoDigits(pairsNeeded(c.Mean, c.SD, c.N, c.Margin, tail(c)/float64(left)))
}

// twoDigits rounds an estimate up to two significant digits: it deserves no more.
func twoDigits(n int) int {
	unit := 1
	for n/unit >= 100 {
		unit *= 10
	}
	return (n + unit - 1) / unit * unit
}

// noteHolm explains an interval that clears the margin beside a verdict that
// does not.
func noteHolm(c *results.Comparison, arms int) {
	if !sound(c) || c.P >= tail(c) && c.PWorse >= tail(c) {
		return
	}
	p, adjusted := c.P, c.Holm
	if c.PWorse < c.P {
		p, adjusted = c.PWorse, c.HolmWorse
	}
	what := number(arms, "comparison")
	if _, several := looks(c); several {
		what += " and several looks"
	}
	c.Warnings = append(c.Warnings, fmt.Sprintf(
		"the interval alone clears the margin (p = %s), but not after correction for %s (p = %s, needed below %s)",
		pWords(p), what, pWords(adjusted), pWords(tail(c))))
}

// pWords spells a p-value in two digits.
func pWords(p float64) string { return minus(fmt.Sprintf("%.2g", p)) }
