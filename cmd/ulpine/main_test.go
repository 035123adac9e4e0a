package main

import (
	"bytes"
	"encoding/csv"
	"encoding/json"
	"fmt"
	"os"
	"path/filepath"
	"regexp"
	"strconv"
	"strings"
	"testing"

	"ulpine/datasets/npy"
)

// tiny is a plan that runs in well under a second.
const tiny = `
title = "tiny"
[task]
data = "pump-vibration"
train = 40
validation = 0
test = 40
data_seed = 1
[network]
layers = ["conv1d out=2 width=9 stride=4", "relu", "dense 5"]
[training]
optimizer = { kind = "sgd", momentum = 0.9 }
learning_rate = 0.02
batch = 16
epochs = 2
shuffle = false
[replicates]
count = 3
first_seed = 100
[claim]
metric = "test accuracy"
margin = 0.5
[[arm]]
name = "bf16 nearest"
storage = "bf16"
accumulate = "fp32"
[[arm]]
name = "same as baseline"
everything = "fp32"
`

// ulpine runs one command line.
func ulpine(t *testing.T, args ...string) (out, errs string, code int) {
	t.Helper()
	var o, e bytes.Buffer
	code = execute(args, strings.NewReader(""), &o, &e)
	return o.String(), e.String(), code
}

// must runs one command line that has to succeed.
func must(t *testing.T, args ...string) string {
	t.Helper()
	out, errs, code := ulpine(t, args...)
	if code != exitOK {
		t.Fatalf("ulpine %s: exit code %d\n%s", strings.Join(args, " "), code, errs)
	}
	return out
}

// inFolder writes files into a fresh working directory.
func inFolder(t *testing.T, files map[string]string) {
	t.Helper()
	t.Chdir(t.TempDir())
	for name, text := range files {
		if err := os.WriteFile(name, []byte(text), 0o644); err != nil {
			t.Fatal(err)
		}
	}
}

var digestLine = regexp.MustCompile(`store digest ([0-9a-f]{64})`)

func TestRunListShowReport(t *testing.T) {
	inFolder(t, map[string]string{"tiny.toml": tiny})
	out := must(t, "run", "tiny.toml", "--workers", "2")
	digest := digestLine.FindStringSubmatch(out)
	page := filepath.Join("ulpine-report", "tiny", "report.html")
	if digest == nil || !strings.Contains(out, "report: "+page) || !strings.Contains(out, "within margin") {
		t.Fatalf("run printed\n%s", out)
	}
	if html, err := os.ReadFile(page); err != nil || !bytes.Contains(html, []byte("bf16 nearest")) {
		t.Errorf("report: %v", err)
	}

	t.Run("again", func(t *testing.T) {
		out := must(t, "run", "tiny.toml", "--no-report")
		if !strings.Contains(out, "0 of 6 runs done") || !strings.Contains(out, "6 were stored before") {
			t.Errorf("a second run did not resume:\n%s", out)
		}
	})
	t.Run("one worker elsewhere", func(t *testing.T) {
		out := must(t, "run", "tiny.toml", "--no-report", "--workers", "1", "--store", "other.store", "--quiet")
		if got := digestLine.FindStringSubmatch(out); got == nil || got[1] != digest[1] {
			t.Errorf("one worker: %v, two: %v", got, digest)
		}
	})
	t.Run("list", func(t *testing.T) {
		text := must(t, "list")
		for _, want := range []string{"baseline/100", "bf16-nearest/102", "same-as-baseline/101", "stored", digest[1]} {
			if !strings.Contains(text, want) {
				t.Errorf("list lacks %q:\n%s", want, text)
			}
		}
		lines := strings.Split(strings.TrimSpace(must(t, "list", "--json")), "\n")
		if len(lines) != 9 {
			t.Fatalf("%d runs listed, want 9", len(lines))
		}
		for _, line := range lines {
			var run struct{ Run, State, Digest string }
			if err := json.Unmarshal([]byte(line), &run); err != nil || run.State != "stored" || len(run.Digest) != 64 {
				t.Errorf("%s: %v", line, err)
			}
		}
	})
	t.Run("show", func(t *testing.T) {
		text := must(t, "show", "bf16-nearest/101")
		for _, want := range []string{"digest", "step 1", "training loss", "▀"} {
			if !strings.Contains(text, want) {
				t.Errorf("show lacks %q:\n%s", want, text)
			}
		}
	})
	t.Run("weights and curve", func(t *testing.T) { checkFiles(t) })
	t.Run("verdicts", func(t *testing.T) {
		must(t, "verdicts", "tiny.toml")
		if !json.Valid([]byte(must(t, "verdicts", "tiny.toml", "--json"))) {
			t.Error("not JSON")
		}
	})
	t.Run("report", func(t *testing.T) { must(t, "report", "tiny.toml", "--to", "elsewhere") })
}

