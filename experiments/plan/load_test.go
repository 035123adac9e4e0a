package plan

import (
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"
)

// fragment holds what several plans share.
const fragment = `[training]
optimizer = { kind = "sgd", momentum = 0.5 }
learning_rate = 0.02
batch = 20
epochs = 3
[replicates]
count = 4
first_seed = 100
[claim]
margin = 0.01
[[arm]]
name = "shared"
storage = "fp16"
[[arm]]
name = "bf16"
storage = "fp16"
`

const including = `include = "parts/shared.toml"
[task]
data = "pump-vibration"
[network]
layers = ["dense 5"]
[training]
epochs = 7
optimizer = { kind = "sgd" }
[[arm]]
name = "own"
storage = "E5M2"
[[arm]]
name = "bf16"
storage = "bf16"
`

func TestIncludeIsMergedAndOwnKeysWin(t *testing.T) {
	p, err := LoadFrom(texts{"dir/plan.toml": including, "dir/parts/shared.toml": fragment}, "dir/plan.toml")
	if err != nil {
		t.Fatal(err)
	}
	if p.Training.Epochs != 7 || p.Training.Batch != 20 || p.Training.Optimizer.Momentum != 0 || p.Replicates.FirstSeed != 100 {
		t.Errorf("training %+v, replicates %+v", p.Training, p.Replicates)
	}
	var names []string
	for _, a := range p.Arms {
		names = append(names, a.Name)
	}
	if got := strings.Join(names, "|"); got != "baseline|shared|bf16|own" {
		t.Errorf("arms %s", got)
	}
	if got := p.Arms[2].at(-1, "input"); got != bf16 {
		t.Errorf("the plan's own arm does not replace the included one: %s", got)
	}
	for _, part := range []string{including, fragment, "# ---- included: shared.toml ----"} {
		if !strings.Contains(p.Text, part) {
			t.Errorf("the text lacks %q", part)
		}
	}
	if p.File != "dir/plan.toml" {
		t.Errorf("file %q", p.File)
	}
}

func TestLaterIncludesWin(t *testing.T) {
	text := strings.Replace(including, `include = "parts/shared.toml"`, `include = ["parts/shared.toml", "late.toml"]`, 1)
	p, err := LoadFrom(texts{"plan.toml": text, "parts/shared.toml": fragment, "late.toml": "[training]\nbatch = 10\nepochs = 1\n"}, "plan.toml")
	if err != nil {
		t.Fatal(err)
	}
	if p.Training.Batch != 10 || p.Training.Epochs != 7 {
		t.Errorf("training %+v", p.Training)
	}
}

func TestErrorsInFragmentsNameTheRightFile(t *testing.T) {
	bad := strings.Replace(fragment, "batch = 20", "batch = -20", 1)
	all := failures(t, texts{"plan.toml": including, "parts/shared.toml": bad}, "plan.toml")
	if len(all) != 1 || all[0].File != "parts/shared.toml" || all[0].Line != 4 || all[0].Key != "training.batch" {
		t.Errorf("%v", all)
	}
	// A conflict between files names both.
	s := texts{
		"plan.toml":         including + "[baseline]\nforward.outer = \"fp32\"\n",
		"parts/shared.toml": fragment + "[baseline]\nforward.sum = { format = \"fp16\", outer = \"fp16\" }\n",
	}
	all = failures(t, s, "plan.toml")
	if len(all) != 1 || !strings.Contains(all[0].Error(), "parts/shared.toml") || !strings.Contains(all[0].Error(), "plan.toml:16:") {
		t.Errorf("%v", all)
	}
}

