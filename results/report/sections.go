package report

import (
	"fmt"
	"html/template"
	"math"
	"slices"
	"strconv"
	"strings"

	"ulpine/results"
)

// figureWith is a figure, the table of its numbers, and the words in its stead.
type figureWith struct {
	Figure  template.HTML
	Caption string
	Table   *tabular
	Further *tabular // nil: none
	Without string
}

// differenceSection is the rail of the arms against the baseline.
func differenceSection(v *view) any {
	caption := "Each row is an arm. Bar: " + percentage(v.Confidence) + " t interval of the mean paired difference, arm − baseline; the mark on it is the verdict's, at the mean; strokes below the bar: the replicates. The bars are not corrected for the number of arms, the verdicts are (Holm): a bar may clear the margin beside \"undecided\". " +
		"An arm is within the margin when its whole bar, Holm-corrected, lies to the right of the post."
	switch {
	case v.NoiseHigh > v.NoiseLow:
		caption += " Hatched: the noise floor, " + plain(v.NoiseFrom) + "."
	case v.noiseMeasured():
		caption += " The noise floor has no width: " + plain(v.noiseWords()) + "."
	}
	return figureWith{Figure: figureHTML(v, "margin-rail", caption, false), Table: v.pairTable(v.Comparisons), Further: v.itemTable()}
}

// contrastSection is left out when the plan asks for no contrast.
func contrastSection(v *view) any {
	if len(v.Contrasts) == 0 {
		return nil
	}
	caption := "Each row compares two arms, replicate by replicate: to the right of \"no difference\" the first one scores better. Each has its own margin."
	return figureWith{Figure: figureHTML(v, "contrast-rail", caption, false), Table: v.pairTable(v.Contrasts)}
}

// pairTable lists every paired difference.
func (v *view) pairTable(cs []results.Comparison) *tabular {
	t := &tabular{Caption: "Paired differences, replicate by replicate" + commaUnit(v), Columns: columns("Pair", "verdict", "#mean", "#interval", "#n", "differences, by replicate")}
	for i := range cs {
		c := &cs[i]
		var each []string
		for k, d := range c.Differences {
			s := v.words.diff(d)
			if k < len(c.Replicates) {
				s = strconv.FormatUint(c.Replicates[k], 10) + ": " + s
			}
			each = append(each, s)
		}
		t.Rows = append(t.Rows, []string{v.pairName(c), verdictWords(c.Verdict), v.words.diff(c.Mean), v.words.interval(c.Low, c.High), strconv.Itoa(c.N), strings.Join(each, ", ")})
	}
	if len(t.Rows) == 0 {
		return nil
	}
	return t
}

// commaUnit is the unit of differences for the end of a caption.
func commaUnit(v *view) string {
	if u := v.words.unitWords(); u != "" {
		return ", in " + u
	}
	return ""
}

// armName is an arm for the page's switches.
type armName struct{ Slug, Name string }

// curveSection is the loss curves with the switches that the script works.
func curveSection(v *view) any {
	data := struct {
		Overview, Panels template.HTML
		Arms             []armName
		Table            *tabular
	}{
		Overview: figureHTML(v, "training-loss", fmt.Sprintf("Median training loss over the replicates of each arm; the step losses are averaged over %d equal stretches of the training. ", max(1, v.clock.bins()))+
			"A replicate that diverged counts as infinitely high from there on; a broken mark shows where a median ends for it.", true),
		Panels: figureHTML(v, "loss-by-arm", "One plot an arm, the baseline in grey, all on the same axes (logarithmic). Lines: medians over replicates; bands: between the quartiles. "+
			"A broken mark at the top: a replicate diverged there; a band that reaches the top: so did at least a quarter of them. Solid: training; dashed: test; dotted: validation, where they were evaluated. The figures at the ends are the last values.", true),
		Table: v.curveTable(),
	}
	for _, a := range v.arms {
		if !a.Training.empty() {
			data.Arms = append(data.Arms, armName{a.Slug, a.Label()})
		}
	}
	return data
}

// curveTable is where the curves end.
func (v *view) curveTable() *tabular {
	t := &tabular{
		Caption: "Last loss of each arm: median over replicates [quartiles], n",
		Columns: columns("Arm", "#training", "#validation", "#test", "#diverged"),
	}
	for _, a := range v.arms {
		t.Rows = append(t.Rows, []string{a.Label(), lastOf(&a.Training), lastOf(&a.Validation), lastOf(&a.Test), strconv.Itoa(a.Training.Diverged)})
	}
	return t
}

