package experiments

import (
	"context"
	"fmt"
	"slices"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"

	"ulpine/experiments/plan"
	"ulpine/results"
)

// TestMetricLists: what a plan may claim is what runs record.
func TestMetricLists(t *testing.T) {
	if d := cmp.Diff(plan.Metrics(), results.MetricNames()); d != "" {
		t.Errorf("plans and results differ (-plan +results):\n%s", d)
	}
}

// TestQualifiedMetricNames: what a claim makes of a class and of a rate is what
// results knows, and says the same of it.
func TestQualifiedMetricNames(t *testing.T) {
	for _, c := range []struct{ claim, want string }{
		{`metric = "test recall"` + "\nclass = \"bearing\"", results.RecallOf("test recall", 3, "bearing")},
		{`metric = "validation recall"` + "\nclass = \"sound\"", results.RecallOf("validation recall", 0, "sound")},
		{`metric = "test missed-fault rate"` + "\nfalse_alarm_rate = 0.02", results.MissedAt("test missed-fault rate", 0.02)},
		{`metric = "validation missed-fault rate"` + "\nfalse_alarm_rate = 0", results.MissedAt("validation missed-fault rate", 0)},
		{`metric = "epochs to test recall 0.50"` + "\nclass = \"bearing\"", "epochs to " + results.RecallOf("test recall", 3, "bearing") + " 0.5"},
		{`metric = "epochs to test missed-fault rate 0.1"` + "\nfalse_alarm_rate = 0.2", "epochs to " + results.MissedAt("test missed-fault rate", 0.2) + " 0.1"},
	} {
		p := tinyPlan(t, "", `metric = "test accuracy"`, c.claim)
		if m, known := results.FindMetric(p.Claim.Metric); p.Claim.Metric != c.want || !known || m.Name != c.want {
			t.Errorf("%s became %q, known %v; want %q", c.claim, p.Claim.Metric, known, c.want)
		}
	}
	for _, c := range []struct{ claim, want string }{
		{`metric = "test recall"`, "class is missing"},
		{`metric = "test recall"` + "\nclass = \"baering\"", `did you mean "bearing"?`},
		{`metric = "test missed-fault rate"`, "false_alarm_rate is missing"},
		{`metric = "test missed-fault rate"` + "\nfalse_alarm_rate = 0.3", "a rate of 0.3 is out of range"},
		{`metric = "test missed-fault rate"` + "\nfalse_alarm_rate = \"low\"", "want a number"},
		{`metric = "test accuracy"` + "\nclass = \"bearing\"", "it belongs to a recall"},
		{`metric = "test recall"` + "\nclass = \"bearing\"\nfalse_alarm_rate = 0.1", "it belongs to a missed-fault rate"},
		{`metric = "test RMSE"`, "is one of targets"},
	} {
		text := strings.Replace(fmt.Sprintf(tiny, ""), `metric = "test accuracy"`, c.claim, 1)
		if _, err := plan.LoadFrom(texts{"tiny.toml": text}, "tiny.toml"); err == nil || !strings.Contains(err.Error(), c.want) || strings.Contains(err.Error(), "\n") {
			t.Errorf("%s: %v, want %s", c.claim, err, c.want)
		}
	}
}

// TestQualifiedMetricsOfRuns: a real run's recall and missed faults agree with its
// confusion of classes, and with the trainer's own count.
func TestQualifiedMetricsOfRuns(t *testing.T) {
	p := tinyPlan(t, "", `metric = "test accuracy"`, `metric = "test missed-fault rate"`+"\nfalse_alarm_rate = 0.2")
	s := openStore(t)
	if _, err := Run(context.Background(), p, s, Options{Workers: 2}); err != nil {
		t.Fatal(err)
	}
	study, err := Study(p, s)
	if err != nil || len(study.Comparisons) != 3 || study.Comparisons[0].N != 3 {
		t.Fatalf("%+v, %v", study, err)
	}
	strict := tinyPlan(t, "", `metric = "test accuracy"`, `metric = "test missed-fault rate"`+"\nfalse_alarm_rate = 0.05")
	if few, err := Study(strict, s); err != nil || !slices.ContainsFunc(few.Warnings, func(w string) bool { return strings.Contains(w, "is told from 7 examples of class 0") }) {
		t.Errorf("%+v, %v", few.Warnings, err)
	}
	for _, r := range study.Runs {
		last := r.Epochs[len(r.Epochs)-1]
		for class := range r.Classes {
			m, _ := results.FindMetric(results.RecallOf("test recall", class, "-"))
			row := r.Confusion[class*r.Classes:][:r.Classes]
			var all uint64
			for _, n := range row {
				all += n
			}
			if got, want := m.Final(&r), float64(row[class])/float64(all); got != want {
				t.Errorf("%s: recall of class %d is %v, its confusion has %v", r.Name(), class, got, want)
			}
		}
		m, _ := results.FindMetric(study.Metric)
		if x := m.Final(&r); !(x >= 0 && x <= 1) || len(last.Test.Missed) != 2 || len(last.Validation.Examples) != 5 {
			t.Errorf("%s: %v, %+v", r.Name(), x, last.Test)
		}
	}
}