// checkFiles reads back what show writes.
func checkFiles(t *testing.T) {
	must(t, "show", "baseline/100", "--weights", "w.npz", "--curve", "c.csv")
	raw, err := os.ReadFile("w.npz")
	if err != nil {
		t.Fatal(err)
	}
	arrays, err := npy.ReadNPZ(bytes.NewReader(raw), int64(len(raw)))
	if err != nil || len(arrays) != 8 || arrays[0].Name != "initial/layer0.weight" || len(arrays[0].Shape) != 3 {
		t.Errorf("weights: %v, %d arrays", err, len(arrays))
	}
	f, err := os.Open("c.csv")
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	rows, err := csv.NewReader(f).ReadAll()
	if err != nil || len(rows) != 1+6 {
		t.Fatalf("curve: %v, %d rows", err, len(rows))
	}
	for _, row := range rows[1:] {
		hex, err1 := strconv.ParseFloat(row[1], 64)
		dec, err2 := strconv.ParseFloat(row[2], 64)
		if err1 != nil || err2 != nil || hex != dec || hex <= 0 {
			t.Errorf("row %v", row)
		}
	}
}

func TestRequireWithin(t *testing.T) {
	strict := strings.Replace(tiny, "count = 3", "count = 1", 1) // a single pair decides nothing
	inFolder(t, map[string]string{"tiny.toml": strict})
	must(t, "run", "tiny.toml", "--no-report", "--quiet")
	if _, errs, code := ulpine(t, "resolve", "tiny.toml"); code != exitOK || !strings.Contains(errs, "ulpine: warning: one replicate") {
		t.Errorf("resolve: exit code %d, no warning of one replicate: %s", code, errs)
	}
	if _, errs, code := ulpine(t, "verdicts", "tiny.toml", "--require-within"); code != exitVerdict {
		t.Errorf("exit code %d: %s", code, errs)
	}
}

// TestBadInput: one line for each fault, exit code 2, nothing written.
func TestBadInput(t *testing.T) {
	inFolder(t, map[string]string{
		"tiny.toml":  tiny,
		"typo.toml":  strings.Replace(tiny, "momentum", "momentun", 1),
		"start.toml": "[start]\nrun = \"baseline/100\"\nstore = \"gone.store\"\n" + tiny[strings.Index(tiny, "[task]"):],
		"empty":      "",
		"text.store": "this is no store\n",
	})
	for _, c := range []struct {
		args []string
		want string
	}{
		{[]string{"ran"}, `unknown verb "ran"`},
		{[]string{"help", "ran"}, `unknown verb "ran"; nearest: run`},
		{[]string{"help", "NONSENSE"}, `unknown verb "NONSENSE"; ulpine --help lists them`},
		{[]string{"run"}, "takes PLAN, a TOML file; plans to begin with are in experiments/plans, as in: ulpine run experiments/plans/first-look.toml"},
		{[]string{"run", "--wrokers", "2", "tiny.toml"}, "unknown flag"},
		{[]string{"run", "tiny.toml", "--workers", "-1"}, "--workers -1"},
		{[]string{"run", "none.toml"}, "none.toml"},
		{[]string{"run", "start.toml"}, "start.toml:3: start.store: there is no store gone.store; name a store"},
		{[]string{"run", "typo.toml"}, "typo.toml:12: training.optimizer.momentun"},
		{[]string{"resolve", "typo.toml"}, "momentum"},
		{[]string{"list", "--store", "none.store"}, "none.store"},
		{[]string{"list", "--store", "empty"}, "empty"},
		{[]string{"run", "tiny.toml", "--store", "text.store"}, "text.store"},
		{[]string{"verdicts", "tiny.toml"}, "no such store"},
		{[]string{"show", "baseline/100"}, "ulpine.store"},
	} {
		out, errs, code := ulpine(t, c.args...)
		if code != exitBadInput || !strings.Contains(errs, c.want) || out != "" {
			t.Errorf("ulpine %s: exit code %d, %q, want %q", strings.Join(c.args, " "), code, errs, c.want)
		}
		if lines := strings.Count(errs, "\n"); lines != 1 || strings.Contains(errs, "goroutine") {
			t.Errorf("ulpine %s: %d lines of error:\n%s", strings.Join(c.args, " "), lines, errs)
		}
	}
	if left, _ := os.ReadFile("text.store"); string(left) != "this is no store\n" {
		t.Error("a file that is no store was written to")
	}
}

