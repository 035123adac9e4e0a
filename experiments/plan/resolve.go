package plan

import (
	"fmt"
	"slices"
	"strings"
	"text/tabwriter"
	"time"

	"ulpine/trainer"
)

// ResolveOptions say how a resolved plan is spelt out.
type ResolveOptions struct {
	Full    bool    // a line for each point of each layer, instead of equal points on one line
	Rate    float64 // multiply-adds a second of one worker; 0: no time is estimated
	Workers int     // runs at a time; 0: one
}

// ResolveText spells a plan out: data, network, sums, training, work, and every
// rounding point of every arm, nothing left to a default.
func ResolveText(p *Plan, o ResolveOptions) string {
	var b strings.Builder
	for _, line := range []string{p.Title, p.Question} {
		if line != "" {
			fmt.Fprintln(&b, oneLine(line))
		}
	}
	writeFacts(&b, p)
	writeLayers(&b, p)
	fmt.Fprintf(&b, "\n%s\n%s\n", WorkText(p, o), MemoryText(p, o.Workers))
	writeGrids(&b, p)
	for i := range p.Arms {
		writeArm(&b, p, &p.Arms[i], "arm", o.Full)
	}
	for i := range p.Controls {
		writeArm(&b, p, &p.Controls[i], "control", o.Full)
	}
	writeContrasts(&b, p)
	for _, w := range allWarnings(p) {
		fmt.Fprintln(&b, "warning:", oneLine(w))
	}
	return b.String()
}

// allWarnings are the doubts about a plan and about its data.
func allWarnings(p *Plan) []string {
	w := slices.Concat(p.Warnings, p.Task.Warnings)
	if p.Pretrain != nil && p.Pretrain.Task.Canonical != p.Task.Canonical {
		w = append(w, p.Pretrain.Task.Warnings...)
	}
	return w
}

// table starts aligned columns, two spaces apart.
func table(b *strings.Builder) *tabwriter.Writer { return tabwriter.NewWriter(b, 0, 0, 2, ' ', 0) }

// writeFacts writes a line for each part of the plan that all arms share.
func writeFacts(b *strings.Builder, p *Plan) {
	w := table(b)
	fmt.Fprintf(w, "data\t%s\n", p.Task.Description)
	fmt.Fprintf(w, "training\t%s\n", describeTraining(p.Training))
	fmt.Fprintf(w, "diagnostics\t%s\n", p.Diagnostics)
	fmt.Fprintf(w, "predictions\t%s\n", p.predictionsText())
	if pre := p.Pretrain; pre != nil {
		fmt.Fprintf(w, "pretraining data\t%s\n", pre.Task.Description)
		fmt.Fprintf(w, "pretraining\t%s\n", describeTraining(pre.Training))
	}
	if p.Start != nil {
		fmt.Fprintf(w, "start\tall arms from %s\n", p.Start.Text())
	}
	last := p.Replicates.FirstSeed + uint64(p.Replicates.Count-1)
	fmt.Fprintf(w, "replicates\t%d, seeds %d to %d\n", p.Replicates.Count, p.Replicates.FirstSeed, last)
	if every := p.Replicates.LookEvery; every > 0 {
		fmt.Fprintf(w, "looks\tafter every %d replicates, %d at most\n", every, p.Replicates.Count)
	}
	if p.Tuning != nil {
		fmt.Fprintf(w, "tuning of every arm\t%s\n", p.Tuning)
	}
	fmt.Fprintf(w, "claim\t%s within a margin of %g, confidence %g\n", p.Claim.Metric, p.Claim.Margin, p.Claim.Confidence)
	fmt.Fprintf(w, "controls\t%s\n", p.controlsText())
	w.Flush()
}

// writeLayers writes the shapes, parameters and lengths of sums of the network.
func writeLayers(b *strings.Builder, p *Plan) {
	d := trainer.Describe(p.Network, nil, p.Training, p.Task.Sizes())
	fmt.Fprintln(b, "\nnetwork (sums in terms; weight and bias gradients over a batch)")
	w := table(b)
	fmt.Fprintln(w, "  layer\t\tin\tout\tparameters\tforward sum\tinput gradient\tweight gradient\tbias gradient\tmultiply-adds a step")
	for i, l := range d.Layers {
		fmt.Fprintf(w, "  %d\t%s\t%s\t%s\t%d\t%s\t%s\t%s\t%s\t%d\n", i+1, l.Name, shapeText(l.In), shapeText(l.Out), l.Parameters,
			orDash(l.Sums.Forward), orDash(l.Sums.InputGradient), orDash(l.Sums.WeightGradient), orDash(l.Sums.BiasGradient), l.StepMACs)
	}
	fmt.Fprintf(w, "  all\t\t\t\t%d\tlongest sum %d\t\t\t\t%d\n", d.Parameters, d.LongestSum, d.StepMACs)
	w.Flush()
}

