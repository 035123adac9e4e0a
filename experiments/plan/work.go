package plan

import "ulpine/trainer"

// Work is what a plan costs before it is run.
type Work struct {
	Runs        int    // pretrainings and controls included
	Pretraining int    // of those
	Controls    int    // of those
	Tuning      int    // of those, pretrainings of the tuning included
	MACs        uint64 // multiply-adds of all runs, backward passes and evaluations included
	LongestSum  int    // terms of the longest sum of any run
}

// Work adds up all runs of the plan.
func (p *Plan) Work() Work {
	w := Work{Runs: p.Runs()}
	each := uint64(0)
	add := func(t trainer.Training, task *Task) {
		d := trainer.Describe(p.Network, nil, t, task.Sizes())
		each += d.TotalMACs
		w.LongestSum = max(w.LongestSum, d.LongestSum)
	}
	for i := range p.Arms {
		add(p.Arms[i].Training, &p.Task)
	}
	for i := range p.Controls {
		w.Controls += p.Replicates.Count
		add(p.Controls[i].Training, &p.Task)
	}
	if p.Pretrain != nil {
		w.Pretraining = p.Replicates.Count
		add(p.Pretrain.Training, &p.Pretrain.Task)
	}
	w.MACs = each * uint64(p.Replicates.Count)
	if p.Tuning != nil {
		t := p.TuningPlan().Work()
		w.Tuning, w.MACs = t.Runs, w.MACs+t.MACs
	}
	return w
}
