package plan

import (
	"strings"
	"testing"
)

// normPlan is basePlan with a normalisation as layer 2 and other settings.
func normPlan(settings ...string) string {
	text := strings.Replace(basePlan, `"relu", "dense 5"`, `"batchnorm", "relu", "dense 5"`, 1)
	return strings.Replace(text, `storage = "bf16"`, strings.Join(settings, "\n"), 1)
}

// Statistics follow the sums and activations of their phase, however those were
// set, unless their own key says otherwise.
func TestStatistics(t *testing.T) {
	for _, c := range []struct {
		settings string
		point    string
		want     string
	}{
		{`storage = "bf16"`, "forward.statistic", fp32 + seq},
		{`storage = "bf16"`, "forward.moment", bf16},
		{`accumulate = { format = "bf16", order = "pairwise" }`, "forward.statistic", bf16 + ", pairwise"},
		{`accumulate = "bf16"`, "input_gradient.statistic", bf16 + seq},
		{`everything = "bf16"`, "forward.statistic", bf16 + seq},
		{"everything = \"bf16\"\nforward.statistic = { format = \"fp32\", order = \"chunk(8)\", outer = \"fp64\" }", "forward.statistic", fp32 + ", chunk(8), outer fp64"},
		{"everything = \"bf16\"\nforward.statistic = \"fp32\"", "input_gradient.statistic", bf16 + seq},
		{"everything = \"bf16\"\ninput_gradient.statistic = \"fp32\"", "input_gradient.statistic", fp32 + seq},
		{"everything = \"bf16\"\nforward.moment = { format = \"fp16\", rounding = \"up\" }", "forward.moment", "binary16, up, overflow infinity"},
		{"storage = \"bf16\"\n[[arm.layer]]\nselect = \"batchnorm\"\nforward.statistic = \"fp16\"", "forward.statistic", fp16Point + seq},
	} {
		p := load(t, normPlan(c.settings))
		if got := p.Arms[1].at(1, c.point); got != c.want {
			t.Errorf("%s\n%s: %q, want %q", c.settings, c.point, got, c.want)
		}
		if got := p.Arms[1].at(3, c.point); got != "" {
			t.Errorf("a dense layer has %s: %q", c.point, got)
		}
	}
}

// A key that says what holds anyway changes no bit and no text; one that says
// otherwise changes both, product and outer sum included.
func TestStatisticsInTheCanonicalText(t *testing.T) {
	text := func(settings ...string) string { return load(t, normPlan(settings...)).Arms[1].Canonical }
	plain := text(`everything = "bf16"`)
	for _, idle := range []string{`forward.statistic = "bf16"`, `input_gradient.statistic = "bf16"`, `forward.moment = "bf16"`, `forward.statistic = { format = "bf16", outer = "bf16" }`} {
		if text(`everything = "bf16"`, idle) != plain {
			t.Errorf("%s changes the canonical text", idle)
		}
	}
	seen := map[string]string{plain: "nothing"}
	for _, busy := range []string{
		`forward.statistic = "fp32"`, `input_gradient.statistic = "fp32"`, `forward.moment = "fp32"`,
		`forward.statistic = { format = "bf16", order = "chunk(4)" }`, `forward.statistic = { format = "bf16", outer = "fp32" }`,
		`forward.statistic = { format = "bf16", through = "binary32" }`, `forward.statistic = { format = "bf16", rounding = "up" }`,
	} {
		now := text(`everything = "bf16"`, busy)
		if twin := seen[now]; twin != "" {
			t.Errorf("%s has the canonical text of %s", busy, twin)
		}
		seen[now] = busy
	}
	p := load(t, normPlan(`forward.product = "exact"`, `forward.statistic = "bf16"`))
	if s := p.Arms[1].Arithmetic.Layers[1].Statistic; s == nil || s.Product != nil {
		t.Errorf("products of a statistic are not as those of its phase: %+v", s)
	}
	all := failures(t, texts{"plan.toml": normPlan(`forward.statistic = "exact"`)}, "plan.toml")
	if len(all) != 1 || !strings.Contains(all[0].Error(), "arm[1].forward.statistic: only a product can be exact") {
		t.Errorf("%v", all)
	}
}

// The control with pairwise sums has pairwise statistics too.
func TestControlOfStatistics(t *testing.T) {
	for _, base := range []string{"", "forward.statistic = \"fp64\"\n"} {
		text := strings.Replace(normPlan(`storage = "bf16"`), "everything = \"fp32\"\n", "everything = \"fp32\"\n"+base+"[controls]\nfp64 = false\n", 1)
		p := load(t, text)
		if got := p.Controls[0].at(1, "forward.statistic"); !strings.HasSuffix(got, ", pairwise") {
			t.Errorf("%q: %s", base, got)
		}
	}
}

func TestLosses(t *testing.T) {
	loss := func(text string) string {
		return strings.Replace(basePlan, "[training]\n", "[training]\nloss = "+text+"\n", 1)
	}
	p := load(t, loss(`{ kind = "cross-entropy", label_smoothing = 0.125 }`))
	if p.Training.LabelSmoothing != 0.125 || !strings.Contains(p.Arms[1].Canonical, "training: cross-entropy with labels smoothed by 0.125,") {
		t.Errorf("%+v\n%s", p.Training, p.Arms[1].Canonical)
	}
	if plain := load(t, loss(`"cross-entropy"`)); plain.Arms[1].Canonical != load(t, basePlan).Arms[1].Canonical {
		t.Error("the default written out is another run")
	}
	for text, want := range map[string]string{
		`"cross-entrpy"`: `training.loss: unknown word "cross-entrpy"; did you mean "cross-entropy"?`,
		`3`:              `training.loss: wrong type: 3 is a whole number, want a word or a table`,
		`{ kind = "cross-entropy", label_smoothing = 1 }`: `training.loss.label_smoothing: a smoothing of 1 is out of range; `,
		`{ kind = "cross-entropy", width = 1 }`:           `training.loss.width: unknown key; `,
		`{ label_smoothing = 0.1 }`:                       `training.loss: kind is missing; `,
		`{ kind = "huber", width = 0 }`:                   `training.loss.width: a width of 0 is not a positive binary32 number; `,
		`"huber"`:                                         `training.loss: huber takes targets of values, but the data of pump-vibration has classes; write loss = "cross-entropy"`,
		`"mean-squared-error"`:                            `training.loss: mean-squared-error takes targets of values, but the data of pump-vibration has classes; `,
	} {
		all := failures(t, texts{"plan.toml": loss(text)}, "plan.toml")
		if !strings.Contains(all[0].Error(), want) {
			t.Errorf("%s: %v, want %s", text, all, want)
		}
	}
}