// TestTargets: a count of epochs that a plan may claim is a metric of results, and
// what results does not know a plan refuses.
func TestTargets(t *testing.T) {
	for _, name := range append(plan.Metrics(), "test recall") {
		if strings.HasSuffix(name, "RMSE") {
			continue // the tiny plan's data have classes, which a plan says before anything else
		}
		for _, target := range []string{"0.90", "1", "1.5", "0", "-1", "NaN", "Inf", "x", ""} {
			text := strings.TrimSpace("epochs to " + name + " " + target)
			m, known := results.FindMetric(text)
			p, err := plan.LoadFrom(texts{"tiny.toml": strings.NewReplacer(
				"batch = 16", "batch = 16\nevaluate = \"every epoch\"", `metric = "test accuracy"`, `metric = "`+text+`"`,
			).Replace(fmt.Sprintf(tiny, ""))}, "tiny.toml")
			if known != (err == nil) {
				t.Errorf("%s: known %v, plan: %v", text, known, err)
				continue
			}
			if err != nil {
				continue
			}
			if same, found := results.FindMetric(p.Claim.Metric); !found || same.Target != m.Target || same.Data != m.Data {
				t.Errorf("%s became %q", text, p.Claim.Metric)
			}
		}
	}
}

// keysOfPlan are the keys of one replicate on invented data hashes, by arm.
func keysOfPlan(p *plan.Plan, seed uint64) map[string]results.Hash {
	l := newLayout(p)
	k := l.keysOf(seed, results.Hash{1}, results.Hash{2})
	all := map[string]results.Hash{}
	for _, run := range l.planned(seed, k) {
		all[run.Arm] = run.Key
	}
	return all
}

func TestKeys(t *testing.T) {
	base := keysOfPlan(tinyPlan(t, ""), 100)
	if base["baseline"] != base["fp32-again"] || base["baseline"] == base["bf16-nearest"] || base["bf16-nearest"] == base["bf16-stochastic"] {
		t.Errorf("keys %v", base)
	}
	same := map[string][]string{
		"arm's name":  {`name = "bf16 nearest"`, `name = "brain float"`, `against = "bf16 nearest"`, `against = "brain float"`},
		"title":       {"a tiny plan", "another title"},
		"margin":      {"margin = 0.2", "margin = 0.3"},
		"count":       {"count = 3", "count = 30"},
		"first seed":  {"first_seed = 100", "first_seed = 90"}, // replicate 100 is still replicate 100
		"other arm":   {`name = "bf16 stochastic"` + "\nstorage = { format", `name = "bf16 stochastic"` + "\nstorage = { overflow = \"saturate\", format"},
		"spelling":    {`storage = "bf16"`, `storage = "bfloat16"`},
		"no change":   {"batch = 16", "batch = 16\naugment = { shift = 0, noise = 0 }"},
		"in the file": {"batch = 16\nepochs = 2", "epochs = 2\nbatch = 16"},
	}
	for name, change := range same {
		got := keysOfPlan(tinyPlan(t, "", change...), 100)
		nearest := got["bf16-nearest"]
		if name == "arm's name" {
			nearest = got["brain-float"]
		}
		if got["baseline"] != base["baseline"] || nearest != base["bf16-nearest"] {
			t.Errorf("%s changed a key", name)
		}
	}
	other := map[string][]string{
		"learning rate": {"learning_rate = 0.05", "learning_rate = 0.06"},
		"batch":         {"batch = 16", "batch = 12"},
		"epochs":        {"epochs = 2", "epochs = 3"},
		"layers":        {"out=2", "out=3"},
		"examples":      {"train = 48", "train = 47"},
		"data seed":     {"data_seed = 1", "data_seed = 5"},
		"augmentation":  {"batch = 16", "batch = 16\naugment = { shift = 2 }"},
		"noise":         {"batch = 16", "batch = 16\naugment = { noise = 0.125 }"},
		"format":        {`"bf16"`, `"fp16"`, `everything = "fp32"`, `everything = "fp64"`},
	}
	for name, change := range other {
		got := keysOfPlan(tinyPlan(t, "", change...), 100)
		if got["baseline"] == base["baseline"] || got["bf16-nearest"] == base["bf16-nearest"] {
			t.Errorf("%s did not change the keys", name)
		}
	}
	if next := keysOfPlan(tinyPlan(t, ""), 101); next["baseline"] == base["baseline"] {
		t.Error("another replicate has the same key")
	}
	l := newLayout(tinyPlan(t, ""))
	if l.keysOf(100, results.Hash{9}, results.Hash{}).groups[0] == base["baseline"] {
		t.Error("other data has the same key")
	}
}

