package plan

import (
	"flag"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
)

var update = flag.Bool("update", false, "write golden files anew")

// golden compares text with a file under testdata.
func golden(t *testing.T, name, text string) {
	t.Helper()
	file := filepath.Join("testdata", name)
	if *update {
		if err := os.WriteFile(file, []byte(text), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	want, err := os.ReadFile(file)
	if err != nil {
		t.Fatal(err)
	}
	if diff := cmp.Diff(strings.Split(string(want), "\n"), strings.Split(text, "\n")); diff != "" {
		t.Errorf("%s (go test ./experiments/plan -run Golden -update writes it anew):\n%s", name, diff)
	}
}

// goldenPlan has a point of every kind; what it resolves to was checked by hand
// against the rules in doc.go.
const goldenPlan = `title = "Every kind of setting"
question = "What does it resolve to?"
[task]
data = "pump-vibration"
train = 200
validation = 50
test = 100
[network]
layers = ["conv1d out=4 width=8 stride=8", "relu", "avgpool size=2 stride=2", "flatten", "dense 5"]
[training]
optimizer = { kind = "sgd", momentum = 0.9 }
learning_rate = { start = 0.02, multiply = 0.1, at_epochs = [3] }
batch = 20
epochs = 3
[pretrain]
task = { variant = "remounted", train = 100 }
training = { epochs = 1 }
[replicates]
count = 4
first_seed = 100
[claim]
margin = 0.01
[[arm]]
name = "mixed"
everything = "fp16"
storage = { format = "E4M3", overflow = "nan" }
accumulate = { format = "fp16", order = "chunk(16)", outer = "fp32" }
weight_gradient.sum = { format = "bf16", order = "pairwise", through = "binary32" }
forward.product = "exact"
input_gradient.weight = { format = "E6M9", width = 16, rounding = "toward-zero" }
update.master = { format = "bf16", rounding = "stochastic", random_bits = 8, variant = "centred" }
loss_scale = { kind = "fixed", value = 1000 }
[[arm]]
name = "slow"
learning_rate = 0.002
[[contrast]]
arm = "slow"
against = "mixed"
`

func TestGoldenResolutions(t *testing.T) {
	p := load(t, goldenPlan)
	golden(t, "compact.txt", ResolveText(p, ResolveOptions{Rate: 2e9, Workers: 2}))
	golden(t, "full.txt", ResolveText(p, ResolveOptions{Full: true}))
	golden(t, "canonical.txt", p.Canonical())
}

func TestMagnitudesAndDurations(t *testing.T) {
	for x, want := range map[float64]string{0: "0", 999: "999", 1500: "1.5 k", 90.2e9: "90.2 G", 1e18: "1e+03 P"} {
		if got := magnitude(x); got != want {
			t.Errorf("magnitude(%g) = %q, want %q", x, got, want)
		}
	}
	for x, want := range map[float64]string{0.2: "a second", 45.1: "45 s", 600: "10 min", 7200: "2h0m0s", 1e300: "more than a century"} {
		if got := duration(x); got != want {
			t.Errorf("duration(%g) = %q, want %q", x, got, want)
		}
	}
}

// TestPredictionsText: what is kept, and how much room it takes; it is in no key.
func TestPredictionsText(t *testing.T) {
	plain := load(t, basePlan)
	for _, c := range []struct{ text, want string }{
		{basePlan, "predictions  stored: the class and the class called of every test example, 200 B a run and 1.6 kB in all"},
		{strings.Replace(basePlan, "epochs = 3", "epochs = 3\npredictions = \"none\"", 1), "predictions  none\n"},
		{regressionPlan(), "predictions  stored: outputs and targets in binary32 of every test example, 1.6 kB a run"},
	} {
		p := load(t, c.text)
		if text := ResolveText(p, ResolveOptions{}); !strings.Contains(text, c.want) {
			t.Errorf("no %q in\n%s", c.want, text)
		}
		if p.Predictions == NoPredictions && p.Canonical() != plain.Canonical() {
			t.Error("keeping predictions is part of what is run")
		}
	}
}