// lastOf spells the end of a curve; a quartile of runs that diverged is called so.
func lastOf(c *curve) string {
	i := c.last()
	if i < 0 {
		return missing
	}
	high := significant(c.High[i], 3)
	if math.IsInf(c.High[i], 1) {
		high = "diverged"
	}
	return fmt.Sprintf("%s [%s, %s], n = %d", significant(c.Mid[i], 3), significant(c.Low[i], 3), high, c.N)
}

// frontSection is the metric against bits, bytes moved and energy.
func frontSection(v *view) any {
	caption := "Marks: mean " + plain(v.Metric) + " over replicates. Upright bar: the " + percentage(v.Confidence) + " interval of the paired difference to the baseline, drawn around the arm's mean; grey, at the baseline, that of its own mean. Arms of equal width whose bars would hide each other stand side by side. " +
		"Steps: the Pareto set, the arms that no arm of less expense equals. Bits are those of stored values, weighted by tensor sizes, and exact: they have no interval; the bits of sums are not in them."
	if v.words.percent {
		caption += " The upright axis is logarithmic in what is missing to 100 %."
	}
	if len(v.scored(&expenses[0])) > namedArms {
		caption += " The arms are numbered as in the verdict table; the names are those of the Pareto set."
	}
	model := "A figure of a model, not a measurement. Level bar: from each tensor moved once a phase (the mark) to products in blocks through a cache. "
	t := v.frontTable()
	data := struct {
		Figures []template.HTML
		figureWith
	}{figureWith: figureWith{Caption: t.Caption, Table: t, Without: "No arm has both a score and a width."}}
	for i, c := range []string{caption, model + "Traffic between memory and cache in a training step.", model + "Energy of a training step; tables and assumptions stand under the costs."} {
		if f := figureHTML(v, "score-against-"+expenses[i].id, c, false); f != "" {
			data.Figures = append(data.Figures, f)
		}
	}
	return data
}

// frontTable is the scores in numbers.
func (v *view) frontTable() *tabular {
	t := &tabular{Caption: "Scores in numbers", Columns: columns("Arm", "#bits a value", "#bytes moved, % of FP32", "#energy, % of FP32", "#mean with its own interval", "#difference to the baseline with interval")}
	for _, a := range v.arms {
		row := []string{a.Label(), bits(a.Bits), missing, missing, v.scoreLine(a.Score), v.differenceLine(a)}
		if b := a.Bill; b != nil {
			row[2], row[3] = shareSpan(b.Step.BitShare, b.StepTiled.BitShare), shareSpan(b.Step.EnergyShare, b.StepTiled.EnergyShare)
		}
		t.Rows = append(t.Rows, row)
	}
	return t
}

// shareSpan spells what two models say of a share of FP32's expense.
func shareSpan(once, tiled float64) string {
	a, b := significant(100*once, 3), significant(100*tiled, 3)
	if a == b {
		return a
	}
	return a + " to " + b
}

// mapSection is the step map and the settings behind it.
func mapSection(v *view) any {
	t := &tabular{Caption: "Every setting that differs from the baseline", Columns: columns("Arm", "format", "rounding", "order", "overflow", "points, with layers where not all")}
	for _, a := range v.arms {
		t.Rows = append(t.Rows, v.changes(a)...)
	}
	if len(t.Rows) == 0 {
		t = nil
	}
	f := figureWith{
		Figure: figureHTML(v, "step-map", "The step runs from left to right. A column is as tall as the format is wide; dark columns differ from the baseline, outlined ones take over what another point has rounded, lighter tops show layers that use wider formats, dots on top mean stochastic rounding. "+
			"A ring marks a point found to cause the arm's loss.", false),
		Without: "No settings were recorded.", Table: t,
	}
	if t != nil {
		f.Caption = t.Caption
	}
	return f
}

// changes are an arm's settings that differ from the baseline's: a row for each
// way of rounding, with the points that round so.
func (v *view) changes(a *armView) [][]string {
	type place struct {
		layer int
		point string
	}
	base := map[place]results.Setting{}
	if v.baseline != nil {
		for _, s := range v.baseline.Settings {
			base[place{s.Layer, s.Point}] = s
		}
	}
	layers := map[string][]string{} // those that have the point
	for _, s := range a.Settings {
		layers[s.Point] = append(layers[s.Point], layerName(s.Layer, s.Name))
	}
	var ways []results.Setting // of which only format, rounding, order and overflow count
	var points []*pointList
	for _, s := range a.Settings {
		if b, ok := base[place{s.Layer, s.Point}]; a == v.baseline || ok && !differs(s, b) {
			continue
		}
		i := slices.IndexFunc(ways, func(w results.Setting) bool { return !differs(w, s) })
		if i < 0 {
			i = len(ways)
			ways, points = append(ways, s), append(points, &pointList{})
		}
		points[i].add(s)
	}
	var rows [][]string
	for i, w := range ways {
		rows = append(rows, []string{a.Label(), plain(w.Format), plain(w.Rounding), plain(w.Order), plain(w.Overflow), points[i].words(layers)})
	}
	return rows
}

