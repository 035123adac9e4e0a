package experiments

import (
	"fmt"
	"math"
	"strings"

	"ulpine/experiments/plan"
	"ulpine/results"
)

// controlWords say what a control computes otherwise than the baseline.
var controlWords = map[string]string{
	plan.ControlFP64Slug:     "in binary64",
	plan.ControlPairwiseSlug: "with pairwise sums",
}

// noiseFloor sets the range of the controls' paired differences from the baseline:
// what appears when nothing but the rounding of the baseline itself changes.
// Controls that diverged count for nothing and are warned of.
func noiseFloor(l *layout, study *results.Study, pair func(arm, against string, margin float64, headline bool) results.Comparison) {
	var words []string
	replicates := 0
	for i := range l.Controls {
		slug := l.Controls[i].Slug
		c := pair(slug, l.Baseline().Slug, study.Margin, false)
		if c.Diverged > 0 {
			study.Warnings = append(study.Warnings, fmt.Sprintf("the control %s diverged in %d of %s: the noise floor leaves it out",
				controlWords[slug], c.Diverged, number(len(c.Differences), "replicate")))
			continue
		}
		known := 0 // differences; none before the first run
		for _, d := range c.Differences {
			if math.IsNaN(d) || math.IsInf(d, 0) {
				continue // the metric was not to be had, which the comparison of arms tells
			}
			known++
			study.NoiseLow, study.NoiseHigh = min(study.NoiseLow, d), max(study.NoiseHigh, d)
		}
		if known > 0 {
			words = append(words, controlWords[slug])
			replicates = max(replicates, known)
		}
	}
	if len(words) > 0 {
		study.NoiseFrom = fmt.Sprintf("the baseline again %s, %s", strings.Join(words, " and "), number(replicates, "replicate"))
	}
}
