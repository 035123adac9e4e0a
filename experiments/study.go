package experiments

import (
	"errors"
	"fmt"
	"strconv"
	"strings"
	"time"

	"ulpine/experiments/plan"
	"ulpine/results"
	"ulpine/results/compare"
	"ulpine/results/cost"
	"ulpine/results/store"
)

// Study builds what a report says of a plan from what the store has of it:
// runs, comparisons, verdicts, the answer, warnings and cautions. It runs
// nothing and draws no data. A plan that was never run gives a study without
// runs, not an error.
func Study(p *plan.Plan, s *store.Store) (*results.Study, error) {
	if p.Tuning == nil {
		return studyOf(newLayout(p), s, nil)
	}
	tuning, chosen, err := choose(p, s)
	if err != nil {
		return nil, err
	}
	if chosen == nil {
		return studyOf(newLayout(p), s, tuning)
	}
	study, err := studyOf(tunedLayout(p, chosen), s, tuning)
	if err == nil {
		study.Warnings = append(study.Warnings, tuningWarnings(tuning, newLayout(p).nameOf)...)
	}
	return study, err
}

// studyOf is the study of a layout; a tuning that is not done has no runs to report
// yet, whatever another plan has stored of the same arms.
func studyOf(l *layout, s *store.Store, tuning *results.Tuning) (*results.Study, error) {
	p, study := l.Plan, describe(l)
	study.Tuning = tuning
	study.CodeVersion, study.Written = CodeVersion(), time.Now()
	study.Rerun = rerun(p, s)
	digest, err := s.Digest()
	if err != nil {
		return nil, err
	}
	study.StoreDigest = digest.String()
	if err := readClaim(l, s, study); err != nil {
		return nil, err
	}
	if tuning == nil || tuning.Done {
		if err := readRuns(l, s, study); err != nil {
			return nil, err
		}
	}
	study.BaselineProblem = baselineProblem(p, study.Runs)
	comparisons(l, study)
	study.Looks = looksLine(study)
	study.Cautions = cautions(p, study)
	study.Answer = compare.Answer(study)
	study.Volumes, study.Ranges = volumes(p), ranges(p)
	machine, _ := cost.FindMachine(cost.DefaultMachine)
	if err := AddCosts(study, p, machine, cost.DefaultEnergy()); err != nil {
		study.Warnings = append(study.Warnings, "costs are left out: "+err.Error())
	}
	return study, nil
}

// readClaim sets what the store knows of the plan's claim.
func readClaim(l *layout, s *store.Store, study *results.Study) error {
	fixed, differs, err := s.Claim(l.study, l.claim)
	if errors.Is(err, store.ErrNoStudy) {
		return nil
	}
	if err != nil {
		return err
	}
	study.FixedClaim, study.MarginFixed, study.MarginChanged = fixed, fixed.Fixed, differs
	if fixed.RunsBefore > 0 && len(fixed.Earlier) > 0 {
		text := fmt.Sprintf("it was fixed when %s of its arms had been stored under another claim (%s)",
			number(fixed.RunsBefore, "run"), strings.Join(fixed.Earlier, "; "))
		if differs != "" {
			text = differs + "; " + text
		}
		study.MarginChanged = text
	}
	if study.MarginChanged != "" {
		study.Warnings = append(study.Warnings, "the claim was changed after the first run: "+study.MarginChanged)
	}
	return nil
}

// readRuns reads the stored runs of the plan, every arm under its own name, and
// warns of those that failed.
func readRuns(l *layout, s *store.Store, study *results.Study) error {
	var requests []results.Hash
	for _, seed := range l.seeds() {
		main, pre := l.requests(seed)
		requests = append(requests, main, pre)
	}
	data, err := s.Data(requests)
	if err != nil {
		return err
	}
	r := reader{layout: l, store: s, study: study}
	for _, seed := range l.seeds() {
		main, pre := l.requests(seed)
		if data[main].IsZero() || l.pre != nil && data[pre].IsZero() {
			continue // nothing was run on it
		}
		if err := r.replicate(seed, l.keysOf(seed, data[main], data[pre])); err != nil {
			return err
		}
	}
	study.Warnings = append(study.Warnings, failureWarnings(r.failures)...)
	study.Warnings = append(study.Warnings, alarmWarnings(study)...)
	return nil
}