// pointList collects points with the layers they were seen in.
type pointList struct {
	points []string
	layers map[string][]string
}

func (l *pointList) add(s results.Setting) {
	if l.layers == nil {
		l.layers = map[string][]string{}
	}
	if l.layers[s.Point] == nil {
		l.points = append(l.points, s.Point)
	}
	l.layers[s.Point] = append(l.layers[s.Point], layerName(s.Layer, s.Name))
}

// words lists the points, with their layers where those are not all, or with
// the layers that are missing where those are fewer.
func (l *pointList) words(all map[string][]string) string {
	out := make([]string, len(l.points))
	for i, p := range l.points {
		out[i] = plain(p)
		at := l.layers[p]
		rest := slices.DeleteFunc(slices.Clone(all[p]), func(n string) bool { return slices.Contains(at, n) })
		switch {
		case len(rest) > 0 && len(rest) < len(at):
			out[i] += " (all but " + strings.Join(rest, ", ") + ")"
		case len(rest) > 0:
			out[i] += " (" + strings.Join(at, ", ") + ")"
		}
	}
	return strings.Join(out, "; ")
}

// layerName is a layer by number and name, the first one 1, as a resolved plan
// counts them; index -1 stands for input and loss.
func layerName(layer int, name string) string {
	if layer < 0 {
		return plain(name)
	}
	return plain(fmt.Sprintf("%d %s", layer+1, name))
}

// recallSection is recall by class, with a table and a confusion matrix an arm.
func recallSection(v *view) any {
	type armRecall struct {
		Name              string
		Recall, Confusion *tabular
	}
	data := struct {
		Figure  template.HTML
		Classes *tabular
		Arms    []armRecall
	}{Classes: v.classTable(), Figure: figureHTML(v, "recall", "Of the test examples of a class, the share that is named rightly. Disc and bar: mean over replicates with its "+percentage(v.Confidence)+" t interval; stroke: the worst replicate.", false)}
	for _, a := range v.arms {
		if r := v.recalls(a); len(r) > 0 {
			data.Arms = append(data.Arms, armRecall{a.Label(), v.recallTable(r), v.confusionTable(a)})
		}
	}
	if data.Figure == "" && len(v.Classes) == 0 && len(v.Runs) > 0 { // a regression has no classes
		return nil
	}
	return data
}

// recallTable gives the mean over replicates and, with an exact interval, the
// worst of them: a mean may hide the run that matters.
func (v *view) recallTable(rs []recall) *tabular {
	level := percentage(v.Confidence)
	t := &tabular{
		Caption: "Recall by class; the worst replicate with its exact (Clopper-Pearson) interval",
		Columns: columns("Class", "#mean recall", "#"+level+" interval", "#n", "#worst replicate", "#rightly named", "#recall", "#exact "+level+" interval"),
	}
	for _, r := range rs {
		worst := missing
		if r.Worst != nil {
			worst = strconv.FormatUint(r.Worst.Replicate, 10)
		}
		t.Rows = append(t.Rows, []string{
			r.Class, percentage3(r.Mean.Mean), shares(r.Mean.Low, r.Mean.High), strconv.Itoa(r.Mean.N),
			worst, fmt.Sprintf("%d of %d", r.Hit, r.Of), percentage3(r.Rate()), shares(r.Low, r.High),
		})
	}
	return t
}

// shares spells an interval of shares of one.
func shares(low, high float64) string {
	if math.IsNaN(low) || math.IsNaN(high) {
		return missing
	}
	return "[" + percentage3(low) + ", " + percentage3(high) + "]"
}

// confusionTable adds the replicates' matrices. No interval stands beside the
// sums: where replicates share one test set, they are not independent.
func (v *view) confusionTable(a *armView) *tabular {
	sum, classes, n := pooled(a)
	t := &tabular{Caption: "Confusion, added over " + plural(n, "replicate") + ": rows are the true class, columns what it was called"}
	names := []string{"True class"}
	for c := range classes {
		names = append(names, "#"+v.class(c))
	}
	t.Columns = columns(names...)
	for c := range classes {
		row := []string{v.class(c)}
		for _, x := range sum[c*classes : (c+1)*classes] {
			row = append(row, count(x))
		}
		t.Rows = append(t.Rows, row)
	}
	return t
}
