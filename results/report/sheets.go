package report

import (
	"encoding/csv"
	"fmt"
	"io"
	"math"
	"strconv"

	"ulpine/results"
)

// sheetTable lists the CSV files: numbers as they are, in the shortest decimals
// that read back to the same bits; what is not finite is NaN, +Inf or -Inf.
var sheetTable = []struct {
	name   string
	header []string
	rows   func(v *view) [][]string
}{
	{"comparisons", comparisonHeader, func(v *view) [][]string { return comparisonRows(v.compared()) }},
	{"differences", []string{"arm", "against", "replicate", "difference"}, differenceRows},
	{"arms", []string{"arm", "name", "baseline", "bits", "score_mean", "score_low", "score_high", "n", "loss_scale", "summary"}, armRows},
	{"settings", []string{"arm", "layer", "layer_name", "point", "format", "bits", "exponent", "fraction", "rounding", "order", "overflow"}, settingRows},
	{"runs", []string{"arm", "replicate", "state", "diverged", "diverged_step", "stalled", "score", "key", "digest", "code_version", "host", "started", "wall_seconds"}, runRows},
	{"epochs", []string{"arm", "replicate", "epoch", "training_loss", "training_metric", "validation_loss", "validation_metric", "test_loss", "test_metric", "ties", "loss_scale", "skipped", "training_rmse", "validation_rmse", "test_rmse"}, epochRows},
	{"curves", []string{"arm", "epoch", "training_loss_lower_quartile", "training_loss_median", "training_loss_upper_quartile", "n"}, curveRows},
	{"counters", []string{"arm", "replicate", "layer", "layer_name", "point", "overflow", "underflow", "saturated", "nan"}, counterRows},
	{"recall", []string{"arm", "class", "mean", "low", "high", "n", "worst_replicate", "worst_right", "worst_of", "worst_low", "worst_high"}, recallRows},
	{"class_differences", []string{"arm", "against", "class", "n", "mean", "low", "high", "worst", "worst_replicate", "p", "holm"}, classRows},
	{"examples", []string{"arm", "against", "replicate", "examples", "gained", "lost", "changed", "p"}, flipRows},
	{"tuning", []string{"arm", "learning_rate", "loss_scale", "chosen", "metric", "n", "diverged", "mean"}, tuningRows},
	{"costs", costHeader, costRows},
	{"histograms", []string{"arm", "replicate", "layer", "layer_name", "point", "epoch", "exponent", "count", "zeros", "not_finite"}, histogramRows},
	{"diagnostics", []string{"arm", "replicate", "layer", "layer_name", "kind", "at", "epoch", "step", "count", "value"}, qualityRows},
	{"grid", []string{"arm", "grid", "axis", "value"}, gridRows},
	{"confusion", []string{"arm", "replicate", "true_class", "called", "count"}, confusionRows},
}

// comparisonHeader are the columns of comparisons.csv, arms against the baseline
// first, then contrasts.
var comparisonHeader = []string{
	"arm", "against", "metric", "margin", "confidence", "n", "planned", "mean", "sd", "low", "high", "boot_low", "boot_high",
	"skewness", "p", "holm", "p_worse", "holm_worse", "verdict", "pairs_needed", "diverged", "against_diverged", "stalled",
	"student_low", "student_high", "flip_low", "flip_high", "middle", "rank_low", "rank_high", "offered", "diverged_low", "diverged_high", "two_way_low", "two_way_high",
}

// Sheet writes one of the CSV files by its name; SheetNames lists them.
func Sheet(w io.Writer, s *results.Study, name string) error {
	return newView(s).sheet(w, name)
}

// SheetNames are the names of the CSV files.
func SheetNames() []string {
	var out []string
	for _, s := range sheetTable {
		out = append(out, s.name)
	}
	return out
}

// sheet writes one sheet; encoding/csv quotes what needs it.
func (v *view) sheet(w io.Writer, name string) error {
	for _, s := range sheetTable {
		if s.name != name {
			continue
		}
		c := csv.NewWriter(w)
		if err := c.Write(s.header); err != nil {
			return fmt.Errorf("report: %s.csv: %w", name, err)
		}
		if err := c.WriteAll(s.rows(v)); err != nil { // flushes
			return fmt.Errorf("report: %s.csv: %w", name, err)
		}
		return nil
	}
	return fmt.Errorf("report: no sheet %q", name)
}

// floatCell spells a float for a sheet, intCell an integer, uintCell an unsigned one.
func floatCell(v float64) string { return strconv.FormatFloat(v, 'g', -1, 64) }
func intCell(v int) string       { return strconv.Itoa(v) }
func uintCell(v uint64) string   { return strconv.FormatUint(v, 10) }

