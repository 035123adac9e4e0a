package compare

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"ulpine/results"
)

// Answer is what stands first in terminal and page, in short sentences: what
// stays within the margin, under which rounding, from how many pairs; then what
// is worse, what diverged, what is undecided and how many pairs would settle it;
// then a sentence for each contrast. It reads arms, comparisons and contrasts of
// the study.
func Answer(s *results.Study) string {
	switch {
	case s.BaselineProblem != "":
		return "No verdict can be given: " + s.BaselineProblem + "."
	case len(s.Comparisons) == 0 && len(s.Contrasts) == 0:
		return "There is nothing to compare: the plan has no arm besides the baseline."
	case s.Tuning != nil && !s.Tuning.Done:
		return fmt.Sprintf("There is no answer yet: %d of %s of the tuning are stored, and no arm has its values.", s.Tuning.Stored, number(s.Tuning.Runs, "run"))
	case !anyPair(s):
		return "There is no answer yet: no pair of runs is stored."
	}
	var said []string
	if len(s.Comparisons) > 0 {
		said = aboutArms(s)
	}
	said = append(said, contrasts(s)...)
	if s.Tuning != nil {
		said = append(said, tuned(s.Tuning))
	}
	return strings.Join(said, " ")
}

// tuned says how hard every arm was tuned.
func tuned(t *results.Tuning) string {
	trials := 0
	if len(t.Arms) > 0 {
		trials = len(t.Arms[0].Trials)
	}
	var what []string
	if len(t.LearningRates) > 0 {
		what = append(what, "learning rate")
	}
	if len(t.LossScales) > 0 {
		what = append(what, "loss scale")
	}
	are := "are"
	if t.Replicates == 1 {
		are = "is"
	}
	return fmt.Sprintf("Every arm, the baseline too, was given the %s of the best of the same %d trials, by %s on %s that %s not among these.",
		list(what), trials, t.Metric, number(t.Replicates, "replicate"), are)
}

func anyPair(s *results.Study) bool {
	some := func(c results.Comparison) bool { return c.N > 0 }
	return slices.ContainsFunc(s.Comparisons, some) || slices.ContainsFunc(s.Contrasts, some)
}

// aboutArms are the sentences about the arms against the baseline.
func aboutArms(s *results.Study) []string {
	verdicts := map[results.VerdictKind][]*results.Comparison{}
	for i := range s.Comparisons {
		c := &s.Comparisons[i]
		verdicts[c.Verdict.Kind] = append(verdicts[c.Verdict.Kind], c)
	}
	said := []string{withinSentence(s, verdicts[results.Within])}
	if saved := savedSentence(s, verdicts[results.Within]); saved != "" {
		said = append(said, saved)
	}
	said = append(said, thresholds(s)...)
	for _, g := range alike(verdicts[results.Worse], func(c *results.Comparison) string { return under(s, c) }) {
		said = append(said, fmt.Sprintf("%s%s%sworse than the margin (%s).",
			names(s, g.of), comma(g.by), be(len(g.of)), pairs(g.of)))
	}
	if diverged := verdicts[results.Diverged]; len(diverged) > 0 {
		said = append(said, divergedSentence(s, diverged))
	}
	return append(said, undecidedSentences(s, verdicts[results.Undecided])...)
}

// undecidedSentences are one for each number of pairs that would settle an arm, or,
// of many arms, one with the range of those numbers.
func undecidedSentences(s *results.Study, undecided []*results.Comparison) (said []string) {
	groups := alike(undecided, needs)
	if len(groups) > spelt {
		groups = alike(undecided, func(c *results.Comparison) string { return needsOfMany(c, undecided) })
	}
	for _, g := range groups {
		by := g.by
		if len(g.of) > 1 {
			by = strings.Replace(by, "would settle it", "would settle them", 1)
		}
		said = append(said, names(s, g.of)+be(len(g.of))+"undecided"+by+".")
	}
	return said
}

// needsOfMany is needs with the range of pairs that would settle those of many
// arms that have as many.
func needsOfMany(c *results.Comparison, all []*results.Comparison) string {
	if c.N < c.Planned || c.N == 1 || c.Verdict.Pairs == 0 {
		return needs(c)
	}
	least, most := c.Verdict.Pairs, c.Verdict.Pairs
	for _, other := range all {
		if other.N == c.N && other.Verdict.Pairs > 0 {
			least, most = min(least, other.Verdict.Pairs), max(most, other.Verdict.Pairs)
		}
	}
	return fmt.Sprintf(" after %s; about %d to %d would settle them", number(c.N, "pair"), least, most)
}

