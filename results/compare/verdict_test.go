package compare

import (
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"

	"ulpine/results"
)

var accuracy, _ = results.FindMetric("test accuracy")

func question(arm string, margin float64) Question {
	return Question{Arm: arm, Against: "baseline", Metric: accuracy, Margin: margin, Confidence: 0.95}
}

// runs are stored runs of an arm with these final test accuracies, of
// replicates 100, 101, ...
func runs(arm string, accuracies ...float64) []results.Run {
	all := make([]results.Run, len(accuracies))
	for i, a := range accuracies {
		all[i] = results.Run{
			Arm: arm, Replicate: 100 + uint64(i), State: results.Stored,
			Epochs: []results.Epoch{{TestMetric: 0.1}, {TestMetric: a}},
			Digest: results.Hash{byte(len(arm)), byte(i)},
		}
	}
	return all
}

// constant is a slice of n equal accuracies.
func constant(n int, a float64) []float64 {
	xs := make([]float64, n)
	for i := range xs {
		xs[i] = a
	}
	return xs
}

// around are n accuracies that lie at a on average and swing by s.
func around(n int, a, s float64) []float64 {
	xs := constant(n, a)
	for i := range xs {
		xs[i] += s * float64(i%2*2-1)
	}
	return xs
}

func one(c results.Comparison) results.Comparison { return Decide([]results.Comparison{c})[0] }

func TestPairing(t *testing.T) {
	arm, base := runs("a", 0.75, 0.8, 0.625, 0.6), runs("baseline", 0.5, 0.5, 0.5, 0.5)
	arm[0], arm[2] = arm[2], arm[0]  // order does not matter
	arm[1].State = results.BrokenOff // 101 is not stored
	base[3].Replicate = 200          // 103 has no partner
	c := Pair(question("a", 0.01), arm, base)
	want := []float64{0.25, 0.125}
	if d := cmp.Diff(want, c.Differences); d != "" || c.N != 2 || c.Replicates[0] != 100 || c.Replicates[1] != 102 {
		t.Errorf("%v of replicates %v", c.Differences, c.Replicates)
	}
	loss, _ := results.FindMetric("test loss")
	q := question("a", 0.01)
	q.Metric = loss
	low, high := runs("a", 0), runs("baseline", 0)
	low[0].Epochs[1].TestLoss, high[0].Epochs[1].TestLoss = 1, 3
	if c := Pair(q, low, high); c.Differences[0] != 2 {
		t.Errorf("a smaller loss is better by %v, want 2", c.Differences[0])
	}
}

func TestVerdicts(t *testing.T) {
	base := runs("baseline", around(10, 0.9, 0.02)...)
	for _, c := range []struct {
		name string
		arm  []float64
		want results.VerdictKind
	}{
		{"much the same", around(10, 0.901, 0.022), results.Within},
		{"a little better", around(10, 0.93, 0.021), results.Within},
		{"much worse", around(10, 0.8, 0.021), results.Worse},
		{"about the margin", around(10, 0.8905, 0.03), results.Undecided},
		{"too scattered", around(10, 0.9, 0.1), results.Undecided},
	} {
		got := one(Pair(question("a", 0.01), runs("a", c.arm...), base))
		if got.Verdict.Kind != c.want {
			t.Errorf("%s: verdict %d, want %d; interval %v to %v", c.name, got.Verdict.Kind, c.want, got.Low, got.High)
		}
		undecided := c.want == results.Undecided
		if undecided != (got.Verdict.Pairs > 10) {
			t.Errorf("%s: needs about %d pairs", c.name, got.Verdict.Pairs)
		}
		// with one arm there is nothing to correct for
		if got.Holm != got.P || (got.Low > -0.01) != (c.want == results.Within) || (got.High < -0.01) != (c.want == results.Worse) {
			t.Errorf("%s: verdict %d does not fit interval %v to %v", c.name, c.want, got.Low, got.High)
		}
	}
}

