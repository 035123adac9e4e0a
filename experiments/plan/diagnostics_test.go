package plan

import (
	"strings"
	"testing"

	"ulpine/trainer"
)

// Diagnostics are a word or a table, and in no key.
func TestDiagnosticsAreWordsOrATable(t *testing.T) {
	with := func(text string) string {
		return strings.Replace(basePlan, "epochs = 3\n", "epochs = 3\ndiagnostics = "+text+"\n", 1)
	}
	plain := load(t, basePlan)
	for text, want := range map[string]trainer.Diagnostics{
		`"sampled"`:                    trainer.DefaultDiagnostics,
		`"none"`:                       {},
		`{ gradient = 7 }`:             {Every: 50, Gradient: 7, Values: 256, Sums: 4},
		`{ every = 3, values = 1000 }`: {Every: 3, Gradient: 200, Values: 1000, Sums: 4},
	} {
		p := load(t, with(text))
		if trainer.Diagnostics(p.Diagnostics) != want || p.Canonical() != plain.Canonical() {
			t.Errorf("%s: %+v", text, p.Diagnostics)
		}
		if !strings.Contains(ResolveText(p, ResolveOptions{}), "diagnostics") {
			t.Errorf("%s: not resolved", text)
		}
	}
	for text, want := range map[string]string{
		`"always"`:        "training.diagnostics",
		`{ gradient = 0}`: "training.diagnostics.gradient",
		`{ often = 3 }`:   "training.diagnostics.often",
		`3`:               "training.diagnostics",
	} {
		if all := failures(t, texts{"p.toml": with(text)}, "p.toml"); len(all) != 1 || all[0].Key != want || all[0].Remedy == "" {
			t.Errorf("%s: %v", text, all)
		}
	}
}
