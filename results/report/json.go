package report

import (
	"encoding/json"
	"fmt"
	"io"
	"math"
	"time"

	"ulpine/results"
)

// object is a JSON object whose numbers may be missing: a number that is not
// finite is null, and the object's "not_finite" says which and what it was.
type object map[string]any

// float sets a number.
func (o object) float(key string, v float64) { o[key] = o.held(key, v) }

// floats sets a list of numbers.
func (o object) floats(key string, vs []float64) {
	out := make([]any, len(vs))
	for k, v := range vs {
		out[k] = o.held(fmt.Sprintf("%s[%d]", key, k), v)
	}
	o[key] = out
}

// held is v, or nil with a flag.
func (o object) held(key string, v float64) any {
	flag := ""
	switch {
	case math.IsNaN(v):
		flag = "NaN"
	case math.IsInf(v, 1):
		flag = "+Inf"
	case math.IsInf(v, -1):
		flag = "-Inf"
	default:
		return v
	}
	flags, _ := o["not_finite"].(map[string]string)
	if flags == nil {
		flags = map[string]string{}
		o["not_finite"] = flags
	}
	flags[key] = flag
	return nil
}

// JSON writes the study's numbers: the claim, arms, comparisons, contrasts and
// runs. Weights and step losses are left to the store.
func JSON(w io.Writer, s *results.Study) error {
	return newView(s).json(w)
}

func (v *view) json(w io.Writer) error {
	top := object{
		"answer": v.answer(), "title": v.Title, "question": v.Question, "plan": v.PlanFile, "data": v.Data,
		"network": v.Network, "training": v.Training, "longest_sum": v.LongestSum, "metric": v.Metric,
		"margin_fixed": moment(v.MarginFixed), "margin_changed": v.MarginChanged, "margin_moved": v.marginMoved(), "written": moment(v.Written),
		"baseline_problem": v.BaselineProblem, "classes": filled(v.Classes), "warnings": filled(v.Warnings),
		"cautions": filled(cautionSection(v).(list).Items), "store_digest": v.StoreDigest, "code_version": v.CodeVersion,
		"rerun": filled(v.Rerun), "planned": v.Planned, "looks": v.Looks, "resolved": v.Resolved,
		"comparisons": comparisonObjects(v.Comparisons), "contrasts": comparisonObjects(v.Contrasts),
		"arms": v.armObjects(), "runs": v.runObjects(),
	}
	if v.Costs != nil {
		top["costs"] = v.Costs
	}
	top["volumes"], top["ranges"] = append([]results.Volume{}, v.Volumes...), append([]results.Range{}, v.Ranges...)
	if v.Tuning != nil {
		top["tuning"] = v.tuningObject()
	}
	top["diagnoses"] = diagnosisObjects(v.Diagnoses)
	if v.Tuning != nil {
		top["tuning"] = tuningObject(v.Tuning)
	}
	top.float("margin", v.Margin)
	top.float("confidence", v.Confidence)
	if v.noiseMeasured() {
		n := object{"from": v.NoiseFrom}
		n.float("low", v.NoiseLow)
		n.float("high", v.NoiseHigh)
		top["noise_floor"] = n
	}
	e := json.NewEncoder(w)
	e.SetIndent("", " ")
	if err := e.Encode(top); err != nil {
		return fmt.Errorf("report: numbers.json: %w", err)
	}
	return nil
}

// moment is a time for JSON, null when it is not known.
func moment(t time.Time) any {
	if t.IsZero() {
		return nil
	}
	return t.UTC().Format(time.RFC3339)
}

// filled is s, an empty list rather than null when there is nothing.
func filled(s []string) []string {
	if s == nil {
		return []string{}
	}
	return s
}

