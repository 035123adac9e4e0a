package report

import (
	"fmt"
	"html/template"
	"math"
	"slices"
	"strconv"
	"strings"
	"time"

	"ulpine/results"
)

// claimSection is what was asked and what was fixed before the first run.
func claimSection(v *view) any { return struct{ Facts []fact }{v.claimFacts()} }

// claimFacts lists it.
func (v *view) claimFacts() []fact {
	var facts []fact
	add := func(head, text string) { // what is not known is not listed
		if text = plain(text); text != "" && text != missing {
			facts = append(facts, fact{head, text})
		}
	}
	add("Question", v.Question)
	if v.words.metric.Target != 0 {
		add("Metric", v.Metric+", counted from the first; one more than was trained for where it is never reached")
	} else {
		add("Metric", v.Metric+", after the last epoch")
	}
	add("Margin", v.marginWords())
	add("Confidence", percentage(v.Confidence)+", two-sided intervals; verdicts are Holm-corrected across arms")
	switch {
	case v.MarginFixed.IsZero():
		add("Margin fixed", "no record of when the margin was fixed")
	default:
		add("Margin fixed", strings.TrimPrefix(v.fixedWords(), "fixed ")+v.firstRun())
	}
	if v.FixedClaim.Hash != (results.Hash{}) {
		add("Claim's hash", fmt.Sprintf("%x", v.FixedClaim.Hash[:]))
	}
	add("Replicates", v.replicateWords())
	add("Looks", v.Looks)
	add("Noise floor", v.noiseWords())
	add("Data", v.Data)
	add("Network", v.Network)
	if v.LongestSum > 0 {
		add("Longest sum", plural(v.LongestSum, "term"))
	}
	add("Training", v.Training)
	add("Plan", v.PlanFile)
	return facts
}

// noiseMeasured reports whether the study has a noise floor. One of no width is a
// measurement too: the baseline otherwise computed scored the same every time.
func (v *view) noiseMeasured() bool { return v.NoiseFrom != "" || v.NoiseHigh > v.NoiseLow }

// noiseWords spells the noise floor and where it comes from.
func (v *view) noiseWords() string {
	switch {
	case !v.noiseMeasured():
		return "not measured in this study"
	case v.NoiseLow == 0 && v.NoiseHigh == 0:
		return "every difference is exactly 0; " + v.NoiseFrom
	}
	return v.words.interval(v.NoiseLow, v.NoiseHigh) + v.words.unit() + "; " + v.NoiseFrom
}

// marginWords spells the margin in the metric's unit.
func (v *view) marginWords() string {
	if !(v.Margin > 0) {
		return "none"
	}
	m := v.words.scale(v.Margin)
	s := fixed(m, marginDigits(m))
	if u := v.words.unitWords(); u != "" {
		if m == 1 {
			u = strings.TrimSuffix(u, "s")
		}
		s += " " + u
	}
	switch {
	case v.words.metric.Target != 0:
		return "an arm may take at most " + s + " more than the baseline"
	case v.words.metric.Higher:
		return "an arm may score at most " + s + " below the baseline"
	}
	return "an arm may score at most " + s + " above the baseline"
}

// fixedWords says when the margin was fixed. The date holds for the margin that was
// fixed then: one that differs from today's is named, and so is today's.
func (v *view) fixedWords() string {
	was := v.FixedClaim.Claim
	switch {
	case !v.marginMoved():
		return "fixed " + day(v.MarginFixed)
	case was.Metric != v.Claim.Metric:
		return "fixed for another metric, " + plain(was.Metric) + ", on " + day(v.MarginFixed) + "; changed since"
	}
	size := func(margin float64) string {
		m := v.words.scale(margin)
		return fixed(m, max(marginDigits(m), marginDigits(v.words.scale(v.Margin)))) + v.words.unit()
	}
	return "fixed at " + size(was.Margin) + " on " + day(v.MarginFixed) + "; changed since to " + size(v.Margin)
}

// marginMoved reports whether the margin is not the one that the store holds as
// fixed: another number, or the same of another metric.
func (v *view) marginMoved() bool {
	was := v.FixedClaim
	return was.Hash != (results.Hash{}) && (was.Claim.Margin != v.Claim.Margin || was.Claim.Metric != v.Claim.Metric)
}

// firstRun says how the margin's date stands to the first run's start.
func (v *view) firstRun() string {
	var first time.Time
	for i := range v.Runs {
		if t := v.Runs[i].Started; !t.IsZero() && (first.IsZero() || t.Before(first)) {
			first = t
		}
	}
	switch {
	case first.IsZero():
		return ""
	case first.Before(v.MarginFixed): // the one thing a reader must not overlook here
		return ", AFTER the first run here started (" + day(first) + ")"
	}
	if v.marginMoved() {
		return ", AFTER the first run started (" + day(first) + ")"
	}
	return ", before the first run started (" + day(first) + ")"
}

