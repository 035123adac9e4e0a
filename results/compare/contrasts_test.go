package compare

import (
	"strings"
	"testing"

	"ulpine/results"
)

// TestSeriesOfContrasts: contrasts of a grid along one axis make one sentence, others
// one each.
func TestSeriesOfContrasts(t *testing.T) {
	s := results.Study{Arms: []results.Arm{{Name: "baseline", Slug: "baseline", Baseline: true}}}
	for _, split := range []string{"E4M4", "E5M3", "E6M2", "E7M1"} {
		for _, rounding := range []string{"nearest-even", "stochastic"} {
			s.Arms = append(s.Arms, results.Arm{
				Name: split + " " + rounding, Slug: split + "-" + rounding, Grid: "nine bits",
				Axes: []results.Coordinate{{Axis: "split", Value: split}, {Axis: "rounding", Value: rounding}},
			})
		}
		c := compared(split+"-stochastic", results.Verdict{Kind: results.Within}, 12)
		c.Against, c.Headline = split+"-nearest-even", true
		s.Contrasts = append(s.Contrasts, c)
	}
	s.Contrasts[1].Verdict, s.Contrasts[1].Mean = results.Verdict{Kind: results.Undecided}, -0.013
	s.Contrasts[2].Verdict, s.Contrasts[2].Diverged = results.Verdict{Kind: results.Diverged, Diverged: 2, Of: 12}, 2
	want := "Along rounding, stochastic against nearest-even: within the margin of 0.5 percentage points at E4M4 (+8.12) and E7M1 (+8.12); " +
		"undecided at E5M3 (−1.30); diverged at E6M2 (12 pairs each)."
	if got := Answer(&s); got != want {
		t.Errorf("got  %s\nwant %s", got, want)
	}
	for i := range s.Contrasts {
		s.Contrasts[i].Planned, s.Contrasts[i].LookEvery = 12, 4
	}
	if got := Answer(&s); !strings.HasSuffix(got, "(12 pairs each, look 3 of 3).") {
		t.Errorf("%s", got)
	}
	s.Contrasts[3].N = 11
	if got := Answer(&s); !strings.HasSuffix(got, "(pairs as in the table).") {
		t.Errorf("%s", got)
	}
	lone := compared("E4M4-stochastic", results.Verdict{Kind: results.Within}, 12)
	lone.Against, lone.Headline = "E5M3-nearest-even", true // two axes differ
	s.Contrasts = append(s.Contrasts[:2], lone)
	if got := Answer(&s); !strings.Contains(got, "E4M4 stochastic scores 8.12 percentage points above E5M3 nearest-even (95 % interval") || strings.Count(got, "Along") != 1 {
		t.Errorf("%s", got)
	}
}

// TestAnswerTellsLookBitsAndTuning: what a stranger asks besides the verdict.
func TestAnswerTellsLookBitsAndTuning(t *testing.T) {
	arms := []results.Arm{
		{Name: "baseline", Slug: "baseline", Baseline: true, Bits: 32},
		{Name: "a", Slug: "a", Bits: 9},
		{Name: "b", Slug: "b", Bits: 10.5},
		{Name: "c", Slug: "c", Bits: 8},
	}
	a, b, c := compared("a", results.Verdict{Kind: results.Within}, 20), compared("b", results.Verdict{Kind: results.Within}, 20), compared("c", results.Verdict{Pairs: 40}, 20)
	for _, one := range []*results.Comparison{&a, &b, &c} {
		one.Planned, one.LookEvery = 40, 5
	}
	s := results.Study{Arms: arms, Comparisons: []results.Comparison{a, b, c}, Tuning: &results.Tuning{
		Done: true, LearningRates: []string{"0.1", "0.2"}, Metric: "validation loss", Replicates: 1, Arms: []results.TunedArm{{Trials: make([]results.Trial, 2)}},
	}}
	want := "Of 3 arms, 2 stay within the margin of 0.5 percentage points in test accuracy: a and b, with rounding as planned (20 pairs each, look 4 of 8). " +
		"They keep 9 to 10.5 bits a value in training memory, the baseline 32. c is undecided after 20 pairs, look 4 of 8; 40 at most are planned. " +
		"Every arm, the baseline too, was given the learning rate of the best of the same 2 trials, by validation loss on 1 replicate that is not among these."
	if got := Answer(&s); got != want {
		t.Errorf("got  %s\nwant %s", got, want)
	}
	s.Tuning.Done, s.Tuning.Stored, s.Tuning.Runs = false, 3, 8
	if got := Answer(&s); got != "There is no answer yet: 3 of 8 runs of the tuning are stored, and no arm has its values." {
		t.Errorf("%s", got)
	}
}

// TestTwoDigits: estimates are rounded up.
func TestTwoDigits(t *testing.T) {
	for n, want := range map[int]int{0: 0, 7: 7, 99: 99, 100: 100, 101: 110, 734: 740, 73568: 74000, 999: 1000, 1_000_000: 1_000_000} {
		if got := twoDigits(n); got != want {
			t.Errorf("%d: %d, want %d", n, got, want)
		}
	}
}
