package compare

import (
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"

	"ulpine/results"
)

// Answer is the sentence that stands first in terminal and page: what stays
// within the margin, under which rounding, from how many pairs, and what does
// not; a second sentence for each contrast. It reads arms, comparisons and
// contrasts of the study.
func Answer(s *results.Study) string {
	switch {
	case s.BaselineProblem != "":
		return "No verdict can be given: " + s.BaselineProblem + "."
	case len(s.Comparisons) == 0 && len(s.Contrasts) == 0:
		return "There is nothing to compare: the plan has no arm besides the baseline."
	case !anyPair(s):
		return "There is no answer yet: no pair of runs is stored."
	}
	var sentences []string
	if len(s.Comparisons) > 0 {
		sentences = append(sentences, sentence(s))
	}
	for i := range s.Contrasts {
		sentences = append(sentences, contrast(s, &s.Contrasts[i]))
	}
	return strings.Join(sentences, " ")
}

func anyPair(s *results.Study) bool {
	some := func(c results.Comparison) bool { return c.N > 0 }
	return slices.ContainsFunc(s.Comparisons, some) || slices.ContainsFunc(s.Contrasts, some)
}

// sentence is the answer about the arms against the baseline, a clause a verdict.
func sentence(s *results.Study) string {
	groups := map[results.VerdictKind][]*results.Comparison{}
	for i := range s.Comparisons {
		c := &s.Comparisons[i]
		groups[c.Verdict.Kind] = append(groups[c.Verdict.Kind], c)
	}
	clauses := []string{withinClause(s, groups[results.Within])}
	if group := groups[results.Worse]; len(group) > 0 {
		clauses = append(clauses, each(s, group, under)+be(len(group))+"worse than the margin")
	}
	if group := groups[results.Diverged]; len(group) > 0 {
		clauses = append(clauses, divergedClause(s, group))
	}
	if group := groups[results.Undecided]; len(group) > 0 {
		clauses = append(clauses, each(s, group, needs)+be(len(group))+"undecided")
	}
	return strings.Join(clauses, "; ") + "."
}

// withinClause leads the sentence, also when no arm stays within the margin.
func withinClause(s *results.Study, group []*results.Comparison) string {
	first := &s.Comparisons[0]
	margin := fmt.Sprintf("within the margin of %s in %s", amount(first.Margin), first.Metric)
	all := len(s.Comparisons)
	switch n := len(group); {
	case n == 0:
		return "No arm is shown to stay " + margin
	case all == 1:
		return "The only arm, " + each(s, group, under) + ", stays " + margin
	case n == all:
		return fmt.Sprintf("All %d arms stay %s: %s", n, margin, each(s, group, under))
	case n == 1:
		return fmt.Sprintf("Of %d arms, one stays %s: %s", all, margin, each(s, group, under))
	default:
		return fmt.Sprintf("Of %d arms, %d stay %s: %s", all, n, margin, each(s, group, under))
	}
}

func divergedClause(s *results.Study, group []*results.Comparison) string {
	words := make([]string, len(group))
	for i, c := range group {
		words[i] = fmt.Sprintf("%s diverged in %d of %s", armName(s, c.Arm), c.Verdict.Diverged, number(c.Verdict.Of, "replicate"))
	}
	return list(words)
}

// each lists arms, a remark in brackets behind each.
func each(s *results.Study, group []*results.Comparison, remark func(*results.Study, *results.Comparison) string) string {
	words := make([]string, len(group))
	for i, c := range group {
		words[i] = armName(s, c.Arm) + " (" + remark(s, c) + ")"
	}
	return list(words)
}

// under is the remark of a decided arm: rounding and pairs.
func under(s *results.Study, c *results.Comparison) string {
	return Rounding(arm(s, c.Arm)) + "; " + number(c.N, "pair")
}

// needs is the remark of an undecided arm.
func needs(_ *results.Study, c *results.Comparison) string {
	switch {
	case c.N < c.Planned:
		return fmt.Sprintf("%d of %s stored", c.N, number(c.Planned, "planned pair"))
	case c.N == 1:
		return "one pair gives no interval"
	case c.Verdict.Pairs > 0:
		return fmt.Sprintf("needs about %s, has %d", number(c.Verdict.Pairs, "pair"), c.N)
	}
	return "after " + number(c.N, "pair")
}

// contrast is the sentence about one arm against another.
func contrast(s *results.Study, c *results.Comparison) string {
	lead := fmt.Sprintf("Against %s, %s ", armName(s, c.Against), armName(s, c.Arm))
	if c.N == 0 {
		return lead + "has no pair of runs stored yet."
	}
	return lead + change(c) + fmt.Sprintf(" in %s", c.Metric) + evidence(c) + ": " + outcome(c) + "."
}

// change says which way the mean difference points.
func change(c *results.Comparison) string {
	switch {
	case math.IsNaN(c.Mean):
		return "differs by an amount that is no number"
	case c.Mean > 0:
		return "is better by " + amount(c.Mean)
	case c.Mean < 0:
		return "is worse by " + amount(-c.Mean)
	case c.SD == 0:
		return "does not differ in any pair"
	}
	return "does not differ on average"
}

// evidence is the interval and the number of pairs, in brackets.
func evidence(c *results.Comparison) string {
	if math.IsNaN(c.Low) {
		return fmt.Sprintf(" (%s, no interval)", number(c.N, "pair"))
	}
	return fmt.Sprintf(" (%s %% interval %s to %s, %s)", amount(100*c.Confidence), amount(c.Low), amount(c.High), number(c.N, "pair"))
}

// outcome is the verdict of a contrast in words.
func outcome(c *results.Comparison) string {
	v := c.Verdict
	switch v.Kind {
	case results.Within:
		return "within the margin of " + amount(c.Margin)
	case results.Worse:
		return "worse than the margin of " + amount(c.Margin)
	case results.Diverged:
		return fmt.Sprintf("it diverged in %d of %s", v.Diverged, number(v.Of, "replicate"))
	}
	if c.AgainstDiverged > 0 {
		return fmt.Sprintf("undecided, for the other arm diverged in %d of %s", c.AgainstDiverged, number(c.N, "replicate"))
	}
	return "undecided (" + needs(nil, c) + ")"
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

// list joins words as prose does.
func list(words []string) string {
	if len(words) < 2 {
		return strings.Join(words, "")
	}
	return strings.Join(words[:len(words)-1], ", ") + " and " + words[len(words)-1]
}

// be is the verb between n subjects and what is said of them.
func be(n int) string {
	if n == 1 {
		return " is "
	}
	return " are "
}

// number is a count with its noun, plural by an s.
func number(n int, noun string) string {
	if n == 1 {
		return "1 " + noun
	}
	return strconv.Itoa(n) + " " + noun + "s"
}

// amount prints a figure with at most three significant digits, without an
// exponent where four decimals suffice.
func amount(x float64) string {
	rounded, err := strconv.ParseFloat(strconv.FormatFloat(x, 'g', 3, 64), 64)
	if err != nil || rounded != 0 && math.Abs(rounded) < 1e-5 {
		return strconv.FormatFloat(x, 'g', 3, 64)
	}
	return strconv.FormatFloat(rounded, 'f', -1, 64)
}
