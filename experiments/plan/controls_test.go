package plan

import (
	"strings"
	"testing"
)

func controlled(table string) string {
	return strings.Replace(basePlan, "[[arm]]", table+"\n[[arm]]", 1)
}

func TestControls(t *testing.T) {
	plain := load(t, basePlan)
	p := load(t, controlled("[controls]"))
	if len(p.Controls) != 2 || p.Controls[0].Slug != "control-fp64" || p.Controls[1].Slug != "control-pairwise" {
		t.Fatalf("controls %+v", p.Controls)
	}
	fp64, pairwise := &p.Controls[0], &p.Controls[1]
	for point, want := range map[string]string{
		"forward.weight": "binary64, nearest-even, overflow infinity", "forward.product": "binary64, nearest-even, overflow infinity",
		"weight_gradient.sum": "binary64, nearest-even, overflow infinity, sequential", "update.master": "binary64, nearest-even, overflow infinity",
	} {
		if got := fp64.at(2, point); got != want {
			t.Errorf("in binary64, %s: %q, want %q", point, got, want)
		}
	}
	for point, want := range map[string]string{
		"forward.weight": fp32, "forward.sum": fp32 + ", pairwise", "input_gradient.sum": fp32 + ", pairwise", "weight_gradient.sum": fp32 + ", pairwise",
	} {
		if got := pairwise.at(2, point); got != want {
			t.Errorf("pairwise, %s: %q, want %q", point, got, want)
		}
	}
	if got := p.Baseline().at(2, "forward.sum"); got != fp32+seq {
		t.Errorf("the baseline's own sums became %q", got)
	}
	// Controls are runs, but no arms.
	if p.Runs() != plain.Runs()+2*4 || len(p.Arms) != len(plain.Arms) || p.Work().Controls != 8 || p.Work().MACs <= plain.Work().MACs {
		t.Errorf("%d runs, %d without controls; %+v", p.Runs(), plain.Runs(), p.Work())
	}
	text := ResolveText(p, ResolveOptions{})
	for _, want := range []string{
		"16 runs: 2 arms x 4 replicates, and 8 of controls;", "\ncontrol \"the baseline in binary64\", runs control-fp64/...: everything fp64\n",
		"\ncontrol \"the baseline with pairwise sums\", runs control-pairwise/...: as the baseline, sums pairwise\n",
	} {
		if !strings.Contains(text, want) {
			t.Errorf("resolved text lacks %q:\n%s", want, text)
		}
	}
	if p.Canonical() == plain.Canonical() || p.Arms[1].Canonical != plain.Arms[1].Canonical {
		t.Error("canonical texts")
	}
}

// Controls follow a baseline of its own.
func TestControlsOfAnotherBaseline(t *testing.T) {
	p := load(t, strings.Replace(controlled("[controls]\nfp64 = false"), `everything = "fp32"`, "everything = \"bf16\"\nloss_scale = { kind = \"fixed\", value = 8 }", 1))
	if len(p.Controls) != 1 || p.Controls[0].at(2, "forward.sum") != bf16+", pairwise" || p.Controls[0].LossScale != "fixed 8" {
		t.Errorf("%+v", p.Controls)
	}
	if p := load(t, controlled("[controls]\nfp64 = false\npairwise = false")); len(p.Controls) != 0 {
		t.Errorf("%d controls", len(p.Controls))
	}
}

func TestControlErrors(t *testing.T) {
	for table, want := range map[string]string{
		"[controls]\nfp46 = true":                                  `:23: controls.fp46: unknown key; did you mean "fp64"?`,
		"[controls]\nfp64 = 3":                                     `:23: controls.fp64: wrong type: 3 is a whole number, want true or false`,
		"[[arm]]\nname = \"control pairwise\"\nstorage = \"bf16\"": `:23: arm[1].name: "control pairwise" is the name of the plan's own control-pairwise; choose another name`,
	} {
		all := failures(t, texts{"plan.toml": controlled(table)}, "plan.toml")
		if len(all) != 1 || !strings.HasPrefix(all[0].Error(), "plan.toml"+want) {
			t.Errorf("%s: %v", table, all)
		}
	}
}
