package experiments

import (
	"context"
	"fmt"

	"ulpine/results"
	"ulpine/results/compare"
)

// lookByLook does the runs up to one look after the other, in ascending order of
// replicates, until a look decides everything. A plan without looks has one, after
// all its replicates, at which nothing is asked.
func (x *runner) lookByLook(ctx context.Context) {
	looks := compare.Looks{UpTo: x.Replicates.Count, Every: x.Replicates.LookEvery}
	if len(x.options.Only) > 0 {
		looks.Every = 0 // single runs decide nothing
	}
	for at := 0; at < looks.UpTo && ctx.Err() == nil; {
		at = looks.Next(at)
		x.schedule = newSchedule(ctx, x.ask(at), x.options.Workers, x.team)
		unhook := context.AfterFunc(ctx, x.schedule.wake)
		x.work(ctx)
		unhook()
		if at == looks.UpTo || ctx.Err() != nil {
			return
		}
		x.pending.Wait() // a look is at what the store has
		why, err := x.look(at)
		switch {
		case err != nil:
			x.stop(err)
		case why != "":
			x.decided = true
			x.tracker.note("stopped after %d of at most %d replicates: %s", at, looks.UpTo, why)
			return
		default:
			x.tracker.note("looked after %d of at most %d replicates: not everything is decided, going on", at, looks.UpTo)
		}
	}
}

// look judges the plan by its first replicates and says why no more are needed;
// empty: they are. A diverged baseline leaves nothing to be decided by more.
func (x *runner) look(replicates int) (why string, err error) {
	part := *x.Plan
	part.Replicates.Count = replicates
	l := *x.layout
	l.Plan = &part
	study := &results.Study{
		Metric: x.Plan.Claim.Metric, Margin: x.Plan.Claim.Margin, Confidence: x.Plan.Claim.Confidence,
		Claim: x.claim, Planned: x.Replicates.Count, Classes: x.Task.ClassNames,
	}
	if err := readRuns(&l, x.store, study); err != nil {
		return "", err
	}
	if problem := baselineProblem(&part, study.Runs); problem != "" {
		return problem, nil
	}
	for i := range study.Runs {
		study.Runs[i].Predictions = nil // intervals over examples decide nothing, and take long
	}
	comparisons(&l, study)
	if compare.Settled(study.Comparisons) && compare.Settled(study.Contrasts) {
		return "every comparison is decided", nil
	}
	return "", nil
}

// looksLine says when a study looks at its pairs and how far it came; empty: it
// waits for all of them.
func looksLine(study *results.Study) string {
	every, upTo := study.Claim.LookEvery, study.Planned
	if every == 0 {
		return ""
	}
	at := compare.Looks{UpTo: upTo, Every: every}.At()
	pairs := upTo // of the comparison that has the fewest
	for _, c := range append(append([]results.Comparison{}, study.Comparisons...), study.Contrasts...) {
		pairs = min(pairs, c.N)
	}
	latest := 0
	for latest < len(at) && at[latest] <= pairs {
		latest++
	}
	line := fmt.Sprintf("after every %d pairs, %d at most", every, upTo)
	settled := compare.Settled(study.Comparisons) && compare.Settled(study.Contrasts)
	switch {
	case latest == 0:
		return line + "; the first one is still to come"
	case latest == len(at):
		line += fmt.Sprintf("; went to the last of %d looks, after %d pairs", latest, at[latest-1])
	case settled:
		line += fmt.Sprintf("; stopped at look %d of %d, after %d pairs: every comparison is decided", latest, len(at), at[latest-1])
	default:
		line += fmt.Sprintf("; look %d of %d, after %d pairs, did not decide everything", latest, len(at), at[latest-1])
	}
	return line + "; the intervals shown are not widened for the looks"
}
