package report

import (
	"encoding/csv"
	"fmt"
	"io"
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
	{"comparisons", comparisonHeader, func(v *view) [][]string { return append(comparisonRows(v.Comparisons), comparisonRows(v.Contrasts)...) }},
	{"differences", []string{"arm", "against", "replicate", "difference"}, differenceRows},
	{"arms", []string{"arm", "name", "baseline", "bits", "score_mean", "score_low", "score_high", "n", "loss_scale", "summary"}, armRows},
	{"settings", []string{"arm", "layer", "layer_name", "point", "format", "bits", "exponent", "fraction", "rounding", "order", "overflow"}, settingRows},
	{"runs", []string{"arm", "replicate", "state", "diverged", "diverged_step", "stalled", "score", "key", "digest", "code_version", "host", "started", "wall_seconds"}, runRows},
	{"epochs", []string{"arm", "replicate", "epoch", "training_loss", "training_metric", "validation_loss", "validation_metric", "test_loss", "test_metric", "ties", "loss_scale", "skipped"}, epochRows},
	{"curves", []string{"arm", "epoch", "training_loss_lower_quartile", "training_loss_median", "training_loss_upper_quartile", "n"}, curveRows},
	{"counters", []string{"arm", "replicate", "layer", "layer_name", "point", "overflow", "underflow", "saturated", "nan"}, counterRows},
	{"recall", []string{"arm", "class", "mean", "low", "high", "n", "worst_replicate", "worst_right", "worst_of", "worst_low", "worst_high"}, recallRows},
	{"confusion", []string{"arm", "replicate", "true_class", "called", "count"}, confusionRows},
}

var comparisonHeader = []string{
	"arm", "against", "metric", "margin", "confidence", "n", "planned", "mean", "sd", "low", "high", "boot_low", "boot_high",
	"skewness", "p", "holm", "p_worse", "holm_worse", "verdict", "pairs_needed", "diverged", "against_diverged", "stalled",
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

// f spells a float for a sheet, i an integer, u an unsigned one.
func f(v float64) string { return strconv.FormatFloat(v, 'g', -1, 64) }
func i(v int) string     { return strconv.Itoa(v) }
func u(v uint64) string  { return strconv.FormatUint(v, 10) }

func comparisonRows(cs []results.Comparison) (rows [][]string) {
	for _, c := range cs {
		rows = append(rows, []string{
			c.Arm, c.Against, c.Metric, f(c.Margin), f(c.Confidence), i(c.N), i(c.Planned), f(c.Mean), f(c.SD), f(c.Low), f(c.High),
			f(c.BootLow), f(c.BootHigh), f(c.Skewness), f(c.P), f(c.Holm), f(c.PWorse), f(c.HolmWorse), verdictWords(c.Verdict),
			i(c.Verdict.Pairs), i(c.Diverged), i(c.AgainstDiverged), i(c.Stalled),
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
					rep = u(c.Replicates[k])
				}
				rows = append(rows, []string{c.Arm, c.Against, rep, f(d)})
			}
		}
	}
	return rows
}

func armRows(v *view) (rows [][]string) {
	for _, a := range v.arms {
		rows = append(rows, []string{
			a.Slug, a.Name, strconv.FormatBool(a.Baseline), f(a.Bits), f(a.Score.Mean), f(a.Score.Low), f(a.Score.High),
			i(a.Score.N), a.LossScale, a.Summary,
		})
	}
	return rows
}

func settingRows(v *view) (rows [][]string) {
	for _, a := range v.arms {
		for _, s := range a.Settings {
			rows = append(rows, []string{a.Slug, i(s.Layer), s.Name, s.Point, s.Format, i(s.Bits), i(s.Exponent), i(s.Fraction), s.Rounding, s.Order, s.Overflow})
		}
	}
	return rows
}

func runRows(v *view) (rows [][]string) {
	for k := range v.Runs {
		r := &v.Runs[k]
		score := "NaN"
		if v.words.known {
			score = f(v.words.metric.Final(r))
		}
		started := ""
		if !r.Started.IsZero() {
			started = r.Started.UTC().Format("2006-01-02T15:04:05Z")
		}
		rows = append(rows, []string{
			r.Arm, u(r.Replicate), stateWords(r), r.Diverged, i(r.DivergedStep), strconv.FormatBool(r.Stalled), score,
			fmt.Sprintf("%x", r.Key[:]), fmt.Sprintf("%x", r.Digest[:]), r.CodeVersion, r.Host, started, f(r.Wall.Seconds()),
		})
	}
	return rows
}

func epochRows(v *view) (rows [][]string) {
	for k := range v.Runs {
		r := &v.Runs[k]
		for n, e := range r.Epochs {
			rows = append(rows, []string{
				r.Arm, u(r.Replicate), i(n + 1), f(e.TrainLoss), f(e.TrainMetric), f(e.ValidationLoss), f(e.ValidationMetric),
				f(e.TestLoss), f(e.TestMetric), u(e.Ties), f(e.LossScale), u(e.Skipped),
			})
		}
	}
	return rows
}

func curveRows(v *view) (rows [][]string) {
	for _, a := range v.arms {
		c := &a.Training
		for k := range c.X {
			rows = append(rows, []string{a.Slug, f(c.X[k]), f(c.Low[k]), f(c.Mid[k]), f(c.High[k]), i(c.N)})
		}
	}
	return rows
}

func counterRows(v *view) (rows [][]string) {
	for k := range v.Runs {
		r := &v.Runs[k]
		for _, c := range r.Counters {
			n := c.Counts
			rows = append(rows, []string{r.Arm, u(r.Replicate), i(c.Layer), c.Name, c.Point, u(n.Overflow), u(n.Underflow), u(n.Saturated), u(n.NaN)})
		}
	}
	return rows
}

func recallRows(v *view) (rows [][]string) {
	for _, a := range v.arms {
		for _, r := range v.recalls(a) {
			worst := ""
			if r.Worst != nil {
				worst = u(r.Worst.Replicate)
			}
			rows = append(rows, []string{
				a.Slug, r.Class, f(r.Mean.Mean), f(r.Mean.Low), f(r.Mean.High), i(r.Mean.N),
				worst, u(r.Hit), u(r.Of), f(r.Low), f(r.High),
			})
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
			rows = append(rows, []string{r.Arm, u(r.Replicate), v.class(n / r.Classes), v.class(n % r.Classes), u(x)})
		}
	}
	return rows
}