// replicateWords says how many replicates there are, of how many planned.
func (v *view) replicateWords() string {
	n := 0
	for _, a := range v.arms {
		n = max(n, len(a.Runs))
	}
	s := plural(n, "paired replicate")
	if v.Planned > 0 {
		s += fmt.Sprintf(" run, %d planned", v.Planned)
	}
	return s
}

// verdictRow is one arm of the verdict table.
type verdictRow struct {
	Slug, Number, Name, Verdict string
	Mark                        template.HTML
	Strips                      []keyed
	Score, LossScale            string
	Notes                       []string
	Difference, Interval, N     string
	Diverged, Stalled, Bits     string
}

// keyed is a small drawing with its words.
type keyed struct {
	Drawing template.HTML
	Words   string
}

// verdictSection is the table of verdicts, the baseline first, with the key to
// its marks.
func verdictSection(v *view) any {
	data := struct {
		Unit, Level string
		Rows        []verdictRow
		Key         []keyed
		Checks      []*tabular
	}{Unit: commaShort(v), Level: percentage(v.Confidence), Checks: v.checks(slices.Concat(v.Comparisons, v.Contrasts))}
	for _, a := range v.arms {
		data.Rows = append(data.Rows, v.verdictRow(a))
	}
	for _, k := range []struct {
		kind  results.VerdictKind
		words string
	}{
		{results.Within, "within margin"},
		{results.Worse, "worse than margin"},
		{results.Undecided, "undecided, which never means \"the same\""},
		{results.Diverged, "diverged"},
	} {
		data.Key = append(data.Key, keyed{glyphHTML(markGlyph(k.kind)), k.words})
	}
	return data
}

// verdictRow is one arm's row; what it has no comparison for stays missing.
func (v *view) verdictRow(a *armView) verdictRow {
	r := verdictRow{
		Slug: a.Slug, Name: plain(a.Name), Bits: bits(a.Bits), Verdict: "no verdict",
		Difference: missing, Interval: missing, N: missing, Diverged: missing, Stalled: missing,
		Score: plain(v.Metric) + " " + v.scoreLine(a.Score), LossScale: plain(a.LossScale),
	}
	if a.Number > 0 {
		r.Number = strconv.Itoa(a.Number)
	}
	if r.LossScale == "none" { // the usual case needs no line
		r.LossScale = ""
	}
	for _, s := range a.Strips {
		r.Strips = append(r.Strips, keyed{glyphHTML(s.glyph()), s.Label() + " (" + s.Split() + ")"})
	}
	if a == v.baseline {
		r.Verdict = "the baseline"
		r.Diverged, r.Stalled = v.lost(a)
	}
	if c := a.Comparison; c != nil {
		r.Mark, r.Verdict = glyphHTML(markGlyph(c.Verdict.Kind)), verdictWords(c.Verdict)
		r.Difference, r.Interval, r.N = v.words.diff(c.Mean), v.words.interval(c.Low, c.High), strconv.Itoa(c.N)
		r.Diverged, r.Stalled = strconv.Itoa(c.Diverged), strconv.Itoa(c.Stalled)
		for _, w := range c.Warnings {
			r.Notes = append(r.Notes, plain(w))
		}
	}
	return r
}

// verdictTable is the table of verdicts in words alone.
func (v *view) verdictTable() *tabular {
	t := &tabular{
		Caption: "Verdicts, the baseline first",
		Columns: columns("Arm", "verdict", "#mean difference"+commaShort(v), "#"+percentage(v.Confidence)+" interval", "#pairs", "#diverged", "#stalled", "#bits a value", "formats", "score"),
	}
	for _, a := range v.arms {
		r := v.verdictRow(a)
		words := r.Verdict
		if k, ok := a.kind(); ok {
			words = verdictMark(k) + " " + words
		}
		var formats []string
		for _, s := range a.Strips {
			formats = append(formats, s.Label()+" ("+s.Split()+")")
		}
		if r.LossScale != "" {
			formats = append(formats, "loss scale "+r.LossScale)
		}
		t.Rows = append(t.Rows, []string{a.Label(), words, r.Difference, r.Interval, r.N, r.Diverged, r.Stalled, r.Bits, strings.Join(formats, "; "), r.Score})
	}
	return t
}

// lost counts an arm's runs that diverged or stalled.
func (v *view) lost(a *armView) (diverged, stalled string) {
	d, s := 0, 0
	for _, r := range a.Runs {
		if r.Diverged != "" {
			d++
		}
		if r.Stalled {
			s++
		}
	}
	return strconv.Itoa(d), strconv.Itoa(s)
}