// comparisonObjects are comparisons with all their numbers.
func comparisonObjects(cs []results.Comparison) []object {
	out := []object{}
	for _, c := range cs {
		o := object{
			"arm": c.Arm, "against": c.Against, "metric": c.Metric, "replicates": c.Replicates, "n": c.N, "planned": c.Planned,
			"verdict": verdictWords(c.Verdict), "pairs_needed": c.Verdict.Pairs, "diverged": c.Diverged,
			"against_diverged": c.AgainstDiverged, "stalled": c.Stalled, "headline": c.Headline, "same_runs": c.Same, "warnings": filled(c.Warnings),
		}
		for _, x := range []struct {
			key string
			v   float64
		}{
			{"margin", c.Margin},
			{"confidence", c.Confidence},
			{"mean", c.Mean},
			{"sd", c.SD},
			{"low", c.Low},
			{"high", c.High},
			{"boot_low", c.BootLow},
			{"boot_high", c.BootHigh},
			{"skewness", c.Skewness},
			{"p", c.P},
			{"holm", c.Holm},
			{"p_worse", c.PWorse},
			{"holm_worse", c.HolmWorse},
			{"student_low", c.StudentLow},
			{"student_high", c.StudentHigh},
			{"flip_low", c.FlipLow},
			{"flip_high", c.FlipHigh},
			{"hodges_lehmann", c.Middle},
			{"rank_low", c.RankLow},
			{"rank_high", c.RankHigh},
			{"diverged_low", c.DivergedLow},
			{"diverged_high", c.DivergedHigh},
		} {
			o.float(x.key, x.v)
		}
		o.floats("differences", c.Differences)
		o["offered"], o["look_every"], o["classes"] = c.Offered, c.LookEvery, classObjects(c.Classes)
		if c.Items != nil {
			o["items"] = itemObject(c.Items)
		}
		out = append(out, o)
	}
	return out
}

// tuningObject is what every arm tried and was given.
func tuningObject(t *results.Tuning) object {
	arms := []object{}
	for i := range t.Arms {
		a := &t.Arms[i]
		trials := []object{}
		for _, tried := range a.Trials {
			o := object{"learning_rate": tried.LearningRate, "loss_scale": tried.LossScale, "n": tried.N, "diverged": tried.Diverged}
			o.float("mean", tried.Mean)
			o.floats("scores", tried.Scores)
			trials = append(trials, o)
		}
		arms = append(arms, object{"arm": a.Arm, "chosen": a.Chosen, "edge": a.Edge, "trials": trials})
	}
	return object{
		"metric": t.Metric, "replicates": t.Replicates, "first_seed": t.FirstSeed, "learning_rates": filled(t.LearningRates),
		"loss_scales": filled(t.LossScales), "runs": t.Runs, "stored": t.Stored, "done": t.Done, "arms": arms,
	}
}

// itemObject is a comparison test example by test example.
func itemObject(c *results.ItemComparison) object {
	o := object{
		"items": c.Items, "replicates": c.Replicates, "crossed": c.Crossed, "method": c.Method,
		"gained": c.Gained, "lost": c.Lost, "changed": c.Changed, "flips": append([]results.Flips{}, c.Flips...),
	}
	o.float("low", c.Low)
	o.float("high", c.High)
	o.float("item_share", c.ItemShare)
	return o
}

// classObjects are differences of recall by class.
func classObjects(ks []results.ClassDifference) []object {
	out := []object{}
	for _, k := range ks {
		o := object{"class": k.Class, "name": k.Name, "n": k.N, "worst_replicate": k.Replicate}
		for _, x := range []struct {
			key string
			v   float64
		}{{"mean", k.Mean}, {"low", k.Low}, {"high", k.High}, {"worst", k.Worst}, {"p", k.P}, {"holm", k.Holm}} {
			o.float(x.key, x.v)
		}
		out = append(out, o)
	}
	return out
}