func TestIdenticalArms(t *testing.T) {
	base := runs("baseline", around(5, 0.9, 0.02)...)
	twin := runs("baseline", around(5, 0.9, 0.02)...)
	c := one(Pair(question("twin", 0.01), twin, base))
	if c.Mean != 0 || c.SD != 0 || c.Low != 0 || c.High != 0 || c.Verdict.Kind != results.Within || len(c.Warnings) != 0 {
		t.Errorf("%+v", c)
	}
	other := runs("other", around(5, 0.9, 0.02)...) // the same scores, other bits
	c = one(Pair(question("other", 0.01), other, base))
	if c.Verdict.Kind != results.Within || len(c.Warnings) != 1 || !strings.Contains(c.Warnings[0], "too coarse") {
		t.Errorf("%+v", c)
	}
	down := runs("down", constant(4, 0.5)...)
	c = one(Pair(question("down", 0.01), down, runs("baseline", constant(4, 0.9)...)))
	if c.Verdict.Kind != results.Worse || c.SD != 0 {
		t.Errorf("equally worse: %+v", c.Verdict)
	}
	c = one(Pair(question("edge", 0.25), runs("edge", constant(4, 0.5)...), runs("baseline", constant(4, 0.75)...)))
	if c.Verdict.Kind != results.Undecided || c.Verdict.Pairs != 0 {
		t.Errorf("exactly on the margin: %+v", c.Verdict)
	}
}

func TestFewPairs(t *testing.T) {
	c := one(Pair(question("a", 0.01), runs("a", 0.9), runs("baseline", 0.9)))
	if c.Verdict != (results.Verdict{Kind: results.Undecided}) || !math.IsNaN(c.Low) || !math.IsNaN(c.SD) || c.Mean != 0 {
		t.Errorf("%+v", c)
	}
	if len(c.Warnings) != 1 || !strings.Contains(c.Warnings[0], "one pair gives no interval") {
		t.Errorf("warnings %q", c.Warnings)
	}
	c = one(Pair(question("a", 0.01), nil, runs("baseline", 0.9)))
	if c.Verdict != (results.Verdict{Kind: results.Undecided}) || !math.IsNaN(c.Mean) || len(c.Warnings) != 1 {
		t.Errorf("%+v", c)
	}
	c = one(Pair(question("a", 0.5), runs("a", 0.9, 0.91), runs("baseline", 0.9, 0.905)))
	if c.Verdict.Kind != results.Within || !math.IsNaN(c.Skewness) {
		t.Errorf("two pairs can decide: %+v", c)
	}
}

// TestVerdictWaits: nothing is decided before all planned pairs are there.
func TestVerdictWaits(t *testing.T) {
	q := question("a", 0.01)
	q.Planned = 10
	arm, base := runs("a", around(10, 0.9, 0.021)...), runs("baseline", around(10, 0.9, 0.02)...)
	c := one(Pair(q, arm[:9], base))
	if c.Verdict != (results.Verdict{Kind: results.Undecided, Pairs: 10}) || !strings.Contains(c.Warnings[0], "9 of 10 planned pairs") {
		t.Errorf("%+v %q", c.Verdict, c.Warnings)
	}
	if c = one(Pair(q, arm, base)); c.Verdict.Kind != results.Within {
		t.Errorf("all pairs: %+v", c.Verdict)
	}
	arm[3].Diverged = "loss is NaN"
	if c = one(Pair(q, arm[:9], base)); c.Verdict.Kind != results.Diverged {
		t.Errorf("divergence does not wait: %+v", c.Verdict)
	}
}

