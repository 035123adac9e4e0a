package experiments

import (
	"context"
	"slices"
	"strings"
	"testing"

	"ulpine/results"
	"ulpine/results/compare"
)

func TestStudyOfARealPlan(t *testing.T) {
	p := tinyPlan(t, pretraining)
	s := openStore(t)
	empty, err := Study(p, s)
	if err != nil || len(empty.Runs) != 0 || empty.Answer != "There is no answer yet: no pair of runs is stored." || !empty.MarginFixed.IsZero() {
		t.Errorf("before the first run: %q, %d runs, %v", empty.Answer, len(empty.Runs), err)
	}
	summary, err := Run(context.Background(), p, s, Options{Workers: 2, CodeVersion: "v9", Host: "here"})
	if err != nil {
		t.Fatal(err)
	}
	study, err := Study(p, s)
	if err != nil {
		t.Fatal(err)
	}
	if study.StoreDigest != summary.StoreDigest.String() || !study.MarginFixed.Equal(summary.Claim.Fixed) || study.MarginChanged != "" {
		t.Errorf("digest %s, fixed %v, changed %q", study.StoreDigest, study.MarginFixed, study.MarginChanged)
	}
	var names []string
	for _, r := range study.Runs {
		names = append(names, r.Name())
		if r.State != results.Stored || r.CodeVersion != "v9" || r.Host != "here" || r.Data.IsZero() || r.Wall <= 0 || len(r.Steps) == 0 ||
			len(r.Final) != 0 || len(r.Counters) == 0 || r.Classes != 5 || len(r.Confusion) != 25 {
			t.Errorf("%s: %d steps, %d counters, %d classes", r.Name(), len(r.Steps), len(r.Counters), r.Classes)
		}
	}
	if len(names) != 15 || !slices.Contains(names, "fp32-again/101") || !slices.Contains(names, "pretrain/102") {
		t.Errorf("runs %v", names)
	}
	checkComparisons(t, study)
	checkDescription(t, study)
}

func checkComparisons(t *testing.T, study *results.Study) {
	t.Helper()
	var order []string
	for _, c := range study.Comparisons {
		order = append(order, c.Arm)
		if c.Against != "baseline" || c.N != 3 || c.Planned != 3 || c.Headline {
			t.Errorf("%+v", c)
		}
	}
	if !slices.Equal(order, []string{"bf16-nearest", "bf16-stochastic", "fp32-again"}) {
		t.Errorf("comparisons %v", order)
	}
	twin := study.Comparisons[2]
	if twin.Mean != 0 || twin.SD != 0 || twin.Verdict.Kind != results.Within || strings.Contains(strings.Join(twin.Warnings, ""), "coarse") {
		t.Errorf("an arm equal to the baseline: %+v", twin)
	}
	if len(study.Contrasts) != 1 || study.Contrasts[0].Arm != "bf16-stochastic" || study.Contrasts[0].Against != "bf16-nearest" ||
		study.Contrasts[0].Margin != 0.1 || !study.Contrasts[0].Headline {
		t.Errorf("contrasts %+v", study.Contrasts)
	}
	if study.Answer != compare.Answer(study) || !strings.Contains(study.Answer, "fp32 again, with nearest-even rounding") {
		t.Errorf("answer %q", study.Answer)
	}
}

func checkDescription(t *testing.T, study *results.Study) {
	t.Helper()
	if study.Network != "conv1d out=2 width=9 stride=8, relu, dense 5; 175 parameters" {
		t.Errorf("network %q", study.Network)
	}
	if !strings.HasPrefix(study.Training, "sgd momentum 0.9, learning rate 0.05, batch 16, 2 epochs; after pretraining for 1 epoch on pump") {
		t.Errorf("training %q", study.Training)
	}
	if len(study.Classes) != 5 || study.Planned != 3 || study.Claim.FirstSeed != 100 || study.PlanText == "" || study.Resolved == "" || study.LongestSum == 0 {
		t.Errorf("%+v", study.Claim)
	}
	if len(study.Rerun) != 2 || !strings.Contains(study.Rerun[1], "--only baseline/100") || !strings.HasPrefix(study.Rerun[0], "go run ./cmd/ulpine run tiny.toml --store /") {
		t.Errorf("rerun %q", study.Rerun)
	}
	if all := strings.Join(study.Cautions, "\n"); !strings.Contains(all, "no approval for a safety-related use") || !strings.Contains(all, "invented") {
		t.Errorf("cautions %q", all)
	}
	if base := study.Arms[0]; !base.Baseline || base.Bits != 32 || len(base.Settings) == 0 {
		t.Errorf("baseline %+v", base)
	}
	if b := study.Arms[1].Bits; b != 16 {
		t.Errorf("bf16 everywhere takes %v bits a value", b)
	}
}

// TestClaimChangedLater: the margin of the plan counts, and the change is told.
func TestClaimChangedLater(t *testing.T) {
	s := openStore(t)
	if _, err := Run(context.Background(), tinyPlan(t, ""), s, Options{}); err != nil {
		t.Fatal(err)
	}
	study, err := Study(tinyPlan(t, "", "margin = 0.2", "margin = 0.001", "count = 3", "count = 4"), s)
	if err != nil || study.MarginChanged != "margin was 0.2, is 0.001; replicate count was 3, is 4" || study.FixedClaim.Claim.Margin != 0.2 {
		t.Errorf("%q, %v", study.MarginChanged, err)
	}
	if twin := study.Comparisons[2]; twin.Verdict.Kind != results.Within { // it has the baseline's runs, whatever is planned
		t.Errorf("%s: %+v", twin.Arm, twin.Verdict)
	}
	for _, c := range study.Comparisons[:2] { // a fourth pair is planned now
		if c.Verdict != (results.Verdict{Kind: results.Undecided, Pairs: 4}) || c.Margin != 0.001 || c.N != 3 {
			t.Errorf("%s: %+v", c.Arm, c.Verdict)
		}
	}
}

func TestQuoted(t *testing.T) {
	for in, want := range map[string]string{
		"a/b.toml": "a/b.toml", "my plan.toml": "'my plan.toml'", "it's": `'it'\''s'`, "$HOME": "'$HOME'",
	} {
		if got := quoted(in); got != want {
			t.Errorf("%s quoted as %s, want %s", in, got, want)
		}
	}
}