// TestPretrainKeys: a pretraining is shared by plans that go on differently;
// arms depend on it.
func TestPretrainKeys(t *testing.T) {
	p := keysOfPlan(tinyPlan(t, pretraining), 100)
	if plain := keysOfPlan(tinyPlan(t, ""), 100); plain["baseline"] == p["baseline"] {
		t.Error("an arm's key does not know of its pretraining")
	}
	later := tinyPlan(t, pretraining, "test = 32", "test = 32\nvariant = \"remounted\"", "task = { data_seed = 2 }", "task = { data_seed = 2, variant = \"mounted\" }")
	if k := keysOfPlan(later, 100); k["pretrain"] != p["pretrain"] || k["baseline"] == p["baseline"] {
		t.Error("a plan that goes on differently does not share the pretraining")
	}
	longer := keysOfPlan(tinyPlan(t, strings.Replace(pretraining, "epochs = 1", "epochs = 2", 1)), 100)
	if longer["pretrain"] == p["pretrain"] || longer["baseline"] == p["baseline"] {
		t.Error("a longer pretraining has the same keys")
	}
	wider := keysOfPlan(tinyPlan(t, pretraining, "out=2", "out=3"), 100)
	if wider["pretrain"] == p["pretrain"] {
		t.Error("a pretraining does not know its network")
	}
}

func TestStudyIdentity(t *testing.T) {
	base := studyID(tinyPlan(t, ""))
	for name, change := range map[string][]string{
		"title":      {"a tiny plan", "another title"},
		"question":   {"Does it run?", "Why?"},
		"margin":     {"margin = 0.2", "margin = 0.3"},
		"confidence": {"confidence = 0.95", "confidence = 0.9"},
		"count":      {"count = 3", "count = 30"},
		"first seed": {"first_seed = 100", "first_seed = 90"},
		"contrast":   {"margin = 0.1", "margin = 0.15"},
	} {
		if studyID(tinyPlan(t, "", change...)) != base {
			t.Errorf("another %s makes another study", name)
		}
	}
	for name, change := range map[string][]string{
		"arm":      {`storage = "bf16"`, `storage = "fp16"`},
		"arm name": {`"fp32 again"`, `"fp32 once more"`},
		"data":     {"train = 48", "train = 47"},
		"network":  {"out=2", "out=3"},
		"training": {"epochs = 2", "epochs = 3"},
	} {
		if studyID(tinyPlan(t, "", change...)) == base {
			t.Errorf("another %s is the same study", name)
		}
	}
	if studyID(tinyPlan(t, pretraining)) == base {
		t.Error("a pretraining makes no difference")
	}
	p := tinyPlan(t, "")
	slices.Reverse(p.Arms[1:])
	if studyID(p) != base {
		t.Error("the order of arms makes another study")
	}
	if p.Arms[1].Slug != "fp32-again" {
		t.Error("the plan's arms were sorted")
	}
}

func TestHashedHasNoCollisionsOfJoins(t *testing.T) {
	seen := map[results.Hash][]string{}
	for _, texts := range [][]string{{}, {""}, {"", ""}, {"ab"}, {"a", "b"}, {"a", "b", ""}, {"1:a"}, {"1:a1:b"}} {
		h := hashed("run", texts...)
		if other, double := seen[h]; double {
			t.Errorf("%q and %q have one hash", texts, other)
		}
		seen[h] = texts
	}
	if hashed("run") == hashed("data") {
		t.Error("kinds do not matter")
	}
}

// TestPlansShareRuns: a second plan with other names and one more arm runs only
// what is new, and lists everything under its own names.
func TestPlansShareRuns(t *testing.T) {
	s := openStore(t)
	p := tinyPlan(t, "")
	if _, err := Run(context.Background(), p, s, Options{Workers: 2}); err != nil {
		t.Fatal(err)
	}
	q := tinyPlan(t, "[[arm]]\nname = \"fp16\"\nstorage = \"fp16\"\n", "a tiny plan", "a second plan", `"bf16 nearest"`, `"brain float"`, "margin = 0.2", "margin = 0.25")
	got, err := Run(context.Background(), q, s, Options{Workers: 2})
	if err != nil || got.Before != 9 || got.Done != 3 {
		t.Fatalf("%+v, %v", got, err)
	}
	if got.Claim.RunsBefore != 6 || len(got.Claim.Earlier) != 1 || !strings.Contains(got.Claim.Earlier[0], "margin was 0.2, is 0.25") {
		t.Errorf("claim %+v", got.Claim)
	}
	all := states(t, s)
	for _, name := range []string{"bf16-nearest/100", "brain-float/100", "fp16/102", "fp32-again/101", "baseline/101"} {
		if all[name] != results.Stored {
			t.Errorf("%s is %q", name, all[name])
		}
	}
	first, err := Study(p, s)
	if err != nil || first.MarginChanged != "" || len(first.Runs) != 12 {
		t.Errorf("first study: %d runs, %q, %v", len(first.Runs), first.MarginChanged, err)
	}
	second, err := Study(q, s)
	if err != nil || len(second.Runs) != 15 || !strings.Contains(second.MarginChanged, "when 6 runs of its arms had been stored under another claim") {
		t.Errorf("second study: %d runs, %q, %v", len(second.Runs), second.MarginChanged, err)
	}
}