// checks are the tables of what stands behind verdicts: the intervals side by
// side, the p-values that decide, and how sure the shares of diverged runs are.
// Nil when there is no comparison.
func (v *view) checks(cs []results.Comparison) []*tabular {
	if len(cs) == 0 {
		return nil
	}
	unit := commaShort(v)
	intervals := &tabular{
		Caption: "Intervals of the paired difference" + commaUnit(v) + ", each at " + percentage(v.Confidence),
		Columns: columns("Arm", "#n", "#SD", "#t (drawn)", "#bootstrap, BCa", "#bootstrap, studentised", "#flipped signs", "#Hodges-Lehmann, signed ranks", "#two-way, over test examples too", "to trust before t"),
	}
	decided := &tabular{
		Caption: "What decides, and what casts doubt",
		Columns: columns("Arm", "#mean"+unit, "#skewness", "#p", "#p, Holm", "#p (worse)", "#p (worse), Holm", "#diverged", "#exact interval of that share"),
	}
	for i := range cs {
		c := &cs[i]
		intervals.Rows = append(intervals.Rows, []string{ // the SD with one decimal more than the differences it is of
			v.pairName(c), strconv.Itoa(c.N), fixed(v.words.scale(c.SD), v.words.digits+1),
			v.words.interval(c.Low, c.High), v.bca(c), v.words.interval(c.StudentLow, c.StudentHigh),
			v.words.interval(c.FlipLow, c.FlipHigh), v.middleWords(c), v.twoWay(c), orMissing(plain(c.Offered)),
		})
		decided.Rows = append(decided.Rows, []string{
			v.pairName(c), v.words.diff(c.Mean), fixed(c.Skewness, 2),
			probability(c.P), probability(c.Holm), probability(c.PWorse), probability(c.HolmWorse),
			fmt.Sprintf("%d of %d", c.Diverged, c.N), shares(c.DivergedLow, c.DivergedHigh),
		})
	}
	if !slices.ContainsFunc(cs, func(c results.Comparison) bool { return c.Items != nil }) {
		intervals.drop(8)
	}
	return []*tabular{intervals, decided}
}

// bca is the BCa interval, or that the pairs are too few to trust it: from so few
// it misses about twice as often as it says, and the studentised one stands beside.
func (v *view) bca(c *results.Comparison) string {
	if c.N < results.FewForBCa && !math.IsNaN(c.BootLow) {
		return "too few pairs"
	}
	return v.words.interval(c.BootLow, c.BootHigh)
}

// middleWords is the Hodges-Lehmann estimate with its interval.
func (v *view) middleWords(c *results.Comparison) string {
	if math.IsNaN(c.Middle) || math.IsNaN(c.RankLow) {
		return missing
	}
	return v.words.diff(c.Middle) + " " + v.words.interval(c.RankLow, c.RankHigh)
}

// classTable is how recall differs by class, of every comparison; nil when none
// was counted.
func (v *view) classTable() *tabular {
	t := &tabular{
		Caption: "Differences of recall by class, paired, in percentage points: a mean over classes can hide the one that loses",
		Columns: columns("Comparison", "class", "#mean", "#interval", "#n", "#worst replicate", "#its difference", "#p, Holm over classes"),
		Notes:   []string{"p is one-sided, against \"the class does not lose\": a small one says that it does."},
	}
	w := scoreWords{percent: true, digits: 1}
	for i, cs := 0, slices.Concat(v.Comparisons, v.Contrasts); i < len(cs); i++ {
		for _, k := range cs[i].Classes {
			name := plain(k.Name)
			if name == "" {
				name = v.class(k.Class)
			}
			t.Rows = append(t.Rows, []string{
				v.pairName(&cs[i]), name, w.diff(k.Mean), w.interval(k.Low, k.High), strconv.Itoa(k.N),
				strconv.FormatUint(k.Replicate, 10), w.diff(k.Worst), probability(k.Holm),
			})
		}
	}
	if len(t.Rows) == 0 {
		return nil
	}
	return t
}

// pairName names a comparison: the arm alone where it is against the baseline.
func (v *view) pairName(c *results.Comparison) string {
	if v.baseline != nil && c.Against == v.baseline.Slug {
		for _, a := range v.arms {
			if a.Slug == c.Arm {
				return a.Label()
			}
		}
	}
	return v.name(c.Arm) + " against " + v.name(c.Against)
}

// probability spells a p-value.
func probability(p float64) string {
	switch {
	case math.IsNaN(p):
		return missing
	case p > 0 && p < 1e-4:
		return "<0.0001"
	}
	return strings.TrimSpace(fixed(p, 4))
}