// TestBadNetworksAndData: a layer without an output, settings for a layer that is not
// there, a batch beyond the data, data that are no numbers or too large for the format
// of their targets: one line each, with file and line or example, exit code 2.
func TestBadNetworksAndData(t *testing.T) {
	rows := func(value string) string {
		text := "a,b,kind\n"
		for i := range 40 {
			text += fmt.Sprintf("%d,%d,%s\n", i, 40-i, []string{"x", "y"}[i%2])
		}
		return text + value + ",3,x\n"
	}
	table := strings.NewReplacer("data = \"pump-vibration\"\ntrain = 40\nvalidation = 0\ntest = 40\ndata_seed = 1", "data = \"csv\"\nfile = \"t.csv\"\nlabel = \"kind\"\ntest_every = 4",
		`"conv1d out=2 width=9 stride=4", "relu", "dense 5"`, `"dense 2"`).Replace(tiny)
	for name, c := range map[string]struct{ plan, csv, want string }{
		"empty output":      {strings.Replace(tiny, "width=9", "width=200", 1), "", "plan.toml:10: network.layers[1]: layer 1 of 3, \"conv1d out=2 width=200 stride=4\" on an input of 1x128: output length (128 + 2*0 - 200)/4 + 1 is below 1"},
		"empty pool":        {strings.Replace(tiny, `"relu"`, `"maxpool size=64"`, 1), "", "is below 1: the kernel's reach of 64 does not fit the padded input of 30"},
		"no layer selected": {tiny + "[[arm.layer]]\nselect = \"attention\"\nstorage = \"bf16\"\n", "", "no layer is selected by \"attention\""},
		"batch too large":   {strings.Replace(tiny, "batch = 16", "batch = 41", 1), "", "plan.toml:14: training.batch: a batch of 41 is larger than the 40 training examples; write at most 40"},
		"batch beyond file": {strings.Replace(table, "batch = 16", "batch = 999", 1), rows("1"), "a batch of 999 is larger than the 31 training examples"},
		"not a number":      {table, rows("NaN"), `"NaN"`},
		"infinite":          {table, rows("1e400"), `"1e400"`},
		"beyond binary32":   {table, rows("1e300"), "feature \"a\": values are too large to standardise; use smaller units"},
	} {
		t.Run(name, func(t *testing.T) {
			inFolder(t, map[string]string{"plan.toml": c.plan, "t.csv": c.csv})
			out, errs, code := ulpine(t, "run", "plan.toml", "--no-report", "--quiet")
			if code != exitBadInput || !strings.Contains(errs, c.want) || out != "" {
				t.Errorf("exit code %d, want %q, got %q", code, c.want, errs)
			}
			if lines := strings.Count(errs, "\n"); lines != 1 || strings.Contains(errs, "goroutine") {
				t.Errorf("%d lines of error:\n%s", lines, errs)
			}
		})
	}
}

// TestExplodingBaseline: data as they are, a learning rate that blows up in FP32: the
// plan is at fault, and is told so in one line.
func TestExplodingBaseline(t *testing.T) {
	inFolder(t, map[string]string{"plan.toml": strings.Replace(tiny, "learning_rate = 0.02", "learning_rate = 1e30", 1)})
	_, errs, code := ulpine(t, "run", "plan.toml", "--no-report", "--quiet")
	if code == 0 || !strings.Contains(errs, "baseline") || !strings.Contains(errs, "diverged") || strings.Contains(errs, "goroutine") {
		t.Errorf("exit code %d: %s", code, errs)
	}
}

func TestResolve(t *testing.T) {
	inFolder(t, map[string]string{"warm.toml": strings.Replace(tiny, "learning_rate = 0.02", "learning_rate = { start = 0.02, warm_up = 5 }", 1)})
	must(t, "resolve", "warm.toml") // steps are timed without the schedule
	inFolder(t, map[string]string{"tiny.toml": tiny})
	for _, want := range []string{"9 runs", "multiply-adds", "forward.sum", "bfloat16"} {
		if out := must(t, "resolve", "tiny.toml"); !strings.Contains(out, want) {
			t.Errorf("resolve lacks %q:\n%s", want, out)
		}
	}
}

// TestReadme runs the verbs that README.md shows, so that a renamed one is noticed.
func TestReadme(t *testing.T) {
	text, err := os.ReadFile(filepath.Join("..", "..", "README.md"))
	if err != nil {
		t.Fatal(err)
	}
	verbs := regexp.MustCompile("ulpine ([a-z]+)").FindAllStringSubmatch(string(text), -1)
	if len(verbs) < 6 {
		t.Fatalf("README.md names %d verbs", len(verbs))
	}
	root := newRoot()
	for _, v := range verbs {
		if cmd, _, err := root.Find([]string{v[1]}); err != nil || cmd == root {
			t.Errorf("README.md shows %q, which is no verb", v[0])
		}
	}
}