func TestBadIncludes(t *testing.T) {
	for name, c := range map[string]struct {
		s            texts
		file         string
		line         int
		reason, help string
	}{
		"missing plan":     {texts{}, "plan.toml", 0, "cannot read the plan", "check the path"},
		"missing fragment": {texts{"plan.toml": "\ninclude = \"gone.toml\"\n"}, "plan.toml", 2, "cannot read gone.toml", "relative to the file that includes it"},
		"itself":           {texts{"plan.toml": "include = \"plan.toml\"\n"}, "plan.toml", 1, "a cycle of includes: plan.toml -> plan.toml", "remove one"},
		"cycle":            {texts{"plan.toml": "include = \"a.toml\"", "a.toml": "x = 1\ninclude = \"./b.toml\"", "b.toml": "include = \"a.toml\""}, "b.toml", 1, "a cycle of includes: plan.toml -> a.toml -> b.toml -> a.toml", "remove one"},
		"not a name":       {texts{"plan.toml": "include = [3]\n"}, "plan.toml", 1, "must name a file, not a whole number", `write include = "fragment.toml"`},
		"syntax":           {texts{"plan.toml": "include = \"a.toml\"\n", "a.toml": "[task]\nx =\n"}, "a.toml", 2, "not valid TOML", "correct the line"},
	} {
		t.Run(name, func(t *testing.T) {
			all := failures(t, c.s, "plan.toml")
			e := all[0]
			if len(all) != 1 || e.File != c.file || e.Line != c.line || !strings.Contains(e.Reason, c.reason) || !strings.Contains(e.Remedy, c.help) {
				t.Errorf("got %v", all)
			}
		})
	}
	deep := texts{"plan.toml": "include = \"0.toml\""}
	for i := range 12 {
		deep[string(rune('0'+i))+".toml"] = "include = \"" + string(rune('1'+i)) + ".toml\""
	}
	if all := failures(t, deep, "plan.toml"); !strings.Contains(all.Error(), "nest deeper") {
		t.Errorf("%v", all)
	}
}

func TestHostileTexts(t *testing.T) {
	for name, text := range map[string]string{
		"empty": "", "deep array": "a = " + strings.Repeat("[", 40000) + strings.Repeat("]", 40000),
		"deep tables": "[" + strings.Repeat("a.", 40000) + "a]\nb = 1", "large": strings.Repeat("# x\n", maxText),
		"nul": "title = \"\x00\"", "binary": "\x7fELF\x02\x01\x01\x00",
	} {
		t.Run(name, func(t *testing.T) {
			start := time.Now()
			if all := failures(t, texts{"plan.toml": text}, "plan.toml"); len(all) == 0 || strings.Contains(all[0].Error(), "\n") {
				t.Errorf("%v", all)
			}
			if took := time.Since(start); took > 5*time.Second {
				t.Errorf("took %v", took)
			}
		})
	}
}

func TestFilesAndShippedCopies(t *testing.T) {
	dir := t.TempDir()
	file := filepath.Join(dir, "mine.toml")
	if err := os.WriteFile(file, []byte(basePlan), 0o600); err != nil {
		t.Fatal(err)
	}
	p, err := Load(file)
	if err != nil || len(p.Notices) != 0 || p.Text != basePlan {
		t.Fatalf("%v, notices %q", err, p.Notices)
	}
	t.Chdir(dir)
	for _, shipped := range []string{"experiments/plans/sixteen-bit.toml", "sixteen-bit.toml"} {
		if p, err = Load(shipped); err != nil {
			t.Fatal(err)
		}
		if len(p.Notices) != 1 || !strings.Contains(p.Notices[0], "is not on disk: using the copy that ships inside ulpine") {
			t.Errorf("notices %q", p.Notices)
		}
	}
	const hint = "the first lines of the plan say how to get it"
	if _, err := Load("mnist-lenet.toml"); err == nil || !strings.Contains(err.Error(), hint) {
		t.Errorf("missing data, a command in the comment: %v", err)
	}
	if _, err := Load("sensors-csv.toml"); err == nil || strings.Contains(err.Error(), hint) {
		t.Errorf("missing data, no command in the comment: %v", err)
	}
	for _, missing := range []string{"experiments/plans/gone.toml", "gone.toml", "elsewhere/sixteen-bit.toml", "experiments/plans/../x.toml"} {
		if _, err := Load(missing); err == nil || !strings.Contains(err.Error(), "cannot read the plan: no such file") {
			t.Errorf("%s: %v", missing, err)
		}
	}
	if _, err := Load(dir); err == nil || !strings.Contains(err.Error(), "cannot read the plan: is a directory") {
		t.Errorf("a directory: %v", err)
	}
}