func shapeText(shape []int) string { return strings.ReplaceAll(product(shape), " ", "") }

// orDash writes a length, or a dash where there is no such sum.
func orDash(n int) string {
	if n == 0 {
		return "-"
	}
	return fmt.Sprint(n)
}

// WorkText is one line on the number of runs, their work and, if a rate is given,
// about how long they take.
func WorkText(p *Plan, o ResolveOptions) string {
	var b strings.Builder
	work := p.Work()
	most := ""
	if p.Replicates.LookEvery > 0 {
		most = "at most "
	}
	fmt.Fprintf(&b, "%s%d runs: %d arms x %d replicates", most, work.Runs, len(p.Arms), p.Replicates.Count)
	if work.Pretraining > 0 {
		fmt.Fprintf(&b, ", and %d pretrainings", work.Pretraining)
	}
	if work.Controls > 0 {
		fmt.Fprintf(&b, ", and %d of controls", work.Controls)
	}
	if t := p.Tuning; t != nil {
		fmt.Fprintf(&b, ", after %d of tuning: %d arms x %d trials x %d replicates", work.Tuning, len(p.Arms), len(t.Pairs()), t.Replicates)
		if p.Pretrain != nil {
			fmt.Fprintf(&b, " and their pretrainings")
		}
	}
	fmt.Fprintf(&b, "; %s multiply-adds in all", magnitude(float64(work.MACs)))
	if o.Rate > 0 {
		workers := max(1, o.Workers)
		seconds := float64(work.MACs) / (o.Rate * float64(workers))
		plural := "s"
		if workers == 1 {
			plural = ""
		}
		fmt.Fprintf(&b, ", about %s at %s a second on %d worker%s", duration(seconds), magnitude(o.Rate), workers, plural)
	}
	return b.String()
}

// writeGrids writes the axes of each grid.
func writeGrids(b *strings.Builder, p *Plan) {
	for _, g := range p.Grids {
		fmt.Fprintf(b, "\ngrid %q: %d arms\n", oneLine(g.Title), len(g.Arms))
		w := table(b)
		for _, a := range g.Axes {
			for i, line := range wrap(a.Values, 72) {
				name := oneLine(a.Name)
				if i > 0 {
					name = ""
				}
				fmt.Fprintf(w, "  %s\t%s\n", name, oneLine(line))
			}
		}
		w.Flush()
	}
}

// magnitude writes a count with three digits and an SI prefix.
func magnitude(x float64) string {
	for _, p := range []struct {
		unit float64
		name string
	}{{1e15, "P"}, {1e12, "T"}, {1e9, "G"}, {1e6, "M"}, {1e3, "k"}} {
		if x >= p.unit {
			return fmt.Sprintf("%.3g %s", x/p.unit, p.name)
		}
	}
	return fmt.Sprintf("%.0f", x)
}

// duration writes an estimate, which deserves two digits.
func duration(seconds float64) string {
	switch {
	case seconds < 1:
		return "a second"
	case seconds < 120:
		return fmt.Sprintf("%.0f s", seconds)
	case seconds < 2*3600:
		return fmt.Sprintf("%.0f min", seconds/60)
	case seconds < 100*365*24*3600:
		return (time.Duration(seconds/3600) * time.Hour).String()
	}
	return "more than a century"
}