func TestDivergedAndStalled(t *testing.T) {
	base := runs("baseline", around(10, 0.9, 0.02)...)
	arm := runs("a", around(10, 0.95, 0.021)...) // better on average all the same
	arm[2].Diverged, arm[7].Diverged = "loss is NaN", "loss is NaN"
	arm[4].Stalled = true
	c := one(Pair(question("a", 0.01), arm, base))
	if c.Verdict != (results.Verdict{Kind: results.Diverged, Diverged: 2, Of: 10}) || c.Stalled != 1 || c.Diverged != 2 {
		t.Errorf("%+v", c)
	}
	if math.IsNaN(c.Mean) || c.N != 10 {
		t.Error("diverged runs are scored as they stand")
	}
	arm[2].Epochs[1].TestMetric = math.NaN() // not even evaluated
	c = one(Pair(question("a", 0.01), arm, base))
	if !math.IsNaN(c.Mean) || !math.IsNaN(c.Low) || c.Verdict.Kind != results.Diverged {
		t.Errorf("a difference that is no number: %+v", c)
	}

	stalled := runs("s", around(10, 0.9, 0.021)...)
	stalled[0].Stalled = true
	c = one(Pair(question("s", 0.01), stalled, base))
	if c.Verdict.Kind != results.Within || c.Stalled != 1 || !strings.Contains(strings.Join(c.Warnings, ";"), "stalled in 1 of 10") {
		t.Errorf("stalling is told apart from diverging: %+v", c)
	}

	base[0].Diverged = "loss is NaN"
	c = one(Pair(question("s", 0.01), stalled, base))
	if c.Verdict != (results.Verdict{Kind: results.Undecided}) || c.AgainstDiverged != 1 {
		t.Errorf("the other arm diverged: %+v", c.Verdict)
	}
}

func TestDoubts(t *testing.T) {
	outlier := constant(12, 0.9)
	for i := range outlier {
		outlier[i] += 0.001 * float64(i%3)
	}
	outlier[5] = 0.4
	c := Pair(question("a", 0.2), runs("a", outlier...), runs("baseline", constant(12, 0.9)...))
	all := strings.Join(c.Warnings, "\n")
	if !strings.Contains(all, "skewed (skewness −3.4") {
		t.Errorf("skewness %v, warnings %q", c.Skewness, all)
	}
	if c.Offered != Studentised || !strings.Contains(all, "the studentised bootstrap interval holds best: ") || !(c.StudentLow < c.Low) {
		t.Errorf("offered %q, %v to %v; warnings %q", c.Offered, c.StudentLow, c.StudentHigh, all)
	}
	if !(c.FlipLow < c.Mean) || !(c.FlipHigh > c.Mean) || math.Abs(c.Middle) > 0.002 || !(c.RankLow > -0.01) {
		t.Errorf("sign-flip %v to %v, centre %v, by ranks from %v", c.FlipLow, c.FlipHigh, c.Middle, c.RankLow)
	}
	// the bootstrap reaches further down than t here
	c = Pair(question("a", -c.Low+1e-4), runs("a", outlier...), runs("baseline", constant(12, 0.9)...))
	if all = strings.Join(c.Warnings, "\n"); !strings.Contains(all, "do not agree about the margin") {
		t.Errorf("t %v to %v, bootstrap %v to %v, warnings %q", c.Low, c.High, c.BootLow, c.BootHigh, all)
	}
}

// TestVeryManyPairs: beyond a thousand the t interval stands alone, and nothing is
// said of intervals that were not formed.
func TestVeryManyPairs(t *testing.T) {
	arm, base := runs("a", constant(mostPairs+1, 0.9)...), runs("baseline", constant(mostPairs+1, 0.9)...)
	for i := range 5 {
		arm[i].Epochs[1].TestMetric = 0.5
	}
	c := one(Pair(question("a", 0.02), arm, base))
	if c.Verdict.Kind != results.Within || !skewed(&c) || c.Offered != "" || !math.IsNaN(c.StudentLow) || !math.IsNaN(c.FlipLow) || len(c.Warnings) != 0 {
		t.Errorf("%+v, offered %q, warnings %q", c.Verdict, c.Offered, c.Warnings)
	}
}