// Each sheet has a function that lists its rows; names and slugs are written as
// they are, with no character replaced.

func comparisonRows(cs []results.Comparison) (rows [][]string) {
	for _, c := range cs {
		low, high := math.NaN(), math.NaN() // over replicates and test examples
		if c.Items != nil {
			low, high = c.Items.Low, c.Items.High
		}
		rows = append(rows, []string{
			c.Arm, c.Against, c.Metric, floatCell(c.Margin), floatCell(c.Confidence), intCell(c.N), intCell(c.Planned), floatCell(c.Mean), floatCell(c.SD), floatCell(c.Low), floatCell(c.High),
			floatCell(c.BootLow), floatCell(c.BootHigh), floatCell(c.Skewness), floatCell(c.P), floatCell(c.Holm), floatCell(c.PWorse), floatCell(c.HolmWorse), verdictWords(c.Verdict),
			intCell(c.Verdict.Pairs), intCell(c.Diverged), intCell(c.AgainstDiverged), intCell(c.Stalled),
			floatCell(c.StudentLow), floatCell(c.StudentHigh), floatCell(c.FlipLow), floatCell(c.FlipHigh), floatCell(c.Middle), floatCell(c.RankLow), floatCell(c.RankHigh),
			c.Offered, floatCell(c.DivergedLow), floatCell(c.DivergedHigh), floatCell(low), floatCell(high),
		})
	}
	return rows
}

func differenceRows(v *view) (rows [][]string) {
	for _, cs := range [][]results.Comparison{v.Comparisons, v.Contrasts} {
		for _, c := range cs {
			for k, d := range c.Differences {
				rep := ""
				if k < len(c.Replicates) {
					rep = uintCell(c.Replicates[k])
				}
				rows = append(rows, []string{c.Arm, c.Against, rep, floatCell(d)})
			}
		}
	}
	return rows
}

func armRows(v *view) (rows [][]string) {
	for _, a := range v.arms {
		rows = append(rows, []string{
			a.Slug, a.Name, strconv.FormatBool(a.Baseline), floatCell(a.Bits), floatCell(a.Score.Mean), floatCell(a.Score.Low), floatCell(a.Score.High),
			intCell(a.Score.N), a.LossScale, a.Summary,
		})
	}
	return rows
}

func settingRows(v *view) (rows [][]string) {
	for _, a := range v.arms {
		for _, s := range a.Settings {
			rows = append(rows, []string{a.Slug, intCell(s.Layer), s.Name, s.Point, s.Format, intCell(s.Bits), intCell(s.Exponent), intCell(s.Fraction), s.Rounding, s.Order, s.Overflow})
		}
	}
	return rows
}

func runRows(v *view) (rows [][]string) {
	for k := range v.Runs {
		r := &v.Runs[k]
		score := "NaN"
		if v.words.known {
			score = floatCell(v.words.metric.Final(r))
		}
		started := ""
		if !r.Started.IsZero() {
			started = r.Started.UTC().Format("2006-01-02T15:04:05Z")
		}
		rows = append(rows, []string{
			r.Arm, uintCell(r.Replicate), stateWords(r), r.Diverged, intCell(r.DivergedStep), strconv.FormatBool(r.Stalled), score,
			fmt.Sprintf("%x", r.Key[:]), fmt.Sprintf("%x", r.Digest[:]), r.CodeVersion, r.Host, started, floatCell(r.Wall.Seconds()),
		})
	}
	return rows
}

func epochRows(v *view) (rows [][]string) {
	for k := range v.Runs {
		r := &v.Runs[k]
		for n, e := range r.Epochs {
			training, validation, test := e.RMSE()
			rows = append(rows, []string{
				r.Arm, uintCell(r.Replicate), intCell(n + 1), floatCell(e.TrainLoss), floatCell(e.TrainMetric), floatCell(e.ValidationLoss), floatCell(e.ValidationMetric),
				floatCell(e.TestLoss), floatCell(e.TestMetric), uintCell(e.Ties), floatCell(e.LossScale), uintCell(e.Skipped),
				floatCell(training), floatCell(validation), floatCell(test),
			})
		}
	}
	return rows
}

func curveRows(v *view) (rows [][]string) {
	for _, a := range v.arms {
		c := &a.Training
		for k := range c.X {
			rows = append(rows, []string{a.Slug, floatCell(c.X[k]), floatCell(c.Low[k]), floatCell(c.Mid[k]), floatCell(c.High[k]), intCell(c.N)})
		}
	}
	return rows
}

