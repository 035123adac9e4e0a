package report

import (
	"cmp"
	"fmt"
	"math"
	"slices"
	"strings"

	"ulpine/results"
)

// brief is what a reader asks first of the arm within the margin with the fewest
// bits: which format, which rounding, how sure, what saved. Where no arm is within
// the margin, it says which comes closest, if one is not shown to be worse.
func (v *view) brief() []fact {
	best := v.leanest()
	if best == nil {
		return v.closest()
	}
	facts := []fact{{"Fewest bits", v.fewestWords(best)}, {"Rounding", v.roundingBrief(best)}, {"How sure", v.sureWords(best)}}
	if s := v.savedWords(best); s != "" {
		facts = append(facts, fact{"Saved, by model", s})
	}
	return facts
}

// closest is the undecided arm whose interval ends least far below the baseline: what
// to look at next, not what to use.
func (v *view) closest() []fact {
	var best *armView
	for _, a := range v.others() {
		k, ok := a.kind()
		if !ok || k != results.Undecided || math.IsNaN(a.Comparison.Low) || math.IsInf(a.Comparison.Low, 0) {
			continue
		}
		if best == nil || a.Comparison.Low > best.Comparison.Low {
			best = a
		}
	}
	if best == nil {
		return nil
	}
	return []fact{
		{"Closest", fmt.Sprintf("%s, %s bits a stored value: %s. %s; no arm is shown to be within the margin, and this one is not either", best.Label(), bits(best.Bits), verdictWords(best.Comparison.Verdict), v.sureWords(best))},
		{"Rounding", v.roundingBrief(best)},
	}
}

// briefRow is one fact for the page, the first with the arm's bit strips.
type briefRow struct {
	Head, Text string
	Strips     []keyed
}

// briefRows is the brief for the page.
func (v *view) briefRows() []briefRow {
	var rows []briefRow
	for i, f := range v.brief() {
		r := briefRow{Head: f.Head, Text: f.Text}
		if best := v.leanest(); i == 0 && best != nil {
			for _, s := range best.Strips {
				r.Strips = append(r.Strips, keyed{glyphHTML(s.glyph()), s.Label() + " (" + s.Split() + ")"})
			}
		}
		rows = append(rows, r)
	}
	return rows
}

// settingBits is the sum of an arm's widths over all points: of arms that store
// equally many bits, the one with narrower sums and products is the leaner one.
func (a *armView) settingBits() (bits int) {
	for _, s := range a.Settings {
		bits += s.Bits
	}
	return bits
}

// leanest is the arm within the margin with the fewest bits; nil: none.
func (v *view) leanest() *armView {
	var best *armView
	for _, a := range v.within() {
		if best == nil || a.Bits < best.Bits || a.Bits == best.Bits && a.settingBits() < best.settingBits() {
			best = a
		}
	}
	return best
}

// within are the arms within the margin, in the plan's order.
func (v *view) within() []*armView {
	return slices.DeleteFunc(v.others(), func(a *armView) bool {
		k, ok := a.kind()
		return !ok || k != results.Within
	})
}

// storesFewer reports whether an arm stores fewer bits a value than the baseline.
func (v *view) storesFewer(a *armView) bool {
	return v.baseline == nil || !(a.Bits >= v.baseline.Bits)
}

// fewestWords names the arm with its bits, and the arms that are as lean.
func (v *view) fewestWords(best *armView) string {
	s := best.Label() + ": " + bits(best.Bits) + " bits a stored value"
	switch {
	case !v.storesFewer(best):
		s += ", as many as the baseline; what it narrows is computed, not stored"
	case v.baseline != nil:
		s += ", the baseline " + bits(v.baseline.Bits)
	}
	var also []string
	for _, a := range v.within() {
		if a != best && a.Bits == best.Bits && a.settingBits() == best.settingBits() {
			also = append(also, fmt.Sprintf("%s (%s%s %s)", a.Label(), v.words.diff(a.Comparison.Mean), v.words.unit(), v.words.interval(a.Comparison.Low, a.Comparison.High)))
		}
	}
	const most = 4
	if n := len(also) - most; n > 0 {
		also = append(also[:most], plural(n, "further arm"))
	}
	if len(also) > 0 {
		s += ". As few, and within the margin too: " + strings.Join(also, ", ")
	}
	return s
}