// withinSentence comes first, also when no arm stays within the margin.
func withinSentence(s *results.Study, within []*results.Comparison) string {
	first := &s.Comparisons[0]
	margin := fmt.Sprintf("within the margin of %s in %s", newMeasure(first).margin(first.Margin), first.Metric)
	all, n := len(s.Comparisons), len(within)
	if n == 0 {
		return "No arm is shown to stay " + margin + "."
	}
	if all == 1 {
		return fmt.Sprintf("The only arm, %s%s stays %s (%s).", names(s, within), comma(under(s, within[0])), margin, pairs(within))
	}
	var who []string
	for _, g := range alike(within, func(c *results.Comparison) string { return under(s, c) }) {
		who = append(who, fmt.Sprintf("%s%s (%s)", names(s, g.of), strings.TrimSuffix(comma(g.by), ","), pairs(g.of)))
	}
	lead := fmt.Sprintf("Of %d arms, %d stay ", all, n)
	switch {
	case n == all && n == 2:
		lead = "Both arms stay "
	case n == all:
		lead = fmt.Sprintf("All %d arms stay ", n)
	case n == 1:
		lead = fmt.Sprintf("Of %d arms, one stays ", all)
	}
	return lead + margin + ": " + strings.Join(who, "; ") + "."
}

// savedSentence says how wide values are in the arms within the margin; empty where
// there are none, or it is not known.
func savedSentence(s *results.Study, within []*results.Comparison) string {
	if len(within) == 0 || len(s.Arms) == 0 || !(s.Arms[0].Bits > 0) {
		return ""
	}
	least, most := math.Inf(1), 0.0
	for _, c := range within {
		a := arm(s, c.Arm)
		if a == nil || !(a.Bits > 0) {
			return ""
		}
		least, most = min(least, a.Bits), max(most, a.Bits)
	}
	if least == most && most == s.Arms[0].Bits {
		return "" // what differs is computed with, not kept
	}
	who, span := "It keeps ", amount(least)
	if len(within) > 1 {
		who = "They keep "
	}
	if amount(most) != span {
		span += " to " + amount(most)
	}
	return fmt.Sprintf("%s%s bits a value in training memory, the baseline %s.", who, span, amount(s.Arms[0].Bits))
}

// comma sets a remark off from what it follows and what comes next.
func comma(remark string) string { return ", " + remark + "," }

// group is what can be said of several arms at once.
type group struct {
	of []*results.Comparison
	by string // what they share
}

// alike groups comparisons of which the same can be said, from as many pairs.
func alike(all []*results.Comparison, what func(*results.Comparison) string) (groups []group) {
next:
	for _, c := range all {
		by := what(c)
		for i := range groups {
			if g := &groups[i]; g.by == by && g.of[0].N == c.N {
				g.of = append(g.of, c)
				continue next
			}
		}
		groups = append(groups, group{[]*results.Comparison{c}, by})
	}
	return groups
}

// spelt is how many arms a sentence names before it counts the rest: a table with
// all of them stands below it.
const spelt = 5

// names lists the arms of comparisons.
func names(s *results.Study, of []*results.Comparison) string {
	var words []string
	for i, c := range of {
		if i == spelt && len(of) > spelt+1 {
			words = append(words, fmt.Sprintf("%d more", len(of)-spelt))
			break
		}
		words = append(words, armName(s, c.Arm))
	}
	return list(words)
}

// pairs says from how many pairs each of a group was judged.
func pairs(of []*results.Comparison) string {
	words := number(of[0].N, "pair")
	if len(of) > 1 {
		words += " each"
	}
	return words + atLook(of[0])
}

// atLook names the latest look of a plan that has several; empty: it has one.
func atLook(c *results.Comparison) string {
	if _, several := looks(c); !several || c.Same || lookedAt(c) == 0 {
		return ""
	}
	return ", " + lookWords(c)
}

// under is the rounding of an arm, as a remark.
func under(s *results.Study, c *results.Comparison) string { return "with " + Rounding(arm(s, c.Arm)) }

