package main

import (
	"encoding/json"
	"errors"
	"strings"
	"testing"

	"ulpine/results"
	"ulpine/results/store"
)

// verdictsJSON is the part of verdicts --json that these tests read.
type verdictsJSON struct {
	Answer      string
	Comparisons []struct {
		Arm, Verdict string
		N            int
		Mean, Low    *float64
		Warnings     []string
		NotFinite    map[string]string `json:"not_finite"`
	}
}

// TestRequireWithinNamesThem: what is not within is named; nothing is not within.
func TestRequireWithinNamesThem(t *testing.T) {
	within, worse := results.Verdict{Kind: results.Within}, results.Verdict{Kind: results.Worse}
	for _, c := range []struct {
		study results.Study
		want  string
	}{
		{results.Study{}, "no arm was compared, so none is within the margin"},
		{results.Study{Comparisons: []results.Comparison{{Arm: "a", Verdict: within}}}, ""},
		{
			results.Study{Comparisons: []results.Comparison{{Arm: "a", Verdict: within}}, MarginChanged: "margin was 0.01, is 0.02"},
			"the claim was changed after the first run, so no verdict counts as within the margin that was fixed: margin was 0.01, is 0.02",
		},
		{results.Study{Comparisons: []results.Comparison{{Arm: "a", Verdict: within}, {Arm: "b"}}}, "not within the margin: b"},
		{
			results.Study{
				Comparisons: []results.Comparison{{Arm: "a", Verdict: worse}},
				Contrasts:   []results.Comparison{{Arm: "b", Against: "a", Verdict: results.Verdict{Kind: results.Diverged}}},
			},
			"not within the margin: a, b against a",
		},
	} {
		err := requireWithin(&c.study)
		var coded *exitError
		switch {
		case c.want == "":
			if err != nil {
				t.Error(err)
			}
		case !errors.As(err, &coded) || coded.code != exitVerdict || err.Error() != c.want:
			t.Errorf("%v, want %q", err, c.want)
		}
	}
}

// asJSON reads verdicts --json, whatever the exit code.
func asJSON(t *testing.T, args ...string) (v verdictsJSON, code int) {
	t.Helper()
	out, errs, code := ulpine(t, append([]string{"verdicts", "--json"}, args...)...)
	if err := json.Unmarshal([]byte(out), &v); err != nil {
		t.Fatalf("verdicts %v: %v\n%s%s", args, err, out, errs)
	}
	return v, code
}

// TestVerdictsTable: verdict, difference, interval, n and the rail, of every arm.
func TestVerdictsTable(t *testing.T) {
	inFolder(t, map[string]string{"tiny.toml": tiny})
	must(t, "run", "tiny.toml", "--no-report", "--quiet")
	out := must(t, "verdicts", "tiny.toml", "--require-within")
	for _, want := range []string{
		"within the margin of 50 percentage points in test accuracy", "with nearest-even rounding (3 pairs each).",
		"interval", "┃", "━", "same as baseline", "[0, 0]",
	} {
		if !strings.Contains(out, want) {
			t.Errorf("verdicts lack %q:\n%s", want, out)
		}
	}
	v, code := asJSON(t, "tiny.toml", "--require-within")
	if code != exitOK || len(v.Comparisons) != 2 || v.Comparisons[1].Verdict != "within margin" || *v.Comparisons[1].Low != 0 || !strings.Contains(out, v.Answer[:40]) {
		t.Errorf("exit code %d, %+v", code, v)
	}
	text, errs, code := ulpine(t, "verdicts", "strict.toml", "--require-within")
	if code != exitBadInput || text != "" || !strings.Contains(errs, "strict.toml") {
		t.Errorf("no plan: exit code %d, %q", code, errs)
	}
}

