package experiments

import (
	"fmt"
	"slices"
	"strings"

	"ulpine/results"
)

// checkOnly errs unless every name of Options.Only is one of the plan's runs.
func (x *runner) checkOnly() error {
	for _, name := range x.options.Only {
		arm, seed, err := results.ParseRunName(name)
		if err != nil {
			return fmt.Errorf("%w: %w", ErrOnly, err)
		}
		var slugs []string
		for i := range x.all {
			slugs = append(slugs, x.all[i].Slug)
		}
		if !slices.Contains(slugs, arm) {
			return fmt.Errorf("%w: %s: %s has no arm %q; it has %s", ErrOnly, name, x.File, arm, strings.Join(slugs, ", "))
		}
		if first, count := x.Replicates.FirstSeed, uint64(x.Replicates.Count); seed < first || seed-first >= count {
			return fmt.Errorf("%w: %s: %s has no replicate %d; it has %d to %d", ErrOnly, name, x.File, seed, first, first+count-1)
		}
	}
	return nil
}

// wants reports whether a group's run of a replicate is asked for: all are, unless
// some are named. Pretraining is, where a run starts from it.
func (x *runner) wants(g *group, seed uint64) bool {
	if len(x.options.Only) == 0 {
		return true
	}
	for _, name := range x.options.Only {
		arm, replicate, _ := results.ParseRunName(name) // checked before
		if replicate != seed {
			continue
		}
		if g == x.pre || slices.ContainsFunc(g.arms, func(at int) bool { return x.all[at].Slug == arm }) {
			return true
		}
	}
	return false
}

// asked is the number of different runs of a replicate that are asked for.
func (x *runner) asked(seed uint64) int {
	n := 0
	for i := range x.groups {
		if x.wants(&x.groups[i], seed) {
			n++
		}
	}
	if x.pre != nil && x.wants(x.pre, seed) {
		n++
	}
	return n
}
