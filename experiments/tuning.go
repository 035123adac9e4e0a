package experiments

import (
	"cmp"
	"context"
	"fmt"
	"math"
	"slices"
	"strings"
	"time"

	"ulpine/experiments/plan"
	"ulpine/results"
	"ulpine/results/store"
)

// tuningLayout is the layout of the runs that a plan's tuning needs. They belong to
// the plan's study and stand under its claim.
func tuningLayout(p *plan.Plan) *layout {
	l, of := newLayout(p.TuningPlan()), newLayout(p)
	l.study, l.claim, l.tuning = of.study, of.claim, true
	return l
}

// tunedLayout is the layout of a plan whose arms were given what they do best with.
func tunedLayout(p *plan.Plan, chosen []int) *layout {
	l, of := newLayout(p.Tuned(chosen)), newLayout(p)
	l.study, l.claim = of.study, of.claim
	return l
}

// runTuned does the runs of the tuning, chooses, and does those that are reported.
// What is stored of either is not run again.
func runTuned(ctx context.Context, p *plan.Plan, s *store.Store, o Options) (Summary, error) {
	began := time.Now()
	tuning, chosen, err := choose(p, s)
	if err != nil {
		return Summary{}, err
	}
	first := Summary{Runs: tuning.Runs, Before: tuning.Runs} // all stored already
	if chosen == nil {
		trials := o
		trials.Only = nil // the choice needs them all
		x := newRunner(tuningLayout(p), s, trials)
		x.tracker.note("tuning: %d runs choose for every arm, then the reported replicates start", tuning.Runs)
		if first, err = x.run(ctx); err != nil {
			return first, err
		}
		if tuning, chosen, err = choose(p, s); err != nil {
			return first, err
		}
		if chosen == nil {
			return first, fmt.Errorf("tuning: %d of %d runs are stored, though all were done; run the plan again", tuning.Stored, tuning.Runs)
		}
	}
	x := newRunner(tunedLayout(p, chosen), s, o)
	for _, line := range tuning.Chosen(x.nameOf) {
		x.tracker.note("tuned: %s", line)
	}
	all, err := x.run(ctx)
	all.Runs, all.Before, all.Done = all.Runs+first.Runs, all.Before+first.Before, all.Done+first.Done
	all.Wall = time.Since(began)
	return all, err
}

// nameOf is how the plan calls an arm.
func (l *layout) nameOf(slug string) string {
	for i := range l.all {
		if l.all[i].Slug == slug {
			return l.all[i].Name
		}
	}
	return slug
}

// choose reads the tuning's runs and says which pair each arm is given, by its index
// in the plan's pairs; chosen is nil while runs are missing.
func choose(p *plan.Plan, s *store.Store) (t *results.Tuning, chosen []int, err error) {
	l := tuningLayout(p)
	each, _ := l.perReplicate()
	t = &results.Tuning{
		Metric: p.Tuning.Metric, Replicates: p.Tuning.Replicates, FirstSeed: p.Tuning.FirstSeed,
		LearningRates: p.Tuning.RateWords(), LossScales: p.Tuning.ScaleWords(), Runs: each * p.Tuning.Replicates,
	}
	pairs := p.Tuning.Pairs()
	for i := range p.Arms {
		a := results.TunedArm{Arm: p.Arms[i].Slug, Chosen: -1}
		for _, pair := range pairs {
			rate, scale := p.Tuning.Words(pair, &p.Arms[i])
			a.Trials = append(a.Trials, results.Trial{LearningRate: rate, LossScale: scale, Mean: math.NaN()})
		}
		t.Arms = append(t.Arms, a)
	}
	if err := readTrials(l, s, t, len(pairs)); err != nil {
		return nil, nil, err
	}
	if t.Stored < t.Runs {
		return t, nil, nil
	}
	metric, _ := results.FindMetric(t.Metric)
	t.Done = true
	for i := range t.Arms {
		a := &t.Arms[i]
		a.Chosen = best(a.Trials, metric)
		a.Edge = p.Tuning.Edge(pairs[a.Chosen])
		chosen = append(chosen, a.Chosen)
	}
	return t, chosen, nil
}