// TestVerdictsOfOnePair: no interval, said so, and never "within".
func TestVerdictsOfOnePair(t *testing.T) {
	inFolder(t, map[string]string{"tiny.toml": strings.Replace(tiny, "count = 3", "count = 1", 1)})
	must(t, "run", "tiny.toml", "--no-report", "--quiet")
	out, errs, code := ulpine(t, "verdicts", "tiny.toml", "--require-within")
	if code != exitVerdict || !strings.Contains(errs, "not within the margin: bf16-nearest, same-as-baseline") {
		t.Errorf("exit code %d, %q", code, errs)
	}
	for _, want := range []string{"No arm is shown to stay within", "one pair gives no interval", "undecided"} {
		if !strings.Contains(out, want) {
			t.Errorf("verdicts lack %q:\n%s", want, out)
		}
	}
	if strings.Contains(out, "within margin") {
		t.Errorf("one pair decided something:\n%s", out)
	}
	v, code := asJSON(t, "tiny.toml", "--require-within")
	for _, c := range v.Comparisons {
		if code != exitVerdict || c.Verdict != "undecided" || c.Low != nil || c.NotFinite["low"] != "NaN" || c.Mean == nil || c.N != 1 {
			t.Errorf("exit code %d, %+v", code, c)
		}
	}
}

// TestVerdictsAllDiverged: divergence is an outcome, counted and not hidden.
func TestVerdictsAllDiverged(t *testing.T) {
	wild := tiny[:strings.Index(tiny, "[[arm]]")] + `
[[arm]]
name = "a"
everything = "fp16"
loss_scale = { kind = "fixed", value = 1073741824 }
[[arm]]
name = "b"
storage = "fp16"
loss_scale = { kind = "fixed", value = 1073741824 }
`
	inFolder(t, map[string]string{"wild.toml": wild})
	must(t, "run", "wild.toml", "--no-report", "--quiet")
	out, _, code := ulpine(t, "verdicts", "wild.toml", "--require-within")
	if code != exitVerdict {
		t.Errorf("exit code %d", code)
	}
	for _, want := range []string{
		"No arm is shown to stay within", "a diverged in 3 of 3 replicates and b in 3 of 3.", "diverged 3 of 3",
		"1 a: diverged in 3 of 3 replicates (exact 95 % interval 29.2 to 100 %)", // 0.025^(1/3) = 0.292
	} {
		if !strings.Contains(strings.Join(strings.Fields(out), " "), want) {
			t.Errorf("verdicts lack %q:\n%s", want, out)
		}
	}
	if v, _ := asJSON(t, "wild.toml"); v.Comparisons[0].Verdict != "diverged 3 of 3" {
		t.Errorf("%+v", v.Comparisons[0])
	}
}

// TestVerdictsWithoutRuns: a store that never saw the plan is told from an answer.
func TestVerdictsWithoutRuns(t *testing.T) {
	other := strings.Replace(tiny, "data_seed = 1", "data_seed = 2", 1)
	inFolder(t, map[string]string{"tiny.toml": tiny, "other.toml": other})
	must(t, "run", "tiny.toml", "--no-report", "--quiet")
	s, err := store.Open("empty.store", store.Options{})
	if err != nil {
		t.Fatal(err)
	}
	if err := s.Close(); err != nil {
		t.Fatal(err)
	}
	for _, args := range [][]string{
		{"verdicts", "other.toml"},
		{"verdicts", "other.toml", "--json"},
		{"verdicts", "tiny.toml", "--store", "empty.store"},
		{"verdicts", "tiny.toml", "--store", "empty.store", "--require-within"},
	} {
		out, errs, code := ulpine(t, args...)
		if code != exitBadInput || out != "" || strings.Count(errs, "\n") != 1 || !strings.Contains(errs, "holds no run of "+args[1]) ||
			!strings.Contains(errs, "ulpine run "+args[1]) {
			t.Errorf("ulpine %s: exit code %d, %q%q", strings.Join(args, " "), code, out, errs)
		}
	}
}