// alarmWarnings doubts a rate of false alarms that so few sound examples cannot tell.
func alarmWarnings(study *results.Study) []string {
	metric, _ := results.FindMetric(study.Metric)
	for i := range study.Runs {
		r := &study.Runs[i]
		if n := metric.FewSound(r); n > 0 && r.Arm != plan.PretrainSlug {
			return []string{fmt.Sprintf("%s is told from %s of class 0, too few to allow one false alarm: it is that without any", study.Metric, number(int(n), "example"))}
		}
	}
	return nil
}

// reader gathers runs into a study.
type reader struct {
	*layout
	store    *store.Store
	study    *results.Study
	failures []failure
}

func (r *reader) replicate(seed uint64, k keys) error {
	known, err := r.store.Lookup(k.all())
	if err != nil {
		return err
	}
	for i := range r.groups {
		for _, at := range r.groups[i].arms {
			if err := r.take(known[k.groups[i]], r.all[at].Slug, seed); err != nil {
				return err
			}
		}
	}
	if r.pre == nil {
		return nil
	}
	return r.take(known[k.pre], plan.PretrainSlug, seed)
}

// take adds one run under the name that the plan gives it.
func (r *reader) take(e store.Entry, arm string, seed uint64) error {
	switch e.State {
	case results.Failed:
		r.failures = append(r.failures, failure{arm, seed, e.Cause})
		return nil
	case results.Stored:
	default:
		return nil
	}
	run, err := r.store.Curve(e.Key)
	if err != nil {
		return err
	}
	run.Arm, run.Replicate = arm, seed
	r.diagnose(run)
	r.study.Runs = append(r.study.Runs, *run)
	return nil
}

// comparisons compares every arm with the baseline, and the arms of each
// contrast with each other.
func comparisons(l *layout, study *results.Study) {
	metric, _ := results.FindMetric(study.Metric)
	byArm := map[string][]results.Run{}
	for _, r := range study.Runs {
		byArm[r.Arm] = append(byArm[r.Arm], r)
	}
	pair := func(arm, against string, margin float64, headline bool) results.Comparison {
		return compare.Pair(compare.Question{
			Arm: arm, Against: against, Metric: metric, Margin: margin,
			Confidence: study.Confidence, Planned: study.Planned, LookEvery: study.Claim.LookEvery, Headline: headline, Classes: study.Classes, Regression: study.Regression,
		}, byArm[arm], byArm[against])
	}
	for i := range l.Arms[1:] {
		study.Comparisons = append(study.Comparisons, pair(l.Arms[i+1].Slug, l.Baseline().Slug, study.Margin, false))
	}
	for _, c := range l.Contrasts {
		study.Contrasts = append(study.Contrasts, pair(c.Arm, c.Against, c.Margin, true))
	}
	noiseFloor(l, study, pair)
	for i := range study.Runs {
		study.Runs[i].Predictions = nil // compared: a study may hold thousands of runs
	}
	study.Comparisons, study.Contrasts = compare.Decide(study.Comparisons), compare.Decide(study.Contrasts)
}

// baselineProblem says in which replicates the baseline or its pretraining
// diverged; empty: in none.
func baselineProblem(p *plan.Plan, runs []results.Run) string {
	var problems []string
	for _, arm := range []struct{ slug, name string }{{p.Baseline().Slug, "the baseline"}, {plan.PretrainSlug, "the pretraining"}} {
		var seeds []string
		for _, r := range runs {
			if r.Arm == arm.slug && r.Diverged != "" {
				seeds = append(seeds, strconv.FormatUint(r.Replicate, 10))
			}
		}
		if len(seeds) > 0 {
			problems = append(problems, fmt.Sprintf("%s diverged in %d of %s (%s)",
				arm.name, len(seeds), number(p.Replicates.Count, "replicate"), strings.Join(seeds, ", ")))
		}
	}
	return strings.Join(problems, ", and ")
}

// number is a count with its noun, plural by an s.
func number(n int, noun string) string {
	if n == 1 {
		return "1 " + noun
	}
	return strconv.Itoa(n) + " " + noun + "s"
}