// roundingBrief is how the points that differ from the baseline round, and what
// nearest rounding made of the same arm where the plan tries it.
func (v *view) roundingBrief(best *armView) string {
	type way struct {
		rounding string
		points   []string
	}
	var ways []*way
	total := 0
	for _, row := range v.changes(best) { // arm, format, rounding, order, overflow, points
		if row[2] == reused {
			continue
		}
		i := slices.IndexFunc(ways, func(w *way) bool { return w.rounding == row[2] })
		if i < 0 {
			i = len(ways)
			ways = append(ways, &way{rounding: row[2]})
		}
		points := strings.Split(row[5], "; ")
		total += len(points)
		ways[i].points = append(ways[i].points, points...)
	}
	slices.SortStableFunc(ways, func(a, b *way) int { return cmp.Compare(len(a.points), len(b.points)) })
	var said []string
	for i, w := range ways {
		switch {
		case len(ways) == 1 && total == 1:
			said = append(said, w.rounding+" at "+w.points[0])
		case len(ways) == 1:
			said = append(said, fmt.Sprintf("%s at all %d points that differ from the baseline", w.rounding, total))
		case i == len(ways)-1:
			said = append(said, fmt.Sprintf("%s at the other %s that differ from the baseline", w.rounding, plural(len(w.points), "point")))
		case len(w.points) > 3:
			said = append(said, fmt.Sprintf("%s at %d points", w.rounding, len(w.points)))
		default:
			said = append(said, w.rounding+" at "+strings.Join(w.points, ", "))
		}
	}
	s := orMissing(strings.Join(said, "; "))
	for _, w := range v.twins() {
		if w.stochastic == best && w.nearest.Comparison != nil {
			c := w.nearest.Comparison
			s += fmt.Sprintf(". Rounded to nearest instead (%s): %s%s %s, %s", w.nearest.Label(), v.words.diff(c.Mean), v.words.unit(), v.words.interval(c.Low, c.High), verdictWords(c.Verdict))
		}
	}
	return s
}

// sureWords is the difference with its interval, and what stands beside it.
func (v *view) sureWords(best *armView) string {
	c := best.Comparison
	m := v.words.scale(c.Margin)
	s := fmt.Sprintf("difference to the baseline %s%s, %s interval %s, %s; the margin is %s%s", v.words.diff(c.Mean), v.words.unit(), percentage(c.Confidence),
		v.words.interval(c.Low, c.High), plural(c.N, "pair"), fixed(-m, marginDigits(m)), v.words.unit())
	if !math.IsNaN(c.Holm) {
		p := probability(c.Holm)
		if !strings.HasPrefix(p, "<") {
			p = "= " + p
		}
		s += fmt.Sprintf("; p %s against \"not within\", Holm-corrected for %s", p, plural(len(v.Comparisons), "comparison"))
	}
	if n := len(c.Warnings); n > 0 {
		s += "; " + plural(n, "warning") + " below"
	}
	return s
}

// savedWords is what the arm takes of FP32's memory, traffic and energy; empty where
// no costs were worked out.
func (v *view) savedWords(best *armView) string {
	b := best.Bill
	if b == nil || v.Costs == nil {
		return ""
	}
	of := func(part, whole uint64) string {
		if whole == 0 {
			return missing
		}
		return saved(float64(part)/float64(whole), float64(part)/float64(whole))
	}
	ref := &v.Costs.Reference
	if b.TrainingBits == ref.TrainingBits && b.EndpointBits == ref.EndpointBits && b.Step.Bits == ref.Step.Bits &&
		saved(b.Step.EnergyShare, b.StepTiled.EnergyShare) == saved(1, 1) {
		return "nothing in memory or traffic, and less than 1 % of the energy: what it narrows is neither stored nor moved"
	}
	return fmt.Sprintf("of a training step in FP32 %s of the memory (%s to %s), %s of the bytes moved and %s of the energy; of an inference %s of the memory (%s to %s) and %s of the energy. The energy is a model's, not measured; model and tables: see the costs",
		of(b.TrainingBits, ref.TrainingBits), byteWords(ref.TrainingBits), byteWords(b.TrainingBits),
		saved(b.Step.BitShare, b.StepTiled.BitShare), saved(b.Step.EnergyShare, b.StepTiled.EnergyShare),
		of(b.EndpointBits, ref.EndpointBits), byteWords(ref.EndpointBits), byteWords(b.EndpointBits),
		saved(b.Inference.EnergyShare, b.InferenceTiled.EnergyShare))
}

// saved spells what two models say is left of FP32's expense as what is saved.
func saved(once, tiled float64) string {
	spell := func(share float64) string {
		if math.IsNaN(share) || math.IsInf(share, 0) {
			return missing
		}
		return fixed(100*(1-share), 0)
	}
	return span(spell(once), spell(tiled)) + " %"
}