// readTrials reads the scores of the tuning's runs, as far as they are stored.
func readTrials(l *layout, s *store.Store, t *results.Tuning, pairs int) error {
	metric, _ := results.FindMetric(t.Metric)
	var requests []results.Hash
	for _, seed := range l.seeds() {
		main, pre := l.requests(seed)
		requests = append(requests, main, pre)
	}
	data, err := s.Data(requests)
	if err != nil {
		return err
	}
	for _, seed := range l.seeds() {
		main, pre := l.requests(seed)
		if data[main].IsZero() || l.pre != nil && data[pre].IsZero() {
			continue // nothing was run on it
		}
		k := l.keysOf(seed, data[main], data[pre])
		known, err := s.Lookup(k.all())
		if err != nil {
			return err
		}
		for _, key := range k.all() {
			if known[key].State == results.Stored {
				t.Stored++
			}
		}
		for i := range l.groups {
			if e := known[k.groups[i]]; e.State == results.Stored {
				for _, at := range l.groups[i].arms {
					score(&t.Arms[at/pairs].Trials[at%pairs], &e, metric)
				}
			}
		}
	}
	for i := range t.Arms {
		for k := range t.Arms[i].Trials {
			t.Arms[i].Trials[k].Mean = meanScore(&t.Arms[i].Trials[k])
		}
	}
	return nil
}

// score adds one run to a trial. A run that diverged, or whose metric is no number,
// counts as diverged.
func score(trial *results.Trial, e *store.Entry, metric results.Metric) {
	x := metric.Final(&results.Run{Epochs: []results.Epoch{e.Last}})
	trial.N++
	trial.Scores = append(trial.Scores, x)
	if e.Diverged != "" || math.IsNaN(x) || math.IsInf(x, 0) {
		trial.Diverged++
		trial.Scores[trial.N-1] = math.NaN()
	}
}

// meanScore is the mean over the runs that did not diverge; NaN: there is none.
func meanScore(trial *results.Trial) float64 {
	var sum float64
	n := 0
	for _, x := range trial.Scores {
		if x == x {
			sum += x
			n++
		}
	}
	return sum / float64(n) // 0/0 is NaN
}

// best is the index of the trial with the fewest diverged runs, among those the one
// with the best mean, among those the first.
func best(trials []results.Trial, metric results.Metric) int {
	at := 0
	for i := 1; i < len(trials); i++ {
		switch a, b := &trials[i], &trials[at]; {
		case a.Diverged != b.Diverged:
			if a.Diverged < b.Diverged {
				at = i
			}
		case metric.Gain(a.Mean, b.Mean) > 0: // never with NaN
			at = i
		}
	}
	return at
}

// tuningWarnings are the doubts about a tuning that is done.
func tuningWarnings(t *results.Tuning, name func(string) string) (warnings []string) {
	edges := map[string][]string{} // learning rate -> arms
	var rates, broken []string
	for i := range t.Arms {
		a := &t.Arms[i]
		chosen := &a.Trials[a.Chosen]
		if a.Edge {
			if edges[chosen.LearningRate] == nil {
				rates = append(rates, chosen.LearningRate)
			}
			edges[chosen.LearningRate] = append(edges[chosen.LearningRate], name(a.Arm))
		}
		if chosen.Diverged > 0 {
			broken = append(broken, fmt.Sprintf("%s (%d of %d)", name(a.Arm), chosen.Diverged, chosen.N))
		}
	}
	slices.SortStableFunc(rates, func(a, b string) int { return cmp.Compare(len(edges[b]), len(edges[a])) })
	for _, rate := range rates {
		warnings = append(warnings, fmt.Sprintf("tuning: a learning rate of %s, chosen for %s, is at the end of the list that was tried; one beyond might do better",
			rate, strings.Join(edges[rate], ", ")))
	}
	if len(broken) > 0 {
		warnings = append(warnings, "tuning: even the best values tried diverged in some replicates for "+strings.Join(broken, ", "))
	}
	return warnings
}
