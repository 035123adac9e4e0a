package plan

import (
	"errors"
	"strings"
	"testing"
)

// FuzzLoad holds that any text yields a plan or errors of one line, never a
// panic, and that a plan that is accepted can be spelt out.
func FuzzLoad(f *testing.F) {
	f.Add(basePlan)
	f.Add(goldenPlan)
	f.Add("include = \"plan.toml\"\n")
	f.Add(strings.Replace(basePlan, `storage = "bf16"`, "forward = { sum = { format = \"x\", outer = { } } }", 1))
	f.Add("[[arm]]\n[task]\ndata = \"pump-vibration\"\n[pretrain.task]\ndata = \"idx\"\n[[contrast]]\n")
	f.Add("arm = [1]\ntask = 1\nnetwork = []\ntraining = \"\"\npretrain = 1979-05-27\nclaim = nan\nformat.x = 1\n")
	f.Fuzz(func(t *testing.T, text string) {
		if strings.Contains(text, `"idx"`) || strings.Contains(text, `"csv"`) {
			return // would read files
		}
		p, err := LoadFrom(texts{"plan.toml": text}, "plan.toml")
		if err == nil {
			if ResolveText(p, ResolveOptions{}) == "" || p.Canonical() == "" {
				t.Error("an accepted plan says nothing")
			}
			return
		}
		all := Errors{}
		var one *PlanError
		switch {
		case errors.As(err, &all):
		case errors.As(err, &one):
			all = Errors{one}
		default:
			t.Fatalf("%T is no PlanError: %v", err, err)
		}
		for _, e := range all {
			if e.Reason == "" || strings.ContainsAny(e.Error(), "\n\r") || e.Line > 1+strings.Count(text, "\n") || e.Line < 0 {
				t.Errorf("%q", e.Error())
			}
		}
	})
}