// TestHolmDecides: alone the arm is within; among five it is not, while its
// drawn interval stays the same.
func TestHolmDecides(t *testing.T) {
	base := runs("baseline", constant(10, 0.9)...)
	close := Pair(question("a", 0.01), runs("a", around(10, 0.9, 0.0115)...), base)
	wide := Pair(question("b", 0.01), runs("b", around(10, 0.9, 0.1)...), base)
	if alone := one(close); alone.Verdict.Kind != results.Within {
		t.Fatalf("alone: %+v, p %v", alone.Verdict, alone.P)
	}
	family := []results.Comparison{wide, close, wide, wide, wide}
	before := family[1]
	all := Decide(family)
	got := all[1]
	if got.Verdict.Kind != results.Undecided || got.Low != close.Low || !(got.Low > -0.01) || got.Verdict.Pairs <= 10 {
		t.Errorf("among five: %+v, low %v", got.Verdict, got.Low)
	}
	if w := strings.Join(got.Warnings, "\n"); !strings.Contains(w, "not after correction for 5 comparisons") {
		t.Errorf("warnings %q", w)
	}
	if d := cmp.Diff(before, family[1], cmpopts.EquateNaNs()); d != "" {
		t.Errorf("Decide altered its argument:\n%s", d)
	}
	// a diverged arm stays in the family
	diverged := runs("d", constant(10, 0.9)...)
	diverged[0].Diverged = "loss is NaN"
	two := Decide([]results.Comparison{close, Pair(question("d", 0.01), diverged, base)})
	near(t, "p in a family of two", two[0].Holm, 2*close.P, 1e-15)
}

// TestFalseWithin simulates tables of four arms that all sit exactly on the
// margin: at most a = 2.5 % of the tables may hold a "within", and as many a
// "worse"; far from the margin the verdicts come as they should.
func TestFalseWithin(t *testing.T) {
	trials, seed := 20_000, uint64(11)
	if testing.Short() {
		trials = 4000
	}
	const n, arms, margin = 8, 4, 0.01
	rng := rand.New(rand.NewPCG(seed, 0))
	table := func(at float64) []results.Comparison {
		family := make([]results.Comparison, arms)
		for i := range family {
			xs := normals(rng, n, at, 0.01)
			c := &family[i]
			c.Margin, c.Confidence, c.N, c.Differences = margin, 0.95, n, xs
			c.Mean, c.SD = mean(xs), deviation(xs)
			c.P, c.PWorse = pValues(c.Mean, c.SD, n, margin)
		}
		return judge(family, shares{})
	}
	share := func(at float64, kind results.VerdictKind, trials int) float64 {
		hits := 0
		for range trials {
			for _, c := range table(at) {
				if c.Verdict.Kind == kind {
					hits++
					break
				}
			}
		}
		return float64(hits) / float64(trials)
	}
	limit := 0.025 + 4*math.Sqrt(0.025*0.975/float64(trials))
	for kind, name := range map[results.VerdictKind]string{results.Within: "within", results.Worse: "worse"} {
		got := share(-margin, kind, trials)
		t.Logf("false %q in %.4f of tables, seed %d", name, got, seed)
		if got > limit || got < 0.012 {
			t.Errorf("false %q in %.4f of tables, want about 0.0245, at most %.4f", name, got, limit)
		}
	}
	if got := share(0.02, results.Within, 500); got < 0.99 {
		t.Errorf("clearly within, but found in %.3f of tables", got)
	}
	if got := share(-0.04, results.Worse, 500); got < 0.99 {
		t.Errorf("clearly worse, but found in %.3f of tables", got)
	}
}

// TestEpochsToTarget: fewer epochs are better, and a target that was never
// reached is told.
func TestEpochsToTarget(t *testing.T) {
	q := question("a", 1)
	q.Metric, _ = results.FindMetric("epochs to test accuracy 0.9")
	base := runs("baseline", around(6, 0.95, 0.01)...) // in the second epoch
	arm := runs("a", around(6, 0.95, 0.02)...)
	arm[3].Epochs[0].TestMetric = 0.92 // in the first
	arm[5].Epochs[1].TestMetric = 0.8  // never
	c := Pair(q, arm, base)
	if d := cmp.Diff([]float64{0, 0, 0, 1, 0, -1}, c.Differences); d != "" {
		t.Errorf("%v", c.Differences)
	}
	if w := strings.Join(c.Warnings, "\n"); !strings.Contains(w, "never reached the target in 1 of 6 replicates") || strings.Contains(w, "compared with") {
		t.Errorf("warnings %q", w)
	}
	c.Against = "b"
	if got := contrast(&results.Study{}, &c); got != "a does not differ on average from b (95 % interval −0.66 to 0.66, 6 pairs): undecided after 6 pairs." {
		t.Error(got)
	}
}
