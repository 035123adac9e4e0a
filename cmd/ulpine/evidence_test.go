package main

import (
	"bytes"
	"encoding/json"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/mattn/go-runewidth"

	"ulpine/experiments"
	"ulpine/experiments/plan"
	"ulpine/results/report"
	"ulpine/results/store"
)

// narrow is a study's table at 60 characters: no line may be longer.
func narrow(t *testing.T, name string) string {
	t.Helper()
	p, err := plan.Load(name)
	if err != nil {
		t.Fatal(err)
	}
	s, err := store.Open(store.DefaultPath, store.Options{ReadOnly: true})
	if err != nil {
		t.Fatal(err)
	}
	defer s.Close()
	study, err := experiments.Study(p, s)
	if err != nil {
		t.Fatal(err)
	}
	var b bytes.Buffer
	if err := report.Table(&b, study, 60, false); err != nil {
		t.Fatal(err)
	}
	for line := range strings.Lines(b.String()) {
		if n := runewidth.StringWidth(strings.TrimRight(line, "\n")); n > 60 {
			t.Errorf("a line of %d characters: %q", n, line)
		}
	}
	return flat(b.String())
}

// flat is a text with every stretch of white space a blank.
func flat(text string) string { return strings.Join(strings.Fields(text), " ") }

// holds checks that a text says all of these.
func holds(t *testing.T, text string, wants ...string) {
	t.Helper()
	for _, want := range wants {
		if !strings.Contains(text, want) {
			t.Errorf("no %q in:\n%s", want, text)
		}
	}
}

// TestVerdictsWithLooks: the answer names the look, table and JSON say when there was
// one; what is not decided at a look is not within.
func TestVerdictsWithLooks(t *testing.T) {
	looking := strings.Replace(tiny, "count = 3", "up_to = 8\nlook_every = 4", 1)
	looking = strings.Replace(looking, `metric = "test accuracy"`, `metric = "test loss"`, 1)
	inFolder(t, map[string]string{"looks.toml": looking})
	out := flat(must(t, "run", "looks.toml", "--no-report", "--quiet"))
	holds(t, out, "(4 pairs each, look 1 of 2)", "looks after every 4 pairs, 8 at most; stopped at look 1 of 2")
	holds(t, narrow(t, "looks.toml"), "look 1 of 2", "stopped at look 1 of 2")
	var v struct {
		Answer, Looks string
		Comparisons   []struct {
			LookEvery int  `json:"look_every"`
			SameRuns  bool `json:"same_runs"`
		}
	}
	text, _, code := ulpine(t, "verdicts", "looks.toml", "--json", "--require-within")
	if err := json.Unmarshal([]byte(text), &v); err != nil || code != exitOK {
		t.Fatalf("%v, exit code %d", err, code)
	}
	if !strings.Contains(v.Looks, "look 1 of 2") || v.Comparisons[0].LookEvery != 4 || v.Comparisons[0].SameRuns || !v.Comparisons[1].SameRuns {
		t.Errorf("%+v", v)
	}
}

// tunedTiny tunes the tiny plan.
var tunedTiny = strings.Replace(tiny, "validation = 0", "validation = 20", 1) + `
[[contrast]]
arm = "bf16 nearest"
against = "same as baseline"
[tuning]
learning_rate = [0.01, 0.02, 0.05]
replicates = 2
`

// TestVerdictsTuned: how arms were tuned stands in announcement, table and JSON; a
// tuning that is not finished is no answer.
func TestVerdictsTuned(t *testing.T) {
	inFolder(t, map[string]string{"tuned.toml": tunedTiny})
	out, errs, code := ulpine(t, "run", "tuned.toml", "--no-report")
	if code != exitOK {
		t.Fatalf("exit code %d: %s", code, errs)
	}
	holds(t, errs, "27 runs: 3 arms x 3 replicates, after 18 of tuning: 3 arms x 3 trials x 2 replicates", "tuned: learning rate ")
	for _, text := range []string{flat(out), flat(must(t, "verdicts", "tuned.toml", "--require-within")), narrow(t, "tuned.toml")} {
		holds(t, text, "tuning: learning rate of 0.01, 0.02, 0.05: best mean validation accuracy of 2 replicates, seeds 100100 to 100101",
			"- learning rate 0.0", ": baseline", "Every arm, the baseline too, was given the learning rate of the best of the same 3 trials")
	}
	var v struct {
		Tuning struct {
			Done bool
			Arms []struct {
				Arm    string
				Chosen int
				Trials []struct {
					LearningRate string `json:"learning_rate"`
					Mean         *float64
					Scores       []float64
				}
			}
		}
	}
	if err := json.Unmarshal([]byte(must(t, "verdicts", "tuned.toml", "--json")), &v); err != nil {
		t.Fatal(err)
	}
	if u := v.Tuning; !u.Done || len(u.Arms) != 3 || len(u.Arms[0].Trials) != 3 || u.Arms[0].Trials[1].LearningRate != "0.02" || len(u.Arms[0].Trials[2].Scores) != 2 {
		t.Errorf("%+v", u)
	}
	another := strings.Replace(tunedTiny, "replicates = 2\n", "replicates = 3\n", 1)
	if err := os.WriteFile("more.toml", []byte(another), 0o600); err != nil {
		t.Fatal(err)
	}
	out, errs, code = ulpine(t, "verdicts", "more.toml")
	if code != exitBadInput || out != "" || strings.Count(errs, "\n") != 1 {
		t.Errorf("exit code %d, %q", code, out)
	}
	holds(t, errs, "holds 12 of the 18 runs that tune more.toml, and none that is reported; go on with: ulpine run more.toml")
}

