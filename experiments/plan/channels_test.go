package plan

import (
	"strings"
	"testing"
)

// sensorPlan is basePlan with an input of six channels.
func sensorPlan(input string) string {
	text := strings.Replace(basePlan, `layers = ["conv1d`, `layers = ["flatten", "dense 4", "relu", "dense 5"] # ["conv1d`, 1)
	text = strings.Replace(text, `data = "pump-vibration"`, `data = "noisy-regression"`+"\nfeatures = 6\nnoise_percent = 10", 1)
	text = strings.Replace(text, "validation = 50\n", "", 1)
	text = strings.Replace(text, `"dense 5"] #`, `"dense 1"] #`, 1)
	text = strings.Replace(text, "[training]\n", "[training]\nloss = \"mean-squared-error\"\n", 1)
	text = strings.Replace(text, "[claim]\n", "[claim]\nmetric = \"test RMSE\"\n", 1)
	return strings.Replace(text, `storage = "bf16"`, "storage = \"bf16\"\ninput = "+input, 1)
}

// Channels have formats and ranges of their own; an arm has one text however it is
// written.
func TestChannelsHaveTheirOwnFormats(t *testing.T) {
	p := load(t, sensorPlan(`[{ channels = [1, 3], format = "Q2.6" }, { channels = 2, range = [-4, 4], bits = 10 }, { format = "bf16", rounding = "stochastic" }]`))
	a := &p.Arms[1]
	var got []string
	for _, c := range a.Arithmetic.Channels {
		got = append(got, c.Format.String())
	}
	if text := strings.Join(got, " "); text != "Q2.6 ADC10(from=-4,to=4) Q2.6 bfloat16 bfloat16 bfloat16" {
		t.Errorf("channels %s", text)
	}
	if want := "input: channel 1+3 Q2.6 nearest-even saturate, channel 2 ADC10(from=-4,to=4)"; !strings.Contains(a.Canonical, want) {
		t.Errorf("canonical text:\n%s", a.Canonical)
	}
	for _, full := range []bool{false, true} {
		text := ResolveText(p, ResolveOptions{Full: full})
		for _, want := range []string{"channel 1+3", "channel 2", "channel 4+5+6", "ADC10(from=-4,to=4)"} {
			if !strings.Contains(text, want) {
				t.Errorf("full %v: %q is not in\n%s", full, want, text)
			}
		}
	}
	same := load(t, sensorPlan(`[{ channels = [1, 2, 3], format = "bf16" }, { format = "bf16" }]`))
	if plain := load(t, sensorPlan(`"bf16"`)); same.Arms[1].Canonical != plain.Arms[1].Canonical || same.Arms[1].Arithmetic.Channels != nil {
		t.Error("equal channels are not one")
	}
	// The first layer's operand is taken as stored only if every channel holds it.
	first := a.Arithmetic.Layers[1].WeightGradient.First
	if first == nil || first.Format.String() != "bfloat16" {
		t.Errorf("the weight gradient's activation is %v", first)
	}
}

// What is wrong with channels is told at the entry.
func TestChannelsThatCannotBe(t *testing.T) {
	for input, want := range map[string]string{
		`[{ channels = [1, 7], format = "Q2.6" }, { format = "bf16" }]`:                       "arm[1].input[1].channels: there is no channel 7: an example has 6",
		`[{ channels = 0, format = "Q2.6" }, { format = "bf16" }]`:                            "arm[1].input[1].channels: there is no channel 0",
		`[{ channels = [1, 2], format = "Q2.6" }, { channels = 2, format = "Q1.7" }, "bf16"]`: "arm[1].input[2].channels: channel 2 has a setting in plan.toml line",
		`[{ channels = [1, 2], format = "Q2.6" }]`:                                            "arm[1].input: no setting for channel 3, 4, 5, 6 of 6",
		`[{ format = "Q2.6" }, { format = "Q2.6" }]`:                                          "arm[1].input[2]: all other channels have a setting",
		`[{ channels = [1, 2, 3, 4, 5, 6], format = "Q2.6" }, { format = "bf16" }]`:           "arm[1].input[2]: the setting is for all other channels, but every",
		`[{ channels = [1.5], format = "Q2.6" }, { format = "bf16" }]`:                        "arm[1].input[1].channels",
		`[{ channels = 1, range = [4, -4], bits = 10 }, { format = "bf16" }]`:                 "arm[1].input[1].range: ADC10(from=4,to=-4): from is not below to",
		`[{ channels = 1, range = [-4, 4] }, { format = "bf16" }]`:                            "arm[1].input[1].range: bits are missing",
		`[{ channels = 1, range = [-4, 4], bits = 4, format = "bf16" }, { format = "bf16" }]`: "arm[1].input[1].format: a format and a range",
		`[{ channels = 1, bits = 4, format = "bf16" }, { format = "bf16" }]`:                  "arm[1].input[1].bits: bits without a range",
		`[{ channels = 1, format = "MXFP8" }, { format = "bf16" }]`:                           "arm[1].input: MXFP8",
		`[]`: "arm[1].input: no setting for channel 1",
	} {
		all := failures(t, texts{"plan.toml": sensorPlan(input)}, "plan.toml")
		if got := all[0].Key + ": " + all[0].Reason; !strings.HasPrefix(got, want) || all[0].Remedy == "" || all[0].Line == 0 {
			t.Errorf("%s\n%v, want %s", input, all, want)
		}
	}
}
