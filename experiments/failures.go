package experiments

import (
	"fmt"
	"slices"
	"strconv"
	"strings"

	"ulpine/experiments/plan"
	"ulpine/results"
)

// failure is a run that failed, and why.
type failure struct {
	arm       string
	replicate uint64
	cause     string
}

// failureGroup is a set of failures with one cause.
type failureGroup struct {
	cause string
	roots []failure // the runs in which it arose
	after []failure // runs that could not start because of those
}

// failureWarnings says what failed, equal causes once: arms that could not start
// because their replicate's pretraining failed or diverged stand under that
// pretraining's cause.
func failureWarnings(failures []failure) []string {
	var groups []*failureGroup
	find := func(cause string) *failureGroup {
		for _, g := range groups {
			if g.cause == cause {
				return g
			}
		}
		groups = append(groups, &failureGroup{cause: cause})
		return groups[len(groups)-1]
	}
	for _, f := range failures {
		pretraining := failure{arm: plan.PretrainSlug, replicate: f.replicate}
		if what, follows := strings.CutPrefix(f.cause, results.RunName(pretraining.arm, f.replicate)+" "); follows {
			g := find(what) // "failed: ..." or "diverged: ..."
			g.after = append(g.after, f)
			if !slices.Contains(g.roots, pretraining) {
				g.roots = append(g.roots, pretraining)
			}
			continue
		}
		g := find("failed: " + f.cause)
		f.cause = "" // so that it is the pretraining that its arms name
		if !slices.Contains(g.roots, f) {
			g.roots = append(g.roots, f)
		}
	}
	warnings := make([]string, len(groups))
	for i, g := range groups {
		warnings[i] = g.words()
	}
	return warnings
}

// words is the warning about a group.
func (g *failureGroup) words() string {
	roots := runNames(g.roots) + " " + g.cause
	if len(g.after) == 0 {
		return roots
	}
	return fmt.Sprintf("%s failed because %s", number(len(g.after), "run"), roots)
}

// runNames lists runs by arm, each arm's replicates in ascending order:
// "bf16/100 and bf16/101", or from three in a row on "bf16/100 to bf16/107".
func runNames(runs []failure) string {
	var arms []string
	seeds := map[string][]uint64{}
	for _, r := range runs {
		if seeds[r.arm] == nil {
			arms = append(arms, r.arm)
		}
		seeds[r.arm] = append(seeds[r.arm], r.replicate)
	}
	var words []string
	for _, arm := range arms {
		slices.Sort(seeds[arm])
		words = append(words, stretches(arm, seeds[arm])...)
	}
	if n := len(words); n > 1 {
		return strings.Join(words[:n-1], ", ") + " and " + words[n-1]
	}
	return strings.Join(words, "")
}

// stretches names an arm's replicates, long rows of them by their ends.
func stretches(arm string, seeds []uint64) (words []string) {
	for len(seeds) > 0 {
		n := 1
		for n < len(seeds) && seeds[n] == seeds[n-1]+1 {
			n++
		}
		if n >= 3 {
			words = append(words, results.RunName(arm, seeds[0])+" to "+arm+"/"+strconv.FormatUint(seeds[n-1], 10))
		} else {
			n = 1
			words = append(words, results.RunName(arm, seeds[0]))
		}
		seeds = seeds[n:]
	}
	return words
}
