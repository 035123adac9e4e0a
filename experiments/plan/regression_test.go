package plan

import (
	"strings"
	"testing"
)

// regressionPlan is basePlan on targets of values, with lines replaced.
func regressionPlan(changes ...string) string {
	text := strings.NewReplacer(`data = "pump-vibration"`, `data = "teacher"`+"\noutputs = 2",
		`layers = ["conv1d out=4 width=8 stride=8", "relu", "dense 5"]`, `layers = ["dense 2"]`,
		"[training]\n", "[training]\nloss = \"huber\"\n", "[claim]\n", "[claim]\nmetric = \"test RMSE\"\n").Replace(basePlan)
	return strings.NewReplacer(changes...).Replace(text)
}

// Losses, outputs and metrics are held to what the data has.
func TestRegression(t *testing.T) {
	for _, loss := range []string{"huber", "mean-squared-error"} {
		p := load(t, regressionPlan("huber", loss))
		if p.Training.Loss != loss || !p.Training.Regression() || len(p.Task.TargetNames) != 2 || p.Claim.Metric != "test RMSE" {
			t.Errorf("%+v of %+v", p.Training, p.Task.Facts)
		}
	}
	for _, c := range []struct{ text, want string }{
		{regressionPlan("loss = \"huber\"\n", ""), `training: cross-entropy takes classes, but the data of teacher has targets of values; write loss = "mean-squared-error"`},
		{regressionPlan("huber", "cross-entropy"), `training.loss: cross-entropy takes classes, but the data of teacher has targets of values; `},
		{regressionPlan("dense 2", "dense 3"), `the last layer, "dense 3", has 3 outputs, but the task has 2 targets; write "dense 2"`},
		{regressionPlan("test RMSE", "test accuracy"), `claim.metric: test accuracy is one of classes, but the data of teacher has targets of values; `},
		{strings.Replace(basePlan, "[claim]\n", "[claim]\nmetric = \"test RMSE\"\n", 1), `claim.metric: test RMSE is one of targets, but the data of pump-vibration has classes; `},
	} {
		all := failures(t, texts{"plan.toml": c.text}, "plan.toml")
		if len(all) != 1 || !strings.Contains(all[0].Error(), c.want) {
			t.Errorf("%v, want %s", all, c.want)
		}
	}
}
