package plan

import (
	"errors"
	"io/fs"
	"strings"
	"testing"
)

// texts is a Source of plans in memory.
type texts map[string]string

func (s texts) ReadPlan(name string) ([]byte, error) {
	text, ok := s[name]
	if !ok {
		return nil, &fs.PathError{Op: "open", Path: name, Err: fs.ErrNotExist}
	}
	return []byte(text), nil
}

// basePlan is a whole plan; tests change lines of it.
const basePlan = `title = "a title"
question = "a question?"
[task]
data = "pump-vibration"
train = 200
validation = 50
test = 100
[network]
layers = ["conv1d out=4 width=8 stride=8", "relu", "dense 5"]
[training]
optimizer = { kind = "sgd", momentum = 0.9 }
learning_rate = 0.02
batch = 20
epochs = 3
[replicates]
count = 4
first_seed = 100
[claim]
margin = 0.01
[baseline]
everything = "fp32"
[[arm]]
name = "bf16"
storage = "bf16"
`

// load reads one plan.
func load(t *testing.T, text string) *Plan {
	t.Helper()
	p, err := LoadFrom(texts{"plan.toml": text}, "plan.toml")
	if err != nil {
		t.Fatalf("%v\nplan:\n%s", err, text)
	}
	return p
}

// loadArm reads basePlan with the settings of its arm replaced, and returns that arm.
func loadArm(t *testing.T, settings ...string) (*Plan, *Arm) {
	t.Helper()
	p := load(t, strings.Replace(basePlan, `storage = "bf16"`, strings.Join(settings, "\n"), 1))
	return p, &p.Arms[1]
}

// failures reads texts and returns what is wrong with them.
func failures(t *testing.T, s texts, name string) Errors {
	t.Helper()
	_, err := LoadFrom(s, name)
	if err == nil {
		t.Fatal("the plan was accepted")
	}
	var all Errors
	if errors.As(err, &all) {
		return all
	}
	var one *PlanError
	if !errors.As(err, &one) {
		t.Fatalf("%v (%T) is no PlanError", err, err)
	}
	return Errors{one}
}

// at returns what the arm says at a point of a layer (-1: input or loss), empty
// when it has no such row.
func (a *Arm) at(layer int, point string) string {
	for _, s := range a.Settings {
		if s.Layer == layer && s.Point == point {
			return s.say()
		}
	}
	return ""
}