// writeArm writes the rounding points of one arm; what is the word for it.
func writeArm(b *strings.Builder, p *Plan, a *Arm, what string, full bool) {
	fmt.Fprintf(b, "\n%s %q, runs %s/...: %s\n", what, a.Name, a.Slug, a.Summary)
	w := table(b)
	say := func(a *Arm) {
		if full {
			writePoints(w, a)
		} else {
			writeGroups(w, p, a)
		}
	}
	say(a)
	fmt.Fprintf(w, "  loss scale\t%s\n", a.LossScale)
	for i := range a.Stages {
		fmt.Fprintf(w, "  from %s\t%s\n", a.Stages[i].Start, a.Stages[i].Summary)
		say(a.atStage(i))
		fmt.Fprintf(w, "  loss scale\t%s\n", a.Stages[i].LossScale)
	}
	if trainer.Describe(p.Network, &a.Arithmetic, a.Training, p.Task.Sizes()).Double {
		fmt.Fprintf(w, "  memory\ttensors of eight bytes an element: not every value fits binary32\n")
	}
	if len(a.Overrides) > 0 {
		fmt.Fprintf(w, "  training\t%s\n", describeTraining(a.Training))
	}
	w.Flush()
}

// say is a point's arithmetic in words.
func (s Setting) say() string {
	switch s.Rounding {
	case exactWord:
		return "exact, not rounded"
	case reusedWord:
		return "as stored, not rounded again"
	}
	words := []string{s.Format, s.Rounding, "overflow " + s.Overflow}
	if s.Order != "" {
		words = append(words, s.Order)
	}
	return strings.Join(words, ", ")
}

// writePoints writes every point of every layer, with the setting that holds.
func writePoints(w *tabwriter.Writer, a *Arm) {
	for _, s := range a.Settings {
		where := fmt.Sprintf("%d %s", s.Layer+1, s.Name)
		if s.Layer < 0 {
			where = "-" + strings.TrimPrefix(s.Name, s.Point)
			if s.Name == "loss" {
				where = "-"
			}
		}
		fmt.Fprintf(w, "  %s\t%s\t%s\t%s\n", where, s.Point, s.say(), a.origin(s))
	}
}

// origin says which setting holds at a point.
func (a *Arm) origin(s Setting) string {
	from := a.assignment.of(s.Layer)[slices.Index(trainer.PointNames(), s.Point)]
	switch {
	case s.Rounding != reusedWord && !from.set:
		return "not set: follows its phase" // a normalisation's
	case s.Rounding == reusedWord && !from.set:
		return "not set"
	case s.Rounding == reusedWord:
		return from.origin + ", which changes no value"
	}
	return from.origin
}

// writeGroups writes each arithmetic once, with the points that have it. A point
// that differs between layers is followed by the layers meant.
func writeGroups(w *tabwriter.Writer, p *Plan, a *Arm) {
	var order []string
	groups := map[string][]string{}
	for _, id := range allPoints() {
		layers := map[string][]int{} // what is said -> layers
		var said []string
		for _, s := range a.Settings {
			if s.Point != id.String() {
				continue
			}
			text := s.say()
			if layers[text] == nil {
				said = append(said, text)
			}
			if l := layers[text]; len(l) == 0 || l[len(l)-1] != s.Layer+1 {
				layers[text] = append(l, s.Layer+1)
			}
		}
		for _, text := range said {
			name := id.String()
			switch {
			case len(said) > 1 && id == trainer.Input:
				name = a.Settings[slices.IndexFunc(a.Settings, func(s Setting) bool { return s.Point == name && s.say() == text })].Name
			case len(said) > 1:
				name += " of layer " + strings.Trim(strings.ReplaceAll(fmt.Sprint(layers[text]), " ", "+"), "[]")
			}
			if groups[text] == nil {
				order = append(order, text)
			}
			groups[text] = append(groups[text], name)
		}
	}
	for _, text := range order {
		for i, line := range wrap(groups[text], 72) {
			if i > 0 {
				text = ""
			}
			fmt.Fprintf(w, "  %s\t%s\n", text, line)
		}
	}
}

// wrap joins names with commas into lines of about the given width.
func wrap(names []string, width int) []string {
	lines := []string{""}
	for i, n := range names {
		if i < len(names)-1 {
			n += ","
		}
		last := &lines[len(lines)-1]
		switch {
		case *last == "":
			*last = n
		case len(*last)+1+len(n) > width:
			lines = append(lines, n)
		default:
			*last += " " + n
		}
	}
	return lines
}

// writeContrasts writes which arms are compared with each other.
func writeContrasts(b *strings.Builder, p *Plan) {
	fmt.Fprintln(b)
	for _, c := range p.Contrasts {
		fmt.Fprintf(b, "contrast: %s against %s within a margin of %g\n", c.Arm, c.Against, c.Margin)
	}
}