// armObjects are arms with their settings, score, recall and median curve.
func (v *view) armObjects() []object {
	out := []object{}
	for _, a := range v.arms {
		o := object{
			"name": a.Name, "slug": a.Slug, "baseline": a.Baseline, "settings": a.Settings, "summary": a.Summary,
			"loss_scale": a.LossScale, "score": a.Score.object(), "recall": v.recallObjects(a), "guilty": filled(a.Guilty),
			"grid": a.Grid, "axes": append([]results.Coordinate{}, a.Axes...),
		}
		o.float("bits", a.Bits)
		c := object{"n": a.Training.N, "diverged": a.Training.Diverged}
		c.floats("epoch", a.Training.X)
		c.floats("lower_quartile", a.Training.Low)
		c.floats("median", a.Training.Mid)
		c.floats("upper_quartile", a.Training.High)
		o["training_loss"] = c
		out = append(out, o)
	}
	return out
}

// object is a mean with its interval and n.
func (e estimate) object() object {
	o := object{"n": e.N}
	o.float("mean", e.Mean)
	o.float("low", e.Low)
	o.float("high", e.High)
	return o
}

// recallObjects are an arm's recalls by class.
func (v *view) recallObjects(a *armView) []object {
	out := []object{}
	for _, r := range v.recalls(a) {
		o := object{"class": r.Class, "mean": r.Mean.object()}
		if r.Worst != nil {
			w := object{"replicate": r.Worst.Replicate, "right": r.Hit, "of": r.Of}
			w.float("low", r.Low)
			w.float("high", r.High)
			o["worst"] = w
		}
		out = append(out, o)
	}
	return out
}

// runObjects are runs with epochs and counters; a matrix of the wrong size is
// left out.
func (v *view) runObjects() []object {
	out := []object{}
	for i := range v.Runs {
		r := &v.Runs[i]
		o := object{
			"run": r.Name(), "arm": r.Arm, "replicate": r.Replicate, "state": stateWords(r), "diverged": r.Diverged,
			"diverged_step": r.DivergedStep, "stalled": r.Stalled, "key": fmt.Sprintf("%x", r.Key[:]),
			"digest": fmt.Sprintf("%x", r.Digest[:]), "code_version": r.CodeVersion, "host": r.Host,
			"started": moment(r.Started), "wall_seconds": r.Wall.Seconds(), "epochs": epochObjects(r.Epochs), "counters": r.Counters,
		}
		if confused(r) {
			o["classes"], o["confusion"] = r.Classes, r.Confusion
		}
		out = append(out, o)
	}
	return out
}

// epochObjects are what is known after each epoch, the first one first.
func epochObjects(es []results.Epoch) []object {
	out := []object{}
	for _, e := range es {
		o := object{"ties": e.Ties, "skipped": e.Skipped}
		o.float("training_loss", e.TrainLoss)
		o.float("training_metric", e.TrainMetric)
		o.float("validation_loss", e.ValidationLoss)
		o.float("validation_metric", e.ValidationMetric)
		o.float("test_loss", e.TestLoss)
		o.float("test_metric", e.TestMetric)
		o.float("loss_scale", e.LossScale)
		training, validation, test := e.RMSE()
		o.float("training_rmse", training)
		o.float("validation_rmse", validation)
		o.float("test_rmse", test)
		out = append(out, o)
	}
	return out
}

// diagnosisObjects are closer looks at runs, each figure with what it was taken from.
func diagnosisObjects(ds []results.Diagnosis) []object {
	out := []object{}
	for _, d := range ds {
		kept := []object{}
		for _, q := range d.Qualities {
			o := object{"kind": q.Kind, "layer": q.Layer, "name": q.Name, "at": q.At, "epoch": q.Epoch, "step": q.Step, "count": q.Count}
			o.float("value", q.Value)
			kept = append(kept, o)
		}
		out = append(out, object{
			"arm": d.Arm, "replicate": d.Replicate, "histograms": append([]results.Histogram{}, d.Histograms...),
			"epochs": append([]results.EpochCounts{}, d.Epochs...), "qualities": kept,
		})
	}
	return out
}
