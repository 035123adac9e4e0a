package experiments_test

import (
	"bytes"
	"context"
	"os"
	"path/filepath"
	"testing"

	"ulpine/experiments"
	"ulpine/experiments/plan"
	"ulpine/results"
	"ulpine/results/report"
	"ulpine/results/store"
)

// firstLookDigest is the store digest of the README's first command. It was
// recorded when the products still ran on portable Go, before there were vector
// kernels; every machine, build and number of workers must come to it. A change of
// arithmetic or of the plan records it anew.
const firstLookDigest = "89a4fea6c59f3ccc0d704d5f113b6c34acd7bd73ecf7bc5ec965b293d677bb6e"

// TestFirstLook runs the README's first command and holds it to its recorded
// result: every bit, and what the answer rests on, one arm within the margin and
// one worse than it.
func TestFirstLook(t *testing.T) {
	if testing.Short() {
		t.Skip("trains 56 networks")
	}
	p, err := plan.Load("plans/first-look.toml")
	if err != nil {
		t.Fatal(err)
	}
	s, err := store.Open(filepath.Join(t.TempDir(), store.DefaultPath), store.Options{})
	if err != nil {
		t.Fatal(err)
	}
	defer s.Close()
	summary, err := experiments.Run(context.Background(), p, s, experiments.Options{})
	if err != nil {
		t.Fatal(err)
	}
	if got := summary.StoreDigest.String(); got != firstLookDigest {
		t.Errorf("store digest %s, recorded %s", got, firstLookDigest)
	}
	study, err := experiments.Study(p, s)
	if err != nil {
		t.Fatal(err)
	}
	kinds := map[string]results.VerdictKind{}
	for _, c := range study.Comparisons {
		kinds[c.Arm] = c.Verdict.Kind
	}
	if kinds["bf16-nearest"] != results.Worse || kinds["bf16-stochastic-update"] != results.Within {
		t.Errorf("verdicts %v", kinds)
	}
	checkFigure(t, study)
}

// checkFigure holds the README's figure to the one that the report draws now:
// ulpine report experiments/plans/first-look.toml --figures DIR writes it anew, as
// margin-rail.svg.
func checkFigure(t *testing.T, study *results.Study) {
	t.Helper()
	shown, err := os.ReadFile("../.figures/first-look-differences.svg")
	if err != nil {
		t.Fatal(err)
	}
	for _, f := range report.Figures(study) {
		if f.ID != "margin-rail" {
			continue
		}
		var drawn bytes.Buffer
		if err := f.WritePlain(&drawn); err != nil {
			t.Fatal(err)
		}
		if !bytes.Equal(drawn.Bytes(), shown) {
			t.Error("the README's figure is not the one that the report draws; write it anew")
		}
		return
	}
	t.Error("the report has no rail")
}
