package report

import (
	"bytes"
	"encoding/json"
	"strings"
	"testing"
)

// TestItems: what was said of the same test examples stands below the paired
// differences, and the two-way interval among the checks; without predictions,
// neither is there.
func TestItems(t *testing.T) {
	s := invented()
	page := pageOf(t, s)
	for _, want := range []string{"Test example by test example", "Two-way interval: a bootstrap (invented).", "2000, new each time", "two-way, over test examples too"} {
		if !strings.Contains(page, want) {
			t.Errorf("the page lacks %q", want)
		}
	}
	v := newView(s)
	table := v.itemTable()
	if len(table.Rows) != 6 || table.Rows[0][3] != missing || table.Rows[1][5] != "12" || table.Rows[1][4] != "35" {
		t.Errorf("rows %q", table.Rows)
	}
	checks := v.checks(s.Comparisons)[0]
	for i := range s.Comparisons {
		s.Comparisons[i].Items = nil
	}
	if newView(s).itemTable() != nil {
		t.Error("a table of examples that are not stored")
	}
	if without := v.checks(s.Comparisons)[0]; len(without.Columns) != len(checks.Columns)-1 || len(without.Rows[0]) != len(without.Columns) {
		t.Errorf("%d columns without predictions, %d with", len(without.Columns), len(checks.Columns))
	}
}

// TestTuning: what every arm tried and was given, and that the search is not done.
func TestTuning(t *testing.T) {
	s := invented()
	page := pageOf(t, s)
	for _, want := range []string{
		"tried 2 learning rates (0.01, 0.02) with 1 loss scale (none), each on 2 replicates from seed 900", "scored best in validation accuracy",
		"27 of 28 runs are stored", "not chosen yet", "one beyond might do better", "Everything that was tried",
	} {
		if !strings.Contains(page, want) {
			t.Errorf("the page lacks %q", want)
		}
	}
	var b bytes.Buffer
	if err := Markdown(&b, s); err != nil || !strings.Contains(b.String(), "## How each arm was tuned") {
		t.Errorf("Markdown without tuning, %v", err)
	}
	b.Reset()
	if err := JSON(&b, s); err != nil {
		t.Fatal(err)
	}
	var top struct {
		Tuning struct {
			Arms []struct {
				Chosen int
				Trials []struct{ Mean *float64 }
			}
		}
	}
	if err := json.Unmarshal(b.Bytes(), &top); err != nil || len(top.Tuning.Arms) != len(s.Arms) || top.Tuning.Arms[0].Trials[1].Mean != nil {
		t.Errorf("%+v, %v", top.Tuning, err)
	}
	b.Reset()
	if err := Sheet(&b, s, "tuning"); err != nil || strings.Count(b.String(), "\n") != 1+2*len(s.Arms) {
		t.Errorf("sheet %q, %v", b.String(), err)
	}
	s.Tuning = nil
	if strings.Contains(pageOf(t, s), `id="tuning"`) {
		t.Error("a section on tuning that was not asked for")
	}
}
