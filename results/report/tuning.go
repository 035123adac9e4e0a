package report

import (
	"fmt"
	"strconv"
)

// tuningSection is how learning rate and loss scale of every arm were chosen; left
// out where the plan spells them out.
func tuningSection(v *view) any {
	if v.Tuning == nil {
		return nil
	}
	chosen, tried := v.tuningTables()
	return struct {
		Lead          []string
		Chosen, Tried *tabular
	}{v.tuningWords(), chosen, tried}
}

// tuningWords are the terms of the search, the same for every arm.
func (v *view) tuningWords() []string {
	t := v.Tuning
	out := []string{fmt.Sprintf("Before the reported replicates, every arm, the baseline included, tried %s with %s, each on %s from seed %d, and was given what scored best in %s. "+
		"The budget is the same for all; the reported replicates have other seeds, and the test data played no part in the choice.",
		tried(t.LearningRates, "learning rate"), tried(t.LossScales, "loss scale"), plural(t.Replicates, "replicate"), t.FirstSeed, plain(t.Metric))}
	if !t.Done {
		out = append(out, fmt.Sprintf("The tuning is not finished: %d of %s are stored.", t.Stored, plural(t.Runs, "run")))
	}
	return out
}

// tried spells how many values were tried.
func tried(values []string, noun string) string {
	if len(values) == 0 {
		return "the plan's " + noun
	}
	s := plural(len(values), noun) + " ("
	for i, x := range values {
		if i > 0 {
			s += ", "
		}
		s += plain(x)
	}
	return s + ")"
}

// tuningTables are what every arm was given, and everything that was tried.
func (v *view) tuningTables() (chosen, all *tabular) {
	metric := newScoreWords(v.Tuning.Metric, v.Margin)
	chosen = &tabular{
		Caption: "What every arm was given",
		Columns: columns("Arm", "learning rate", "loss scale", "#"+plain(v.Tuning.Metric)+", mean", "#n", "#trials", "#runs that diverged", "note"),
	}
	all = &tabular{
		Caption: "Everything that was tried",
		Columns: columns("Arm", "learning rate", "loss scale", "#"+plain(v.Tuning.Metric)+", mean", "#n", "#diverged", "scores, by ascending seed"),
	}
	for i := range v.Tuning.Arms {
		a := &v.Tuning.Arms[i]
		name := v.labelOf(a.Arm)
		diverged := 0
		for k := range a.Trials {
			w := &a.Trials[k]
			diverged += w.Diverged
			all.Rows = append(all.Rows, []string{
				name, plain(w.LearningRate), plain(w.LossScale), metric.value(w.Mean), strconv.Itoa(w.N), strconv.Itoa(w.Diverged), scoreList(metric, w.Scores),
			})
		}
		row := []string{name, missing, missing, missing, missing, strconv.Itoa(len(a.Trials)), strconv.Itoa(diverged), "not chosen yet"}
		if a.Chosen >= 0 && a.Chosen < len(a.Trials) {
			w := &a.Trials[a.Chosen]
			row[1], row[2], row[3], row[4], row[7] = plain(w.LearningRate), plain(w.LossScale), metric.value(w.Mean), strconv.Itoa(w.N), missing
		}
		if a.Edge {
			row[7] = "at the edge of what was tried: one beyond might do better"
		}
		chosen.Rows = append(chosen.Rows, row)
	}
	return chosen, all
}

// scoreList spells scores one after another.
func scoreList(w scoreWords, scores []float64) string {
	s := ""
	for i, x := range scores {
		if i > 0 {
			s += ", "
		}
		s += w.value(x)
	}
	return orMissing(s)
}

// labelOf is an arm's number and name by its slug.
func (v *view) labelOf(slug string) string {
	for _, a := range v.arms {
		if a.Slug == slug {
			return a.Label()
		}
	}
	return plain(slug)
}

// tuningObject is the search in numbers; the study has one.
func (v *view) tuningObject() object {
	t := v.Tuning
	arms := []object{}
	for _, a := range t.Arms {
		trials := []object{}
		for _, w := range a.Trials {
			o := object{"learning_rate": w.LearningRate, "loss_scale": w.LossScale, "n": w.N, "diverged": w.Diverged}
			o.float("mean", w.Mean)
			o.floats("scores", w.Scores)
			trials = append(trials, o)
		}
		arms = append(arms, object{"arm": a.Arm, "chosen": a.Chosen, "edge": a.Edge, "trials": trials})
	}
	return object{
		"metric": t.Metric, "replicates": t.Replicates, "first_seed": t.FirstSeed, "learning_rates": filled(t.LearningRates), "loss_scales": filled(t.LossScales),
		"runs": t.Runs, "stored": t.Stored, "done": t.Done, "arms": arms,
	}
}

// tuningRows are all trials, the chosen ones marked.
func tuningRows(v *view) (rows [][]string) {
	if v.Tuning == nil {
		return nil
	}
	for _, a := range v.Tuning.Arms {
		for k, w := range a.Trials {
			rows = append(rows, []string{
				a.Arm, w.LearningRate, w.LossScale, strconv.FormatBool(k == a.Chosen), v.Tuning.Metric, intCell(w.N), intCell(w.Diverged), floatCell(w.Mean),
			})
		}
	}
	return rows
}