// TestVerdictsOfRegression: the unit of the target, contrasts, and a narrow table.
func TestVerdictsOfRegression(t *testing.T) {
	text := strings.NewReplacer(`data = "pump-vibration"`, "data = \"teacher\"\noutputs = 2\nfeatures = 3\nwidth = 2", `"conv1d out=2 width=9 stride=4", "relu", "dense 5"`, `"dense 4", "relu", "dense 2"`,
		"[training]\n", "[training]\nloss = \"mean-squared-error\"\n", "test accuracy", "test RMSE").Replace(tiny) + "[[contrast]]\narm = \"bf16 nearest\"\nagainst = \"same as baseline\"\n"
	inFolder(t, map[string]string{"values.toml": text})
	must(t, "run", "values.toml", "--no-report", "--quiet")
	out, _, code := ulpine(t, "verdicts", "values.toml", "--require-within")
	if code != exitOK {
		t.Errorf("exit code %d", code)
	}
	holds(t, flat(out), "test RMSE", "units of the target", "Contrasts")
	narrow(t, "values.toml")
	if v, _ := asJSON(t, "values.toml"); len(v.Comparisons) != 2 || v.Comparisons[0].Mean == nil {
		t.Errorf("%+v", v)
	}
}

// TestVerdictsOfSharedExamples: where replicates share their test examples, table and
// JSON have the interval over other examples too; told not to keep predictions, they
// have not.
func TestVerdictsOfSharedExamples(t *testing.T) {
	rows := "x,y,kind\n"
	for i := range 120 {
		rows += fmt.Sprintf("%d,%d,%s\n", i%17, i*i%13, []string{"low", "high"}[i*7%17/9])
	}
	text := strings.NewReplacer("data = \"pump-vibration\"\ntrain = 40\nvalidation = 0\ntest = 40\ndata_seed = 1", "data = \"csv\"\nfile = \"t.csv\"\nlabel = \"kind\"\ntest_every = 3",
		`"conv1d out=2 width=9 stride=4", "relu", "dense 5"`, `"dense 4", "relu", "dense 2"`, `storage = "bf16"`, `storage = "E4M3"`).Replace(tiny)
	inFolder(t, map[string]string{"t.csv": rows, "shared.toml": text, "bare.toml": strings.Replace(text, "epochs = 2", "epochs = 2\npredictions = \"none\"", 1)})
	out := flat(must(t, "run", "shared.toml", "--no-report", "--quiet"))
	holds(t, out, "all replicates share their test examples; over other examples too (two-way bootstrap): 1 bf16 nearest [", "; 2 same as baseline [")
	narrow(t, "shared.toml")
	var v struct {
		Comparisons []struct {
			Items *struct {
				Items, Replicates int
				Crossed           bool
				Method            string
				Low, High         *float64
				Flips             []struct{ Gained, Lost int }
			}
		}
	}
	if err := json.Unmarshal([]byte(must(t, "verdicts", "shared.toml", "--json")), &v); err != nil {
		t.Fatal(err)
	}
	if i := v.Comparisons[0].Items; i == nil || !i.Crossed || i.Items != 40 || i.Low == nil || len(i.Flips) != 3 || !strings.Contains(i.Method, "pigeonhole") {
		t.Errorf("%+v", i)
	}
	must(t, "run", "bare.toml", "--no-report", "--quiet", "--store", "bare.store")
	if text := must(t, "verdicts", "bare.toml", "--json", "--store", "bare.store"); strings.Contains(text, `"items"`) {
		t.Error("items without predictions")
	}
}

// TestNamesAreEscaped: names and texts of a plan cannot send orders to a terminal,
// open tags of a page or break a table of Markdown or CSV.
func TestNamesAreEscaped(t *testing.T) {
	evil := `<b onmouseover=alert(1)>\"x\" & 'y' | z, \u001b[2J</b>`
	text := strings.NewReplacer(`name = "bf16 nearest"`, `name = "`+evil+`"`, `title = "tiny"`, `title = "<script>alert(1)</script>\u001b[31m"`+"\nquestion = \"`a|b` & <i>\"").Replace(tiny)
	inFolder(t, map[string]string{"a <b> & 'c'.toml": text})
	out := must(t, "run", "a <b> & 'c'.toml", "--to", "page", "--quiet")
	out += must(t, "verdicts", "a <b> & 'c'.toml")
	if strings.ContainsAny(out, "\x1b\x07") {
		t.Errorf("orders to the terminal: %q", out)
	}
	holds(t, out, `<b onmouseover=alert(1)>"x" & 'y' | z,`)
	files, err := filepath.Glob("page/*")
	if err != nil || len(files) == 0 {
		t.Fatal(err)
	}
	for _, file := range files {
		raw, err := os.ReadFile(file)
		if err != nil {
			continue // a folder
		}
		if filepath.Ext(file) == ".html" && (bytes.Contains(raw, []byte("<b onmouseover")) || bytes.Contains(raw, []byte("<script>alert(1)")) || bytes.Contains(raw, []byte("\x1b"))) {
			t.Errorf("%s has the plan's tags", file)
		}
		if filepath.Ext(file) == ".json" && !json.Valid(raw) {
			t.Errorf("%s is no JSON", file)
		}
	}
	if v, _ := asJSON(t, "a <b> & 'c'.toml"); !strings.Contains(v.Answer, "onmouseover") {
		t.Errorf("answer %q", v.Answer)
	}
}
