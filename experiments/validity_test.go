package experiments

import (
	"math"
	"math/rand/v2"
	"os"
	"strconv"
	"testing"

	"ulpine/results"
	"ulpine/results/compare"
)

// invented is a replicate's scores of one pair of values: what the choice sees and
// what is reported, which hang together.
func invented(rng *rand.Rand) (validation, test float64) {
	// t with 3 degrees of freedom: heavy tails
	a, b, c := rng.NormFloat64(), rng.NormFloat64(), rng.NormFloat64()
	common := rng.NormFloat64() / math.Sqrt((a*a+b*b+c*c)/3)
	return 0.9 + 0.01*(common+0.3*rng.NormFloat64()), 0.9 + 0.01*(common+0.3*rng.NormFloat64())
}

// scored is a stored run with a test accuracy.
func scored(arm string, replicate uint64, test float64) results.Run {
	return results.Run{Arm: arm, Replicate: replicate, State: results.Stored, Epochs: []results.Epoch{{TestMetric: test}}}
}

// TestTuningDoesNotInflate simulates the whole of tuning and claim: an arm whose every
// pair of values lies exactly on the margin, chosen as tunings are, and reported on
// fresh replicates, is falsely "within" in no more than 2.5 % of plans. Were the arm
// reported on the replicates that it was chosen by, as is not done here, it would be
// in many more: choosing the best of twelve makes it look better than it is.
func TestTuningDoesNotInflate(t *testing.T) {
	const pairs, replicates, margin = 12, 8, 0.01
	plans := 300
	if testing.Short() {
		plans = 150
	}
	if asked, err := strconv.Atoi(os.Getenv("ULPINE_VALIDITY")); err == nil {
		plans = max(plans, asked/20)
	}
	accuracy, _ := results.FindMetric("test accuracy")
	chosenBy, _ := results.FindMetric("validation accuracy")
	rng := rand.New(rand.NewPCG(17, 5))
	fresh, reused := 0, 0
	for range plans {
		trials := make([]results.Trial, pairs)
		seen := make([][]results.Run, pairs)
		for i := range trials {
			for k := range replicates {
				v, test := invented(rng)
				trials[i].Scores = append(trials[i].Scores, v)
				seen[i] = append(seen[i], scored("a", uint64(k), test-margin))
			}
			trials[i].N, trials[i].Mean = replicates, meanScore(&results.Trial{Scores: trials[i].Scores})
		}
		chosen := best(trials, chosenBy)
		var arm, base []results.Run
		for k := range replicates {
			_, test := invented(rng)
			arm = append(arm, scored("a", uint64(k), test-margin))
			_, test = invented(rng)
			base = append(base, scored("baseline", uint64(k), test))
		}
		within := func(arm []results.Run) int {
			q := compare.Question{Arm: "a", Against: "baseline", Metric: accuracy, Margin: margin, Confidence: 0.95, Planned: replicates}
			if compare.Decide([]results.Comparison{compare.Pair(q, arm, base)})[0].Verdict.Kind == results.Within {
				return 1
			}
			return 0
		}
		fresh, reused = fresh+within(arm), reused+within(seen[chosen])
	}
	rate := func(n int) float64 { return float64(n) / float64(plans) }
	limit := 0.025 + 4*math.Sqrt(0.025*0.975/float64(plans))
	t.Logf("false \"within\" in %.4f of %d plans on fresh replicates, %.4f on those chosen by", rate(fresh), plans, rate(reused))
	if rate(fresh) > limit {
		t.Errorf("false \"within\" in %.4f of plans, at most %.4f may be", rate(fresh), limit)
	}
	if rate(reused) < 0.04 {
		t.Errorf("chosen by the replicates that are reported: %.4f; the check sees nothing", rate(reused))
	}
}