func divergedSentence(s *results.Study, diverged []*results.Comparison) string {
	words := make([]string, len(diverged))
	for i, c := range diverged {
		if i == spelt && len(diverged) > spelt+1 {
			words = append(words[:i], fmt.Sprintf("%d more arms in some", len(diverged)-spelt))
			break
		}
		words[i] = fmt.Sprintf("%s in %d of %d", armName(s, c.Arm), c.Verdict.Diverged, c.Verdict.Of)
		if i == 0 {
			words[i] = fmt.Sprintf("%s diverged in %d of %s", armName(s, c.Arm), c.Verdict.Diverged, number(c.Verdict.Of, "replicate"))
		}
	}
	return list(words) + "."
}

// needs is what follows "undecided".
func needs(c *results.Comparison) string {
	switch {
	case c.N < c.Planned && lookedAt(c) > 0 && complete(c):
		return fmt.Sprintf(" after %s%s; %d at most are planned", number(c.N, "pair"), atLook(c), c.Planned)
	case c.N < c.Planned:
		return fmt.Sprintf(": %d of %s stored", c.N, number(c.Planned, "planned pair"))
	case c.N == 1:
		return ": one pair gives no interval"
	case c.Verdict.Pairs > 0:
		return fmt.Sprintf(" after %s%s; about %d would settle it", number(c.N, "pair"), atLook(c), c.Verdict.Pairs)
	}
	return " after " + number(c.N, "pair") + atLook(c)
}

// contrast is the sentence about one arm against another.
func contrast(s *results.Study, c *results.Comparison) string {
	if c.N == 0 {
		return fmt.Sprintf("%s and %s have no pair of runs stored yet.", armName(s, c.Arm), armName(s, c.Against))
	}
	return fmt.Sprintf("%s %s %s%s: %s.", armName(s, c.Arm), change(c), armName(s, c.Against), evidence(c), outcome(c))
}

// change is the verb between two arms: which way the mean difference points, and
// how far.
func change(c *results.Comparison) string {
	w := newMeasure(c)
	size := w.with(w.figure(math.Abs(c.Mean)))
	switch {
	case math.IsNaN(c.Mean):
		return "differs by an amount that is no number from"
	case c.Mean == 0 && c.SD == 0:
		return "does not differ in any pair from"
	case c.Mean == 0:
		return "does not differ on average from"
	case w.figure(c.Mean) == w.figure(0):
		return "differs by less than " + w.with(amount(math.Pow10(-w.decimals))) + " from"
	case w.metric.Higher && c.Mean > 0:
		return "scores " + size + " above"
	case w.metric.Higher:
		return "scores " + size + " below"
	case c.Mean > 0:
		return "is better by " + size + " than"
	}
	return "is worse by " + size + " than"
}

// evidence is the interval of the difference and the number of pairs, in brackets.
func evidence(c *results.Comparison) string {
	if math.IsNaN(c.Low) {
		return fmt.Sprintf(" (%s, no interval)", pairs([]*results.Comparison{c}))
	}
	return fmt.Sprintf(" (%s %% interval %s, %s)", amount(100*c.Confidence), newMeasure(c).span(c.Low, c.High), pairs([]*results.Comparison{c}))
}

// outcome is the verdict of a contrast in words.
func outcome(c *results.Comparison) string {
	margin := newMeasure(c).margin(c.Margin)
	switch v := c.Verdict; v.Kind {
	case results.Within:
		if c.Low > 0 { // "scores above: within the margin" reads as a contradiction
			return "better, so within the margin of " + margin
		}
		return "within the margin of " + margin
	case results.Worse:
		return "worse than the margin of " + margin
	case results.Diverged:
		return fmt.Sprintf("it diverged in %d of %s", v.Diverged, number(v.Of, "replicate"))
	}
	if c.AgainstDiverged > 0 {
		return fmt.Sprintf("undecided, for the other arm diverged in %d of %s", c.AgainstDiverged, number(c.N, "replicate"))
	}
	return "undecided" + needs(c)
}

// arm returns the arm with that slug, nil if the study does not describe it.
func arm(s *results.Study, slug string) *results.Arm {
	for i := range s.Arms {
		if s.Arms[i].Slug == slug {
			return &s.Arms[i]
		}
	}
	return nil
}

// armName is how the plan calls an arm, in quotation marks where a comma or an
// "and" in the name could be taken for the sentence's own.
func armName(s *results.Study, slug string) string {
	name := slug
	if a := arm(s, slug); a != nil && a.Name != "" {
		name = a.Name
	}
	if strings.ContainsAny(name, ",;()") || strings.Contains(name, " and ") {
		return "“" + name + "”"
	}
	return name
}
