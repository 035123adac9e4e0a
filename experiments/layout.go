package experiments

import (
	"slices"
	"strings"

	"ulpine/experiments/plan"
	"ulpine/results"
	"ulpine/results/store"
	"ulpine/trainer"
)

// group is the arms of a plan that share their runs, because they have the same
// arithmetic and training; usually one. The pretraining is a group without arms.
type group struct {
	arms     []int // places in layout.all, ascending
	training trainer.Training
	arm      trainer.Arm
	macs     uint64 // multiply-adds of one run
}

// layout is a plan as the runner sees it.
type layout struct {
	*plan.Plan
	all    []plan.Arm // the arms, then the controls
	study  results.Hash
	claim  results.Claim
	groups []group // the baseline's first
	pre    *group  // nil: no pretraining
	tuning bool    // its arms are trials, none of which is compared with another
}

func newLayout(p *plan.Plan) *layout {
	l := &layout{Plan: p, all: slices.Concat(p.Arms, p.Controls), study: studyID(p), claim: claimOf(p)}
	place := map[string]int{}
	for i := range l.all {
		a := &l.all[i]
		if at, known := place[a.Canonical]; known {
			l.groups[at].arms = append(l.groups[at].arms, i)
			continue
		}
		place[a.Canonical] = len(l.groups)
		l.groups = append(l.groups, group{[]int{i}, a.Training, a.Arithmetic, l.work(&p.Task, a.Training)})
	}
	if pre := p.Pretrain; pre != nil {
		l.pre = &group{training: pre.Training, arm: pre.Arithmetic, macs: l.work(&pre.Task, pre.Training)}
	}
	return l
}

// work is the multiply-adds of one training on a task.
func (l *layout) work(t *plan.Task, training trainer.Training) uint64 {
	sizes := trainer.Sizes{Train: t.Train, Validation: t.Validation, Test: t.Test}
	return trainer.Describe(l.Network, nil, training, sizes).TotalMACs
}

// seeds are those of the replicates, in order.
func (l *layout) seeds() []uint64 {
	seeds := make([]uint64, l.Replicates.Count)
	for i := range seeds {
		seeds[i] = l.Replicates.FirstSeed + uint64(i)
	}
	return seeds
}

// perReplicate is the number of different runs of one replicate, and their work.
func (l *layout) perReplicate() (runs int, macs uint64) {
	for i := range l.groups {
		macs += l.groups[i].macs
	}
	runs = len(l.groups)
	if l.pre != nil {
		runs, macs = runs+1, macs+l.pre.macs
	}
	return runs, macs
}

// slug is the name under which a group's runs are made: that of its first arm.
func (l *layout) slug(g *group) string {
	if g == l.pre {
		return plan.PretrainSlug
	}
	return l.all[g.arms[0]].Slug
}

// label is a group's arms as the plan calls them.
func (l *layout) label(g *group) string {
	if g == l.pre {
		return "pretraining"
	}
	names := make([]string, len(g.arms))
	for i, at := range g.arms {
		names[i] = l.all[at].Name
	}
	return strings.Join(names, " = ")
}

// keys are those of one replicate's runs.
type keys struct {
	pre    results.Hash   // zero without pretraining
	groups []results.Hash // one a group
}

// keysOf computes the keys of a replicate from the hashes of its data; pre is
// not used without pretraining.
func (l *layout) keysOf(seed uint64, data, pre results.Hash) keys {
	k := keys{groups: make([]results.Hash, len(l.groups))}
	if l.pre != nil {
		k.pre = pretrainKey(l.Plan, pre, seed)
	}
	for i := range l.groups {
		k.groups[i] = runKey(l.Plan, &l.all[l.groups[i].arms[0]], data, seed, k.pre)
	}
	return k
}

// all lists every key of the replicate once.
func (k keys) all() []results.Hash {
	if k.pre.IsZero() {
		return k.groups
	}
	return append(slices.Clone(k.groups), k.pre)
}

// compared reports whether a group's runs are an arm's, and not only the
// baseline's or a control's.
func (l *layout) compared(g *group) bool {
	return !l.tuning && g.arms[0] != 0 && g.arms[0] < len(l.Arms)
}

// planned names the runs of a replicate for the store: every arm, and the
// pretraining behind them.
func (l *layout) planned(seed uint64, k keys) []store.Planned {
	var runs []store.Planned
	for i := range l.groups {
		for _, at := range l.groups[i].arms {
			runs = append(runs, store.Planned{
				Arm: l.all[at].Slug, Replicate: seed, Key: k.groups[i], Place: at, Compared: l.compared(&l.groups[i]),
			})
		}
	}
	if l.pre != nil {
		runs = append(runs, store.Planned{Arm: plan.PretrainSlug, Replicate: seed, Key: k.pre, Place: len(l.all)})
	}
	return runs
}

// requests names the data of a replicate: of the task and, if there is a
// pretraining, of that.
func (l *layout) requests(seed uint64) (main, pre results.Hash) {
	main = requestOf(&l.Task, seed)
	if l.pre != nil {
		pre = requestOf(&l.Pretrain.Task, seed)
	}
	return main, pre
}