func counterRows(v *view) (rows [][]string) {
	for k := range v.Runs {
		r := &v.Runs[k]
		for _, c := range r.Counters {
			n := c.Counts
			rows = append(rows, []string{r.Arm, uintCell(r.Replicate), intCell(c.Layer), c.Name, c.Point, uintCell(n.Overflow), uintCell(n.Underflow), uintCell(n.Saturated), uintCell(n.NaN)})
		}
	}
	return rows
}

func recallRows(v *view) (rows [][]string) {
	for _, a := range v.arms {
		for _, r := range v.recalls(a) {
			worst := ""
			if r.Worst != nil {
				worst = uintCell(r.Worst.Replicate)
			}
			rows = append(rows, []string{
				a.Slug, r.Class, floatCell(r.Mean.Mean), floatCell(r.Mean.Low), floatCell(r.Mean.High), intCell(r.Mean.N),
				worst, uintCell(r.Hit), uintCell(r.Of), floatCell(r.Low), floatCell(r.High),
			})
		}
	}
	return rows
}

func classRows(v *view) (rows [][]string) {
	for _, cs := range [][]results.Comparison{v.Comparisons, v.Contrasts} {
		for _, c := range cs {
			for _, k := range c.Classes {
				name := k.Name
				if name == "" {
					name = v.class(k.Class)
				}
				rows = append(rows, []string{
					c.Arm, c.Against, name, intCell(k.N), floatCell(k.Mean), floatCell(k.Low), floatCell(k.High), floatCell(k.Worst), uintCell(k.Replicate),
					floatCell(k.P), floatCell(k.Holm),
				})
			}
		}
	}
	return rows
}

// costHeader are the columns of costs.csv: a row an arm, work (a training step, an
// inference) and model of reuse. Bits, seconds and picojoules.
var costHeader = []string{
	"arm", "work", "reuse", "memory_bits", "bits", "weights", "activations", "gradients", "optimizer_state", "master_copy", "random_bits",
	"seconds", "binds", "picojoules", "bit_share", "speed_up", "energy_share", "time_extrapolated", "energy_extrapolated",
}

func costRows(v *view) (rows [][]string) {
	v.billed(func(a *armView, b *results.Bill) {
		for _, x := range []struct {
			work, reuse string
			memory      uint64
			c           *results.Charge
		}{
			{"step", "once", b.TrainingBits, &b.Step},
			{"step", "tiled", b.TrainingBits, &b.StepTiled},
			{"inference", "once", b.EndpointBits, &b.Inference},
			{"inference", "tiled", b.EndpointBits, &b.InferenceTiled},
		} {
			c := x.c
			rows = append(rows, []string{
				a.Slug, x.work, x.reuse, uintCell(x.memory), uintCell(c.Bits), uintCell(c.Weights), uintCell(c.Activations), uintCell(c.Gradients),
				uintCell(c.State), uintCell(c.Master), uintCell(c.Random), floatCell(c.Seconds), c.Binds, floatCell(c.Picojoules),
				floatCell(c.BitShare), floatCell(c.Speedup), floatCell(c.EnergyShare), strconv.FormatBool(c.TimeExtrapolated), strconv.FormatBool(c.EnergyExtrapolated),
			})
		}
	})
	return rows
}

func histogramRows(v *view) (rows [][]string) {
	for _, d := range v.Diagnoses {
		for _, h := range d.Histograms {
			for i, n := range h.Counts {
				rows = append(rows, []string{
					d.Arm, uintCell(d.Replicate), intCell(h.Layer), h.Name, h.Point, intCell(h.Epoch), intCell(h.Lowest + i), uintCell(n), uintCell(h.Zeros), uintCell(h.NotFinite),
				})
			}
		}
	}
	return rows
}

func qualityRows(v *view) (rows [][]string) {
	for _, d := range v.Diagnoses {
		for _, q := range d.Qualities {
			rows = append(rows, []string{
				d.Arm, uintCell(d.Replicate), intCell(q.Layer), q.Name, string(q.Kind), q.At, intCell(q.Epoch), intCell(q.Step), uintCell(q.Count), floatCell(q.Value),
			})
		}
	}
	return rows
}

func gridRows(v *view) (rows [][]string) {
	for _, a := range v.arms {
		for _, c := range a.Axes {
			rows = append(rows, []string{a.Slug, a.Grid, c.Axis, c.Value})
		}
	}
	return rows
}

func confusionRows(v *view) (rows [][]string) {
	for k := range v.Runs {
		r := &v.Runs[k]
		if !confused(r) {
			continue
		}
		for n, x := range r.Confusion {
			rows = append(rows, []string{r.Arm, uintCell(r.Replicate), v.class(n / r.Classes), v.class(n % r.Classes), uintCell(x)})
		}
	}
	return rows
}
