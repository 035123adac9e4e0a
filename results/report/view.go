package report

import (
	"sort"
	"strconv"

	"ulpine/results"
)

// view is a study with what several sections need: its arms with their runs,
// comparisons, strips and curves.
type view struct {
	*results.Study
	words    scoreWords
	arms     []*armView // the baseline first when there is one
	baseline *armView   // nil: none
	clock    clock
}

// armView is one arm with all that is known about it.
type armView struct {
	results.Arm
	Number     int                 // 0 is the baseline, the others count from 1 in plan order
	Comparison *results.Comparison // with the baseline; nil: none
	Runs       []*results.Run      // ascending replicates
	Strips     []strip
	Bill       *results.Bill // what it costs by model; nil: not known
	Score      estimate      // the metric after the last epoch
	Training   curve
	Validation curve
	Test       curve
}

// newView gathers a study. The study is not altered.
func newView(s *results.Study) *view {
	v := &view{Study: s, words: newScoreWords(s.Metric, s.Margin)}
	v.words.metric = v.words.metric.Of(s.Regression)
	bySlug := map[string]*armView{}
	next := 1 // numbers follow the plan's order and are the same in all figures
	for _, a := range s.Arms {
		av := &armView{Arm: a, Strips: strips(a.Settings)}
		if a.Baseline && v.baseline == nil {
			v.baseline = av
		} else {
			av.Number = next
			next++
		}
		v.arms = append(v.arms, av)
		bySlug[a.Slug] = av
	}
	for i := range s.Comparisons {
		// The first comparison counts: an arm has one with the baseline.
		if av := bySlug[s.Comparisons[i].Arm]; av != nil && av.Comparison == nil {
			av.Comparison = &s.Comparisons[i]
		}
	}
	for i := range s.Runs {
		// Runs of no arm, pretraining say, appear in the list of runs alone.
		if av := bySlug[s.Runs[i].Arm]; av != nil {
			av.Runs = append(av.Runs, &s.Runs[i])
		}
	}
	if c := s.Costs; c != nil {
		for i := range c.Bills {
			if av := bySlug[c.Bills[i].Arm]; av != nil {
				av.Bill = &c.Bills[i]
			}
		}
		if v.baseline != nil && v.baseline.Bill == nil { // the baseline is the model's reference
			v.baseline.Bill = &c.Reference
		}
	}
	v.gather()
	return v
}

// gather forms curves and scores once every run has its arm.
func (v *view) gather() {
	var all []*results.Run
	for _, a := range v.arms {
		sort.SliceStable(a.Runs, func(i, j int) bool { return a.Runs[i].Replicate < a.Runs[j].Replicate })
		all = append(all, a.Runs...)
	}
	v.clock = newClock(all)
	for _, a := range v.arms {
		a.Training = v.clock.training(a.Runs)
		a.Validation = v.clock.byEpoch(a.Runs, func(e *results.Epoch) float64 { return e.ValidationLoss })
		a.Test = v.clock.byEpoch(a.Runs, func(e *results.Epoch) float64 { return e.TestLoss })
		if v.words.known {
			scores := make([]float64, len(a.Runs))
			for i, r := range a.Runs {
				scores[i] = v.words.metric.Final(r)
			}
			a.Score = tInterval(scores, v.Confidence)
		} else {
			a.Score = tInterval(nil, v.Confidence)
		}
	}
}

// others are the arms besides the baseline.
func (v *view) others() []*armView {
	var out []*armView
	for _, a := range v.arms {
		if a != v.baseline {
			out = append(out, a)
		}
	}
	return out
}

// name is an arm's name by its slug; the slug itself when the arm is unknown.
func (v *view) name(slug string) string {
	for _, a := range v.arms {
		if a.Slug == slug {
			return plain(a.Name)
		}
	}
	return plain(slug)
}

// Label is the arm's number and name: "3 bf16 nearest". The baseline has no number.
func (a *armView) Label() string {
	if a.Number == 0 {
		return plain(a.Name)
	}
	return strconv.Itoa(a.Number) + " " + plain(a.Name)
}

// kind is the arm's verdict; ok is false when it has none.
func (a *armView) kind() (k results.VerdictKind, ok bool) {
	if a.Comparison == nil {
		return 0, false
	}
	return a.Comparison.Verdict.Kind, true
}

// sentences are the answer's sentences: the first is what a reader takes away, the
// others qualify it. Joined by blanks they are the answer. What stands in
// brackets or in quotation marks is not taken apart.
func (v *view) sentences() []string {
	var out []string
	rest := []rune(v.answer())
	depth, quoted, from := 0, false, 0
	for i, r := range rest {
		switch r {
		case '(', '[':
			depth++
		case ')', ']':
			depth = max(0, depth-1)
		case '“', '”':
			quoted = r == '“'
		case ' ':
			if depth == 0 && !quoted && i > from && rest[i-1] == '.' {
				out, from = append(out, string(rest[from:i])), i+1
			}
		}
	}
	return append(out, string(rest[from:]))
}

// answer is the sentence that comes first everywhere.
func (v *view) answer() string {
	switch {
	case plain(v.Answer) != "":
		return plain(v.Answer)
	case len(v.Comparisons) == 0:
		return "No answer: no arm has been compared with the baseline."
	}
	return "No answer sentence was written; the verdicts below stand for themselves."
}
